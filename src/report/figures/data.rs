//! The data behind each figure as CSV, named and rounded as in the tables where a table holds them.

use std::fmt::Write;

use crate::report::Error;
use crate::report::schema::{CHARGE, FORECASTS, FRAMES, GROWTH, Table, round};
use crate::report::tables::write_some;
use crate::results::Results;

/// The CSV of a figure by its name; `None` for a name that is no figure's.
///
/// # Errors
/// [`Error::Made`] when the table library fails.
pub fn of(name: &str, results: &Results) -> Result<Option<Vec<u8>>, Error> {
    let frames = |names: &[&str]| some(&FRAMES, &results.frames, names);
    Ok(Some(match name {
        "overlay" => overlay(results).into_bytes(),
        "depth" => frames(&["frame", "time_s", "depth_um", "u_depth_um", "front_depth_um", "depth_fraction"])?,
        "forecast-record" => some(
            &FORECASTS,
            &results.forecasts,
            &["frame", "issued_at_s", "p10_s", "p25_s", "p50_s", "p75_s", "p90_s", "horizon_s", "chance_by_horizon"],
        )?,
        "rose" => {
            some(&GROWTH, &results.growth, &["frame", "filament", "length_um", "angle_deg", "angle_to_load_deg"])?
        }
        "alignment" => {
            frames(&["frame", "time_s", "alignment", "growth_alignment", "stress_mpa", "load_direction_deg"])?
        }
        "electrical" => electrical(results).into_bytes(),
        "steering" => some(
            &GROWTH,
            &results.growth,
            &[
                "frame",
                "time_s",
                "load_time_s",
                "filament",
                "length_um",
                "angle_deg",
                "load_direction_deg",
                "stress_mpa",
            ],
        )?,
        "kink" => kink(results).into_bytes(),
        "speed" => some(
            &CHARGE,
            &results.charge,
            &["frame", "time_s", "tip_speed_um_per_s", "stress_mpa", "current_ma", "current_ma_per_cm2"],
        )?,
        "charge" => some(
            &CHARGE,
            &results.charge,
            &["frame", "time_s", "charge_mah", "depth_um", "front_depth_um", "visible_um3", "faraday_um3"],
        )?,
        _ => return Ok(None),
    }))
}

fn some<R>(table: &Table<R>, rows: &[R], names: &[&str]) -> Result<Vec<u8>, Error> {
    let mut out = Vec::new();
    write_some(table, rows, names, &mut out)?;
    Ok(out)
}

/// A number with so many decimals; empty where absent.
fn cell(value: Option<f64>, decimals: u8) -> String {
    value.and_then(|value| round(value, decimals)).map_or_else(String::new, |value| value.to_string())
}

fn overlay(results: &Results) -> String {
    let mut out = "filament,path,x_px,y_px,arrival_frame,arrival_s\n".to_owned();
    for path in &results.trace.paths {
        for point in &path.points {
            let arrival = results.frames.get(point.arrival).map(|row| row.time_s);
            let _infallible = writeln!(
                out,
                "{},{},{},{},{},{}",
                path.filament,
                path.path,
                cell(Some(point.x), 3),
                cell(Some(point.y), 3),
                point.arrival,
                cell(arrival, 3)
            );
        }
    }
    out
}

fn electrical(results: &Results) -> String {
    let log = &results.cell;
    let mut out = "time_s,voltage_v,current_ma\n".to_owned();
    for (i, time) in log.time_s.iter().enumerate() {
        let value = |column: &[Option<f64>]| cell(column.get(i).copied().flatten(), 6);
        let _infallible =
            writeln!(out, "{},{},{}", cell(Some(*time), 3), value(&log.voltage_v), value(&log.current_ma));
    }
    out
}

fn kink(results: &Results) -> String {
    let mut out =
        "from_deg,to_deg,measured_deg,measured_low_deg,measured_high_deg,predicted_deg,pieces,filaments\n".to_owned();
    for bin in results.summary.kink_model.iter().flat_map(|model| &model.bins) {
        let end = |i: usize| cell(bin.measured_ci95.map(|ends| ends[i]), 3);
        let [from, to, measured, predicted] =
            [bin.from_deg, bin.to_deg, bin.measured_deg, bin.predicted_deg].map(|value| cell(Some(value), 3));
        let _infallible =
            writeln!(out, "{from},{to},{measured},{},{},{predicted},{},{}", end(0), end(1), bin.pieces, bin.filaments);
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::report::example;
    use crate::report::figures::FIGURES;

    #[test]
    fn every_column_asked_for_exists_and_absence_is_empty() {
        let results = example::growing();
        for figure in &FIGURES {
            let csv = String::from_utf8(of(figure.name, &results).unwrap().unwrap()).unwrap();
            assert!(!csv.contains("NaN") && !csv.contains("null"), "{}", figure.name);
        }
        let depth = String::from_utf8(of("depth", &results).unwrap().unwrap()).unwrap();
        assert_eq!(depth.lines().next().unwrap(), "frame,time_s,depth_um,u_depth_um,front_depth_um,depth_fraction");
        assert_eq!(depth.lines().count(), results.frames.len() + 1);
        assert!(of("nothing", &results).unwrap().is_none());
    }
}
