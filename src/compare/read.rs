//! A finished output folder → [`RunRecord`]: `summary.json`, `tables/frames.csv`, `growth.csv`, `filaments.csv`; no frames.
//! Columns are found by name, so later ones may be added. Limit: it trusts the output; whether `run.toml` has changed since is
//! checked by its hash, the frames are not read again.

use std::fs;
use std::path::{Path, PathBuf};
use std::sync::Arc;

use polars::prelude::{CsvParseOptions, CsvReadOptions, DataFrame, NullValues, PlSmallStr, SerReader};
use sha2::{Digest, Sha256};

use super::Fault;
use super::record::{Conditions, FilamentRecord, LoadRecord, LoadSample, PieceRecord, RunRecord};
use crate::load::axis::{acute_deg, edge_direction_deg, expected_axis_deg};
use crate::results::Summary;
use crate::run::Manifest;
use crate::run::manifest::{Ended, FILE_NAME, Filament};
use crate::stats::angles::fold_axis;
use crate::stats::order::{mean, median, variance};
use crate::trace::edges::Polyline;

/// The file that an output folder is known by.
pub const SUMMARY: &str = "summary.json";
/// The page of a run.
const REPORT: &str = "report.html";
/// A current that scatters less than this share of its mean is held constant (common practice).
const HELD: f64 = 0.05;
/// A current of the other sign above this share of the largest is no noise (common practice).
const OTHER_SIGN: f64 = 0.1;

/// A record and what tells whether two outputs are of one recording.
#[derive(Debug, Clone, PartialEq)]
pub struct Read {
    /// The run.
    pub record: RunRecord,
    /// SHA-256 of its frames' hashes.
    pub recording: [u8; 32],
}

/// Reads an output folder. `run` is the run folder, where it is at hand.
///
/// # Errors
/// [`Fault::Output`] naming the file and what is wrong with it.
pub fn read(output: &Path, run: Option<&Path>) -> Result<Read, Fault> {
    let path = output.join(SUMMARY);
    let text = fs::read_to_string(&path).map_err(|e| fault(&path, e.to_string()))?;
    let summary: Summary = serde_json::from_str(&text).map_err(|e| fault(&path, e.to_string()))?;
    let manifest = summary.settings.get("manifest").cloned().unwrap_or_default();
    let manifest: Manifest = serde_json::from_value(manifest).map_err(|e| fault(&path, e.to_string()))?;
    let tables = output.join("tables");
    let frames = frames(&tables.join("frames.csv"))?;
    let mut warnings = Vec::new();
    if run.is_some_and(|folder| changed(folder, &summary)) {
        warnings.push("run.toml has changed since its report was made".to_owned());
    }
    let (ended, followed_s) = end(&summary, &manifest, &frames, &mut warnings);
    let area_cm2 = manifest.cell.area_mm2.map(|area| area / 100.0);
    let record = RunRecord {
        run: summary.run.clone(),
        specimen: summary.specimen.clone().filter(|s| !s.trim().is_empty()),
        load: load(&frames, &manifest, followed_s),
        filaments: filaments(&tables, &manifest)?,
        depths: frames
            .iter()
            .filter(|f| f.time_s <= followed_s)
            .filter_map(|f| Some((f.time_s, f.depth_um?)))
            .collect(),
        rate_um_per_s: summary.depth.rate_um_per_s,
        followed_s,
        charge_mah_per_cm2: charge_at(&frames, followed_s).zip(area_cm2).map(|(charge, area)| charge / area),
        ended,
        conditions: conditions(&summary, &manifest, &frames, followed_s),
        warnings,
        report: Some(output.join(REPORT)).filter(|page| page.is_file()),
    };
    Ok(Read { record, recording: recording(&summary) })
}

fn fault(path: &Path, what: String) -> Fault {
    Fault::Output { path: path.to_owned(), what }
}

/// Whether `run.toml` is another than the one the output was made from.
fn changed(folder: &Path, summary: &Summary) -> bool {
    let (Ok(bytes), Some(known)) = (fs::read(folder.join(FILE_NAME)), summary.inputs.get(FILE_NAME)) else {
        return false;
    };
    let now: String = Sha256::digest(&bytes).iter().map(|b| format!("{b:02x}")).collect();
    now != *known
}

/// One hash over those of all frames: logs and manifest may be shared or rewritten, frames are the recording.
fn recording(summary: &Summary) -> [u8; 32] {
    const NOT_FRAMES: [&str; 2] = ["csv", "toml"];
    let mut hash = Sha256::new();
    for (name, own) in &summary.inputs {
        let ending = Path::new(name).extension().and_then(|e| e.to_str()).unwrap_or_default();
        if !NOT_FRAMES.contains(&ending) {
            hash.update(own.as_bytes());
        }
    }
    hash.finalize().into()
}

/// A usable frame.
#[derive(Debug, Clone, Copy, Default)]
struct Frame {
    time_s: f64,
    depth_um: Option<f64>,
    stress_mpa: Option<f64>,
    direction_deg: Option<f64>,
    current_ma: Option<f64>,
    voltage_v: Option<f64>,
    temperature_c: Option<f64>,
    charge_mah: Option<f64>,
}

fn frames(path: &Path) -> Result<Vec<Frame>, Fault> {
    let names = [
        "time_s",
        "usable",
        "depth_um",
        "stress_mpa",
        "load_direction_deg",
        "current_ma",
        "voltage_v",
        "temperature_c",
        "charge_mah",
    ];
    let table = Table::read(path, &names)?;
    let [time, usable, depth, stress, direction, current, voltage, temperature, charge] = table.numbers(names)?;
    Ok((0..time.len())
        .filter(|&i| usable[i].is_some_and(|u| u > 0.5))
        .filter_map(|i| {
            Some(Frame {
                time_s: time[i]?,
                depth_um: depth[i],
                stress_mpa: stress[i],
                direction_deg: direction[i],
                current_ma: current[i],
                voltage_v: voltage[i],
                temperature_c: temperature[i],
                charge_mah: charge[i],
            })
        })
        .collect())
}

/// How and when it ended: the short that was seen, else what `run.toml` says, at the last usable frame.
fn end(summary: &Summary, manifest: &Manifest, frames: &[Frame], warnings: &mut Vec<String>) -> (Ended, f64) {
    let last = frames.last().map_or(0.0, |f| f.time_s);
    let cut = summary.settings.get("until_s").is_some_and(|t| !t.is_null());
    match (summary.short.observed, summary.short.time_s, manifest.cell.ended) {
        (true, Some(time), _) => (Ended::Short, time),
        (true, None, _) => (Ended::Short, last),
        (false, _, _) if cut => {
            warnings.push("its report was cut with --until: it counts as stopped there".to_owned());
            (Ended::Stopped, last)
        }
        (false, _, Ended::Short) => {
            warnings.push(
                "it is said to have shorted, but neither log nor picture shows when: its last frame stands for it"
                    .to_owned(),
            );
            (Ended::Short, last)
        }
        (false, _, other) => (other, last),
    }
}

/// Charge at a time, between frames in proportion.
fn charge_at(frames: &[Frame], time_s: f64) -> Option<f64> {
    let after = frames.partition_point(|f| f.time_s < time_s);
    let (before, after) = (frames.get(after.saturating_sub(1))?, frames.get(after).or(frames.last())?);
    let (a, b) = (before.charge_mah?, after.charge_mah?);
    let span = after.time_s - before.time_s;
    let share = if span > 0.0 { ((time_s - before.time_s) / span).clamp(0.0, 1.0) } else { 1.0 };
    Some(a + share * (b - a))
}

fn load(frames: &[Frame], manifest: &Manifest, until_s: f64) -> LoadRecord {
    let edge = &manifest.cell.plating_edge;
    let along = Polyline::new(edge.clone()).and_then(|line| edge_direction_deg(edge, line.middle()));
    let sample = |f: &Frame| LoadSample {
        stress_mpa: f.stress_mpa,
        axis_to_edge_deg: f.direction_deg.zip(along).map(|(axis, edge)| fold_axis(axis - edge)),
    };
    LoadRecord { samples: frames.iter().filter(|f| f.time_s <= until_s).map(sample).collect() }
}

fn filaments(tables: &Path, manifest: &Manifest) -> Result<Vec<FilamentRecord>, Fault> {
    let names = ["filament", "root_x_px", "root_y_px", "final_length_um", "tips", "bridged", "turned"];
    let own = Table::read(&tables.join("filaments.csv"), &[&names[..], &["root"]].concat())?;
    let roots = own.text("root")?;
    let [number, x, y, length, tips, bridged, turned] = own.numbers(names)?;
    let names = ["filament", "length_um", "angle_deg", "load_direction_deg", "stress_mpa"];
    let growth = Table::read(&tables.join("growth.csv"), &names)?;
    let [grown, piece_um, angle, axis, stress] = growth.numbers(names)?;
    let same = |a: Option<f64>, b: Option<f64>| a.zip(b).is_some_and(|(a, b)| (a - b).abs() < 0.5);
    let one = |i: usize| {
        let edge = edge_direction_deg(&manifest.cell.plating_edge, [x[i]?, y[i]?])?;
        let piece = |j: usize| {
            let expected = axis[j].zip(stress[j]).and_then(|(axis, stress)| expected_axis_deg(axis, stress));
            Some(PieceRecord {
                length_um: piece_um[j]?,
                to_edge_deg: fold_axis(angle[j]? - edge),
                expected_deg: expected.map(|axis| fold_axis(axis - edge)),
                to_load_deg: axis[j].zip(stress[j]).and_then(|(axis, _)| Some(acute_deg(angle[j]?, axis))),
            })
        };
        Some(FilamentRecord {
            length_um: length[i]?,
            ends: tips[i].unwrap_or(0.0) as usize + usize::from(bridged[i].is_some_and(|b| b > 0.5)),
            turned: turned[i].map(|t| t > 0.5),
            pieces: (0..grown.len()).filter(|&j| same(grown[j], number[i])).filter_map(piece).collect(),
        })
    };
    Ok((0..roots.len()).filter(|&i| roots[i] == "plating").filter_map(one).collect())
}

fn conditions(summary: &Summary, manifest: &Manifest, frames: &[Frame], until_s: f64) -> Conditions {
    let frames: Vec<Frame> = frames.iter().copied().filter(|f| f.time_s <= until_s).collect();
    let of = |get: fn(&Frame) -> Option<f64>| frames.iter().filter_map(get).collect::<Vec<f64>>();
    let current = of(|f| f.current_ma);
    let plating: Vec<f64> = current.iter().copied().filter(|i| *i > 0.0).collect();
    let steps: Vec<f64> = frames.windows(2).map(|pair| pair[1].time_s - pair[0].time_s).collect();
    let settings = ["false_alarms_per_frame", "window_frames"].map(|key| (key, summary.settings.get(key).cloned()));
    let total = summary.frames.total;
    Conditions {
        current_ma_per_cm2: median(&plating).zip(manifest.cell.area_mm2).map(|(i, area)| 100.0 * i / area),
        control: control(&current, &of(|f| f.voltage_v)).map(str::to_owned),
        gap_um: summary.gap_um,
        area_mm2: manifest.cell.area_mm2,
        temperature_c: median(&of(|f| f.temperature_c)).or(manifest.cell.temperature_c),
        thickness_mm: manifest.load.thickness_mm,
        um_per_px: Some(summary.um_per_px),
        interval_s: median(&steps),
        settings: Some(format!(
            "confirm_frames {}{}",
            manifest.trace.confirm_frames,
            settings.into_iter().filter_map(|(key, v)| Some(format!(", {key} {}", v?))).collect::<String>()
        )),
        version: Some(summary.version.clone()),
        polarity: Some(match manifest.frames.filament {
            Filament::Darker => "darker".to_owned(),
            Filament::Brighter => "brighter".to_owned(),
        }),
        set_aside: if total > 0 { (total - summary.frames.usable) as f64 / total as f64 } else { 0.0 },
    }
}

/// How the cell was driven, as far as its log tells.
fn control(current: &[f64], voltage: &[f64]) -> Option<&'static str> {
    let scatter = |values: &[f64]| {
        let (middle, spread) = (mean(values)?.abs(), variance(values)?);
        (middle > 0.0).then(|| libm::sqrt(spread) / middle)
    };
    let largest = current.iter().fold(0.0_f64, |m, i| m.max(i.abs()));
    if current.len() < 2 || largest <= 0.0 {
        return None;
    }
    let passes = |sign: f64| current.iter().any(|i| i * sign > OTHER_SIGN * largest);
    if passes(1.0) && passes(-1.0) {
        return Some("both ways in turn");
    }
    match (scatter(current), scatter(voltage)) {
        (Some(s), _) if s < HELD => Some("constant current"),
        (_, Some(s)) if s < HELD => Some("constant voltage"),
        _ => Some("varying current"),
    }
}

/// A CSV table, every field as text.
struct Table {
    path: PathBuf,
    data: DataFrame,
}

impl Table {
    /// Reads the columns of these names, in whatever order they stand.
    fn read(path: &Path, names: &[&str]) -> Result<Self, Fault> {
        let wanted: Arc<[PlSmallStr]> = names.iter().map(|n| PlSmallStr::from_str(n)).collect();
        let parse = CsvParseOptions::default().with_null_values(Some(NullValues::AllColumnsSingle("".into())));
        let options = CsvReadOptions::default()
            .with_has_header(true)
            .with_infer_schema_length(Some(0))
            .with_n_threads(Some(1))
            .with_columns(Some(wanted))
            .with_parse_options(parse);
        let reader = options.try_into_reader_with_file_path(Some(path.to_owned()));
        let data = reader.and_then(SerReader::finish).map_err(|e| fault(path, e.to_string()))?;
        Ok(Self { path: path.to_owned(), data })
    }

    fn column(&self, name: &str) -> Result<Vec<Option<&str>>, Fault> {
        let column = self.data.column(name).and_then(|c| c.str()).map_err(|e| fault(&self.path, e.to_string()))?;
        Ok(column.iter().collect())
    }

    fn text(&self, name: &str) -> Result<Vec<String>, Fault> {
        Ok(self.column(name)?.into_iter().map(|v| v.unwrap_or_default().to_owned()).collect())
    }

    fn numbers<const N: usize>(&self, names: [&str; N]) -> Result<[Vec<Option<f64>>; N], Fault> {
        let mut columns = [const { Vec::new() }; N];
        for (column, name) in columns.iter_mut().zip(names) {
            *column = self.number(name)?;
        }
        Ok(columns)
    }

    /// Numbers; `true` is 1 and `false` 0.
    fn number(&self, name: &str) -> Result<Vec<Option<f64>>, Fault> {
        let parse = |(i, field): (usize, Option<&str>)| match field {
            None | Some("") => Ok(None),
            Some("true") => Ok(Some(1.0)),
            Some("false") => Ok(Some(0.0)),
            Some(text) => text
                .parse()
                .map(Some)
                .map_err(|_| fault(&self.path, format!("line {}: {name} is {text:?}, a number was expected", i + 2))),
        };
        self.column(name)?.into_iter().enumerate().map(parse).collect()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn control_is_read_from_the_log() {
        assert_eq!(control(&[0.02, 0.0201, 0.02], &[0.05, 0.06, 0.07]), Some("constant current"));
        assert_eq!(control(&[0.02, 0.03, 0.05], &[0.05, 0.05, 0.05]), Some("constant voltage"));
        assert_eq!(control(&[0.02, -0.02, 0.02], &[]), Some("both ways in turn"));
        assert_eq!(control(&[0.02, 0.03, 0.05], &[0.05, 0.09, 0.02]), Some("varying current"));
        assert_eq!(control(&[], &[]), None);
    }

    #[test]
    fn charge_lies_between_frames_in_proportion() {
        let frame = |time_s, charge: Option<f64>| Frame { time_s, charge_mah: charge, ..Frame::default() };
        let frames = [frame(0.0, Some(0.0)), frame(10.0, Some(1.0)), frame(20.0, Some(2.0))];
        for (time, charge) in [(0.0, 0.0), (5.0, 0.5), (10.0, 1.0), (19.0, 1.9), (40.0, 2.0)] {
            assert!((charge_at(&frames, time).unwrap() - charge).abs() < 1e-12, "{time}");
        }
        assert_eq!(charge_at(&[frame(0.0, None)], 3.0), None);
        assert_eq!(charge_at(&[], 3.0), None);
    }
}
