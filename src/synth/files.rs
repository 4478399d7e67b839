//! Writes a run folder and its truth: frames, logs, `run.toml`, `truth/`.
//!
//! Everything is written in a fixed order with fixed encoder settings, so the same scenario gives the same bytes on any number of threads.
//! Frames are rendered in small batches; memory holds one batch. An existing folder that holds anything is refused.

use std::fmt::Write as _;
use std::fs;
use std::path::{Path, PathBuf};

use image::codecs::png::{CompressionType, FilterType, PngEncoder};
use image::{ExtendedColorType, ImageEncoder};
use rayon::prelude::*;
use serde::Serialize;

use super::SynthError;
use super::ceramic::Ceramic;
use super::dice::{Dice, Stream};
use super::grow::{Growth, grow};
use super::history::{current_ma, force_n, loading};
use super::recorder::{Loss, Shot, shots};
use super::render;
use super::scenario::{FixtureKind, Scenario};
use super::truth;

/// Frames rendered at a time.
const BATCH: usize = 16;
/// Scene kept around the picture besides the drift, px: point spread and interpolation.
const MARGIN_PX: f64 = 10.0;
/// Voltage after the short, V: what contacts and leads leave (common practice).
const SHORTED_V: f64 = 0.002;
/// Resistance that tension of the leads and the ceramic add, as growth of the voltage over a run (common practice).
const VOLTAGE_RISE: f64 = 0.15;

/// Simulates, renders and writes a settled scenario into `folder`, which must be absent or empty.
/// # Errors
/// [`SynthError::Occupied`] when the folder holds anything, [`SynthError::Io`] or [`SynthError::Encode`] when writing fails.
pub fn write_run(scenario: &Scenario, folder: &Path) -> Result<(), SynthError> {
    refuse_occupied(folder)?;
    write_parts(scenario, folder)
}

fn write_parts(scenario: &Scenario, folder: &Path) -> Result<(), SynthError> {
    let growth = grow(scenario);
    let shots = shots(scenario);
    make_folder(&folder.join("frames"))?;
    make_folder(&folder.join("truth"))?;
    write_frames(scenario, &growth, &shots, &folder.join("frames"))?;
    write_logs(scenario, &growth, folder)?;
    write(
        &folder.join("run.toml"),
        manifest(scenario, &growth)?.as_bytes(),
    )?;
    write_truth(scenario, &growth, &shots, folder)
}

/// Writes the run of `folder/scenario.toml` beside it.
///
/// Frames, logs, `run.toml` and `truth/` must not be there yet: remove them first.
/// # Errors
/// As [`write_run`], and [`SynthError::Scenario`] when the scenario does not parse.
pub fn rebuild(folder: &Path) -> Result<(), SynthError> {
    let scenario = Scenario::load(&folder.join("scenario.toml"))?;
    for name in ["frames", "truth", "run.toml", "load.csv", "cell.csv"] {
        let path = folder.join(name);
        if path.exists() {
            return Err(SynthError::Occupied { path });
        }
    }
    write_parts(&scenario, folder)
}

/// Refuses a folder that holds anything.
fn refuse_occupied(folder: &Path) -> Result<(), SynthError> {
    match fs::read_dir(folder) {
        Ok(mut entries) => match entries.next() {
            Some(_) => Err(SynthError::Occupied {
                path: folder.to_owned(),
            }),
            None => Ok(()),
        },
        Err(e) if e.kind() == std::io::ErrorKind::NotFound => Ok(()),
        Err(e) => Err(SynthError::io(folder, e)),
    }
}

fn make_folder(path: &Path) -> Result<(), SynthError> {
    fs::create_dir_all(path).map_err(|e| SynthError::io(path, e))
}

fn write(path: &Path, bytes: &[u8]) -> Result<(), SynthError> {
    fs::write(path, bytes).map_err(|e| SynthError::io(path, e))
}

/// File name of frame `k`.
fn frame_name(k: usize) -> String {
    format!("frame_{k:05}.png")
}

fn write_frames(
    scenario: &Scenario,
    growth: &Growth,
    shots: &[Shot],
    folder: &Path,
) -> Result<(), SynthError> {
    let turn = |s: &Shot| {
        s.rotation_deg.abs().to_radians() * f64::from(scenario.width.max(scenario.height))
    };
    let reach = shots
        .iter()
        .map(|s| s.drift[0].abs().max(s.drift[1].abs()) + turn(s))
        .fold(0.0, f64::max);
    let ceramic = Ceramic::draw(scenario, MARGIN_PX + reach);
    let mut last: Vec<u8> = Vec::new();
    for start in (0..shots.len()).step_by(BATCH) {
        let batch: Vec<(usize, &Shot)> = shots.iter().enumerate().skip(start).take(BATCH).collect();
        let encoded: Vec<Vec<u8>> = batch
            .par_iter()
            .map(|&(k, shot)| encoded_frame(scenario, &ceramic, growth, shot, k))
            .collect::<Result<_, _>>()?;
        for ((k, shot), bytes) in batch.into_iter().zip(encoded) {
            let bytes = if shot.loss == Some(Loss::Repeated) {
                std::mem::take(&mut last)
            } else {
                bytes
            };
            write(&folder.join(frame_name(k)), &bytes)?;
            last = bytes;
        }
    }
    Ok(())
}

/// The file of frame `k`; empty for a repeat, cut short for a broken one.
fn encoded_frame(
    scenario: &Scenario,
    ceramic: &Ceramic,
    growth: &Growth,
    shot: &Shot,
    k: usize,
) -> Result<Vec<u8>, SynthError> {
    let pixels = scenario.width as usize * scenario.height as usize;
    match shot.loss {
        Some(Loss::Repeated) => Ok(Vec::new()),
        Some(Loss::Blank) => png(scenario, &vec![0.0; pixels]),
        Some(Loss::Broken) => {
            let mut bytes = png(scenario, &render::frame(scenario, ceramic, growth, shot, k))?;
            bytes.truncate(bytes.len() / 3);
            Ok(bytes)
        }
        None => png(scenario, &render::frame(scenario, ceramic, growth, shot, k)),
    }
}

/// Grey levels 0 to 1 as PNG of 8 or 16 bits.
fn png(scenario: &Scenario, levels: &[f64]) -> Result<Vec<u8>, SynthError> {
    let (bytes, colour): (Vec<u8>, _) = if scenario.imaging.bits == 16 {
        let full = |v: &f64| ((v * 65535.0).round().clamp(0.0, 65535.0) as u16).to_ne_bytes();
        (
            levels.iter().flat_map(full).collect(),
            ExtendedColorType::L16,
        )
    } else {
        (
            levels
                .iter()
                .map(|v| (v * 255.0).round().clamp(0.0, 255.0) as u8)
                .collect(),
            ExtendedColorType::L8,
        )
    };
    let mut out = Vec::new();
    PngEncoder::new_with_quality(&mut out, CompressionType::Best, FilterType::Avg).write_image(
        &bytes,
        scenario.width,
        scenario.height,
        colour,
    )?;
    Ok(out)
}

fn write_logs(scenario: &Scenario, growth: &Growth, folder: &Path) -> Result<(), SynthError> {
    let mut dice = Dice::new(scenario.seed, Stream::Logs, 0);
    if scenario.load.fixture != FixtureKind::None {
        write(
            &folder.join("load.csv"),
            load_log(scenario, &mut dice).as_bytes(),
        )?;
    }
    if scenario.cell.log {
        write(
            &folder.join("cell.csv"),
            cell_log(scenario, growth, &mut dice).as_bytes(),
        )?;
    }
    Ok(())
}

/// Sample times of a log: at the given spacing, or a fifth of the frame interval; one sample beyond the last frame.
fn log_times(scenario: &Scenario, every_s: f64) -> impl Iterator<Item = f64> {
    let every = if every_s > 0.0 {
        every_s
    } else {
        scenario.interval_s / 5.0
    };
    let n = (scenario.end_s() / every).ceil() as usize + 1;
    (0..=n).map(move |i| i as f64 * every)
}

fn load_log(scenario: &Scenario, dice: &mut Dice) -> String {
    let plan = &scenario.load;
    let has_direction = plan.fixture != FixtureKind::Stack;
    let value = if plan.fixture == FixtureKind::Stress {
        "stress_mpa"
    } else {
        "force_n"
    };
    let mut text = format!(
        "time_s,{value}{}\n",
        if has_direction { ",direction_deg" } else { "" }
    );
    for time in log_times(scenario, plan.log_every_s) {
        let load = loading(plan, time, [0.0, 1.0]);
        let stress = load.stress_mpa + plan.noise_mpa * dice.normal();
        let shown = force_n(plan, stress).unwrap_or(stress);
        let direction = load
            .axis_deg
            .filter(|_| has_direction)
            .map_or(String::new(), |a| format!(",{a:.2}"));
        let _ = writeln!(text, "{time:.3},{shown:.4}{direction}");
    }
    text
}

fn cell_log(scenario: &Scenario, growth: &Growth, dice: &mut Dice) -> String {
    let plan = &scenario.cell;
    let mut text = String::from("time_s,current_ma,voltage_v\n");
    for time in log_times(scenario, 0.0) {
        let current = current_ma(plan, time);
        let drive = current / plan.current_ma;
        let shorted = growth.contact.is_some_and(|(at, _)| at <= time);
        let open = plan.voltage_v * (1.0 + VOLTAGE_RISE * time / scenario.end_s().max(1.0));
        let voltage = if shorted { SHORTED_V } else { open } * drive + plan.noise_v * dice.normal();
        let _ = writeln!(text, "{time:.3},{current:.5},{voltage:.6}");
    }
    text
}

/// `run.toml` as a reader of the run needs it.
#[derive(Serialize)]
struct Manifest<'a> {
    run: &'a str,
    #[serde(skip_serializing_if = "Option::is_none")]
    specimen: Option<&'a str>,
    #[serde(skip_serializing_if = "Option::is_none")]
    note: Option<&'a str>,
    frames: FramesTable,
    cell: CellTable<'a>,
    load: LoadTable,
}

#[derive(Serialize)]
struct FramesTable {
    files: &'static str,
    interval_s: f64,
    um_per_px: f64,
    filament: super::Polarity,
    bare: usize,
}

#[derive(Serialize)]
struct CellTable<'a> {
    plating_edge: &'a [[f64; 2]],
    far_edge: &'a [[f64; 2]],
    #[serde(skip_serializing_if = "Option::is_none")]
    log: Option<&'static str>,
    area_mm2: f64,
    view_depth_mm: f64,
    metal: &'static str,
    ended: &'static str,
}

#[derive(Default, Serialize)]
struct LoadTable {
    #[serde(skip_serializing_if = "Option::is_none")]
    log: Option<&'static str>,
    fixture: &'static str,
    #[serde(skip_serializing_if = "Option::is_none")]
    area_mm2: Option<f64>,
    #[serde(skip_serializing_if = "Option::is_none")]
    width_mm: Option<f64>,
    #[serde(skip_serializing_if = "Option::is_none")]
    thickness_mm: Option<f64>,
    #[serde(skip_serializing_if = "Option::is_none")]
    arm_mm: Option<f64>,
    #[serde(skip_serializing_if = "Option::is_none")]
    side: Option<&'static str>,
}

fn manifest(scenario: &Scenario, growth: &Growth) -> Result<String, SynthError> {
    let manifest = Manifest {
        run: &scenario.name,
        specimen: scenario.specimen.as_deref(),
        note: scenario.note.as_deref(),
        frames: FramesTable {
            files: "frames/*.png",
            interval_s: scenario.interval_s,
            um_per_px: scenario.um_per_px,
            filament: scenario.filament,
            bare: scenario.bare,
        },
        cell: CellTable {
            plating_edge: &scenario.plating_edge,
            far_edge: &scenario.far_edge,
            log: scenario.cell.log.then_some("cell.csv"),
            area_mm2: scenario.cell.area_mm2,
            view_depth_mm: scenario.cell.view_depth_mm,
            metal: "Li",
            ended: if growth.contact.is_some() {
                "short"
            } else {
                "stopped"
            },
        },
        load: load_table(scenario),
    };
    let body = toml::to_string(&manifest).map_err(|e| SynthError::Format {
        what: "run.toml",
        message: e.to_string(),
    })?;
    Ok(format!(
        "# Synthetic frames with known truth (truth/); invented, no real specimen.\n{body}"
    ))
}

fn load_table(scenario: &Scenario) -> LoadTable {
    let plan = &scenario.load;
    let log = Some("load.csv");
    match plan.fixture {
        FixtureKind::None => LoadTable {
            fixture: "none",
            ..LoadTable::default()
        },
        FixtureKind::Stress => LoadTable {
            log,
            fixture: "stress",
            ..LoadTable::default()
        },
        FixtureKind::Uniaxial => LoadTable {
            log,
            fixture: "uniaxial",
            area_mm2: Some(plan.area_mm2),
            ..LoadTable::default()
        },
        FixtureKind::Stack => LoadTable {
            log,
            fixture: "stack",
            area_mm2: Some(plan.area_mm2),
            ..LoadTable::default()
        },
        FixtureKind::Cantilever => LoadTable {
            log,
            fixture: "cantilever",
            width_mm: Some(plan.width_mm),
            thickness_mm: Some(plan.thickness_mm),
            arm_mm: Some(plan.arm_mm),
            side: Some("compressed"),
            ..LoadTable::default()
        },
    }
}

fn write_truth(
    scenario: &Scenario,
    growth: &Growth,
    shots: &[Shot],
    folder: &Path,
) -> Result<(), SynthError> {
    let at = |name: &str| -> PathBuf { folder.join("truth").join(name) };
    let about = serde_json::json!({ "seed": scenario.seed, "scenario": scenario });
    write(&at("truth.json"), pretty(&about)?.as_bytes())?;
    let mut lines = String::new();
    for path in truth::paths(growth) {
        lines.push_str(&json(&path)?);
        lines.push('\n');
    }
    write(&at("paths.ndjson"), lines.as_bytes())?;
    write(
        &at("frames.csv"),
        frames_csv(&truth::frames(scenario, growth, shots)).as_bytes(),
    )?;
    write(&at("short.json"), pretty(&truth::short(growth))?.as_bytes())
}

fn json(value: &impl Serialize) -> Result<String, SynthError> {
    serde_json::to_string(value).map_err(|e| SynthError::Format {
        what: "truth",
        message: e.to_string(),
    })
}

fn pretty(value: &impl Serialize) -> Result<String, SynthError> {
    let text = serde_json::to_string_pretty(value);
    text.map(|t| t + "\n").map_err(|e| SynthError::Format {
        what: "truth",
        message: e.to_string(),
    })
}

fn frames_csv(rows: &[truth::FrameTruth]) -> String {
    let mut text = String::from(
        "frame,time_s,drift_x_px,drift_y_px,depth_um,depth_fraction,front_depth_um,tips,length_um,growth_alignment,usable\n",
    );
    let shown = |value: Option<f64>| value.map_or(String::new(), |v| v.to_string());
    for r in rows {
        let (x, y, alignment) = (
            shown(r.drift_x_px),
            shown(r.drift_y_px),
            shown(r.growth_alignment),
        );
        let _ = writeln!(
            text,
            "{},{},{x},{y},{},{},{},{},{},{alignment},{}",
            r.frame,
            r.time_s,
            r.depth_um,
            r.depth_fraction,
            r.front_depth_um,
            r.tips,
            r.length_um,
            r.usable
        );
    }
    text
}
