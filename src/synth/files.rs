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
use super::grow::grow;
use super::logs::{cell_log, load_log};
use super::plan::FixtureKind;
use super::recorder::{Loss, Shot, shots};
use super::render;
use super::runfile::manifest;
use super::scenario::Scenario;
use super::track::Growth;
use super::truth;

/// Frames rendered at a time.
const BATCH: usize = 16;
/// Scene kept around the picture besides the drift, px: point spread and interpolation.
const MARGIN_PX: f64 = 10.0;
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
    write(&folder.join("run.toml"), manifest(scenario, &growth)?.as_bytes())?;
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
            Some(_) => Err(SynthError::Occupied { path: folder.to_owned() }),
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

fn write_frames(scenario: &Scenario, growth: &Growth, shots: &[Shot], folder: &Path) -> Result<(), SynthError> {
    let turn = |s: &Shot| s.rotation_deg.abs().to_radians() * f64::from(scenario.width.max(scenario.height));
    let reach = shots.iter().map(|s| s.drift[0].abs().max(s.drift[1].abs()) + turn(s)).fold(0.0, f64::max);
    let ceramic = Ceramic::draw(scenario, MARGIN_PX + reach);
    let mut last: Vec<u8> = Vec::new();
    for start in (0..shots.len()).step_by(BATCH) {
        let batch: Vec<(usize, &Shot)> = shots.iter().enumerate().skip(start).take(BATCH).collect();
        let encoded: Vec<Vec<u8>> = batch
            .par_iter()
            .map(|&(k, shot)| encoded_frame(scenario, &ceramic, growth, shot, k))
            .collect::<Result<_, _>>()?;
        for ((k, shot), bytes) in batch.into_iter().zip(encoded) {
            let bytes = if shot.loss == Some(Loss::Repeated) { std::mem::take(&mut last) } else { bytes };
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
        (levels.iter().flat_map(full).collect(), ExtendedColorType::L16)
    } else {
        (levels.iter().map(|v| (v * 255.0).round().clamp(0.0, 255.0) as u8).collect(), ExtendedColorType::L8)
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
        write(&folder.join("load.csv"), load_log(scenario, &mut dice).as_bytes())?;
    }
    if scenario.cell.log {
        write(&folder.join("cell.csv"), cell_log(scenario, growth, &mut dice).as_bytes())?;
    }
    Ok(())
}

fn write_truth(scenario: &Scenario, growth: &Growth, shots: &[Shot], folder: &Path) -> Result<(), SynthError> {
    let at = |name: &str| -> PathBuf { folder.join("truth").join(name) };
    let about = serde_json::json!({ "seed": scenario.seed, "scenario": scenario });
    write(&at("truth.json"), pretty(&about)?.as_bytes())?;
    let mut lines = String::new();
    for path in truth::paths(growth) {
        lines.push_str(&json(&path)?);
        lines.push('\n');
    }
    write(&at("paths.ndjson"), lines.as_bytes())?;
    write(&at("frames.csv"), frames_csv(&truth::frames(scenario, growth, shots)).as_bytes())?;
    write(&at("short.json"), pretty(&truth::short(growth))?.as_bytes())
}

fn json(value: &impl Serialize) -> Result<String, SynthError> {
    serde_json::to_string(value).map_err(|e| SynthError::Format { what: "truth", message: e.to_string() })
}

fn pretty(value: &impl Serialize) -> Result<String, SynthError> {
    let text = serde_json::to_string_pretty(value);
    text.map(|t| t + "\n").map_err(|e| SynthError::Format { what: "truth", message: e.to_string() })
}

fn frames_csv(rows: &[truth::FrameTruth]) -> String {
    let mut text = String::from(
        "frame,time_s,drift_x_px,drift_y_px,depth_um,depth_fraction,front_depth_um,tips,length_um,growth_alignment,usable\n",
    );
    let shown = |value: Option<f64>| value.map_or(String::new(), |v| v.to_string());
    for r in rows {
        let (x, y, alignment) = (shown(r.drift_x_px), shown(r.drift_y_px), shown(r.growth_alignment));
        let _ = writeln!(
            text,
            "{},{},{x},{y},{},{},{},{},{},{alignment},{}",
            r.frame, r.time_s, r.depth_um, r.depth_fraction, r.front_depth_um, r.tips, r.length_um, r.usable
        );
    }
    text
}
