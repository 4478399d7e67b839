//! The run as columns of numbers, for the plots that move with the player: one entry a usable frame, the logs beside
//! them, every forecast as it was issued.

use serde::Serialize;

use crate::measure::FrameRow;
use crate::report::axes::TimeUnit;
use crate::report::drawing::thin;
use crate::report::schema::round;
use crate::results::{Results, ReviewMark};

/// Columns of screen pixels a log is thinned for: wider than any plot of the page.
const COLUMNS: usize = 1200;

/// A column of numbers; `null` where a value is absent.
type Column = Vec<Option<f64>>;

/// Everything the page's script draws.
#[derive(Serialize)]
pub(super) struct Record {
    run: String,
    um_per_px: f64,
    gap_um: Option<f64>,
    /// Name of the unit of time and its length, s.
    unit: (&'static str, f64),
    /// One entry a usable frame.
    frame: Vec<usize>,
    time_s: Vec<f64>,
    depth_um: Column,
    u_depth_um: Column,
    fraction: Column,
    tips: Vec<Option<usize>>,
    stress_mpa: Column,
    force_n: Column,
    axis_deg: Column,
    drift_px: Vec<[Option<f64>; 2]>,
    /// Time, filament, direction, length, angle to the load of each piece of growth.
    growth: Vec<(f64, u32, f64, f64, Option<f64>)>,
    /// Time of issue, p10, p25, p50, p75, p90, chance by the horizon, horizon.
    forecasts: Vec<[Option<f64>; 8]>,
    load: Option<Log>,
    cell: Vec<Log>,
    filaments: Vec<Filament>,
    short_s: Option<f64>,
    reviewed: Vec<ReviewMark>,
}

/// Number, first time, root, final depth, final length, bridged.
#[derive(Serialize)]
struct Filament(u32, f64, [f64; 2], Option<f64>, f64, bool);

/// A logged quantity against time.
#[derive(Serialize)]
struct Log {
    name: &'static str,
    unit: &'static str,
    /// The ink of its line.
    ink: &'static str,
    time_s: Vec<f64>,
    value: Column,
}

pub(super) fn of(results: &Results) -> Record {
    let used: Vec<&FrameRow> = results.frames.iter().filter(|row| row.usable).collect();
    let column =
        |pick: fn(&FrameRow) -> Option<f64>, decimals| used.iter().map(|row| short(pick(row), decimals)).collect();
    let last = used.last().map_or(0.0, |row| row.time_s);
    let unit = TimeUnit::of(last);
    Record {
        run: results.facts.run.clone(),
        um_per_px: results.facts.um_per_px,
        gap_um: results.facts.gap_um,
        unit: (unit.name, unit.seconds),
        frame: used.iter().map(|row| row.frame).collect(),
        time_s: used.iter().map(|row| round(row.time_s, 3).unwrap_or(row.time_s)).collect(),
        depth_um: column(|row| row.depth_um, 2),
        u_depth_um: column(|row| row.u_depth_um, 2),
        fraction: column(|row| row.depth_fraction, 4),
        tips: used.iter().map(|row| row.tips).collect(),
        stress_mpa: column(|row| row.stress_mpa, 2),
        force_n: column(|row| row.load_n, 4),
        axis_deg: column(|row| row.load_direction_deg, 2),
        drift_px: used.iter().map(|row| [short(row.drift_x_px, 2), short(row.drift_y_px, 2)]).collect(),
        growth: growth(results),
        forecasts: forecasts(results),
        load: load(results),
        cell: cell(results),
        filaments: results
            .filaments
            .iter()
            .map(|row| {
                let root = [row.root_x_px, row.root_y_px].map(|v| round(v, 2).unwrap_or(v));
                let length = round(row.final_length_um, 2).unwrap_or(row.final_length_um);
                Filament(row.filament, row.first_time_s, root, short(row.final_depth_um, 2), length, row.bridged)
            })
            .collect(),
        short_s: results.summary.short.time_s.filter(|_| results.summary.short.observed),
        reviewed: results.summary.review.as_ref().map_or_else(Vec::new, |review| review.marks.clone()),
    }
}

fn short(value: Option<f64>, decimals: u8) -> Option<f64> {
    value.and_then(|value| round(value, decimals))
}

fn growth(results: &Results) -> Vec<(f64, u32, f64, f64, Option<f64>)> {
    let rounded = |v: f64, decimals| round(v, decimals).unwrap_or(v);
    results
        .growth
        .iter()
        .map(|row| {
            let to_load = short(row.angle_to_load_deg, 1);
            (row.time_s, row.filament, rounded(row.angle_deg, 1), rounded(row.length_um, 2), to_load)
        })
        .collect()
}

fn forecasts(results: &Results) -> Vec<[Option<f64>; 8]> {
    let rows = results.forecasts.iter().map(|row| {
        let quantiles = [row.p10_s, row.p25_s, row.p50_s, row.p75_s, row.p90_s].map(|q| short(q, 1));
        let [p10, p25, p50, p75, p90] = quantiles;
        [Some(row.issued_at_s), p10, p25, p50, p75, p90, short(row.chance_by_horizon, 4), short(Some(row.horizon_s), 1)]
    });
    rows.collect()
}

/// Stress where it is known, else force.
fn load(results: &Results) -> Option<Log> {
    let log = &results.load;
    let made = |name, unit, values: &[Option<f64>]| thinned(name, unit, "load", &log.time_s, values);
    made("stress", "MPa", &log.stress_mpa).or_else(|| made("force", "N", &log.force_n))
}

fn cell(results: &Results) -> Vec<Log> {
    let log = &results.cell;
    let made = |name, unit, ink, values: &[Option<f64>]| thinned(name, unit, ink, &log.time_s, values);
    [made("voltage", "V", "voltage", &log.voltage_v), made("current", "mA", "current", &log.current_ma)]
        .into_iter()
        .flatten()
        .collect()
}

/// The samples, holes kept, each unbroken stretch with no more points than a plot can show.
fn thinned(
    name: &'static str,
    unit: &'static str,
    ink: &'static str,
    time_s: &[f64],
    values: &[Option<f64>],
) -> Option<Log> {
    values.iter().find(|value| value.is_some())?;
    let samples: Vec<(f64, Option<f64>)> = time_s.iter().copied().zip(values.iter().copied()).collect();
    let (mut times, mut kept) = (Vec::new(), Vec::new());
    for run in samples.chunk_by(|a, b| a.1.is_some() == b.1.is_some()) {
        let points: Vec<[f64; 2]> = run.iter().filter_map(|(t, v)| Some([*t, (*v)?])).collect();
        if points.is_empty() {
            times.extend(run.first().map(|(t, _)| *t));
            kept.push(None);
        }
        for [t, v] in thin(&points, COLUMNS) {
            times.push(round(t, 2).unwrap_or(t));
            kept.push(round(v, 5));
        }
    }
    Some(Log { name, unit, ink, time_s: times, value: kept })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_long_log_is_thinned_and_its_holes_stay() {
        let time: Vec<f64> = (0..60_000).map(f64::from).collect();
        let mut values: Vec<Option<f64>> = time.iter().map(|t| Some((t * 0.01).sin())).collect();
        values[30_000] = None;
        let log = thinned("stress", "MPa", "load", &time, &values).unwrap();
        assert!(log.value.len() <= 8 * COLUMNS + 1, "{}", log.value.len());
        assert_eq!(log.value.iter().filter(|value| value.is_none()).count(), 1);
        assert!(thinned("stress", "MPa", "load", &time, &[None]).is_none());
    }
}
