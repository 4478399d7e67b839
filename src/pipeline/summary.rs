//! The numbers that scripts read: `summary.json`.

use std::collections::BTreeMap;
use std::path::Path;

use sha2::{Digest, Sha256};

use super::Input;
use super::film::Filmed;
use super::forecasts::dose_at;
use super::notes::Notes;
use crate::forecast::short::Evidence;
use crate::measure::{FrameRow, GrowthRow, Measured, Stretch};
use crate::results::{
    Alignment, AlignmentSummary, DepthSummary, FrameCount, LoadSummary, SetAside, ShortEvidence, ShortSummary, Spread,
    Summary,
};
use crate::stats::filaments::{AxialPiece, TurnDraws, summarise};
use crate::stats::order::quantile;
use crate::stats::theil_sen::{slope_interval_by_blocks, theil_sen};

/// Resamples of the rate's interval.
const RESAMPLES: usize = 999;

pub(super) fn summary(
    input: &Input,
    filmed: &Filmed,
    measured: &Measured,
    frames: &[FrameRow],
    notes: &Notes,
) -> Summary {
    let seed = input.manifest.settings.seed;
    Summary {
        tool: "veerlog".to_owned(),
        version: env!("CARGO_PKG_VERSION").to_owned(),
        format: 1,
        run: input.manifest.run.clone(),
        specimen: input.manifest.specimen.clone(),
        frames: count(frames),
        um_per_px: input.um_per_px(),
        gap_um: Some(input.gap_um()),
        depth: depth(frames, notes.short.time_s, seed),
        alignment: AlignmentSummary {
            paths: alignment(&measured.final_stretches, seed),
            growth: alignment(&measured.growth.iter().map(Stretch::from).collect::<Vec<_>>(), seed),
        },
        load: load(input, frames),
        short: short(notes),
        forecast: filmed.forecasts.last().cloned(),
        settings: settings(input),
        inputs: inputs(input, filmed),
        warnings: notes.warnings.clone(),
        ..Summary::default()
    }
}

fn count(frames: &[FrameRow]) -> FrameCount {
    let aside = frames.iter().filter(|f| !f.usable).map(|f| SetAside { frame: f.frame, reason: f.reason.clone() });
    FrameCount { total: frames.len(), usable: frames.iter().filter(|f| f.usable).count(), set_aside: aside.collect() }
}

fn depth(frames: &[FrameRow], short_s: Option<f64>, seed: u64) -> DepthSummary {
    let usable: Vec<&FrameRow> = frames.iter().filter(|f| f.usable).collect();
    let last = usable.last();
    let points: Vec<(f64, f64)> = usable
        .iter()
        .filter(|f| short_s.is_none_or(|s| f.time_s <= s))
        .filter_map(|f| f.depth_um.map(|d| (f.time_s, d)))
        .skip_while(|p| p.1 <= 0.0)
        .collect();
    DepthSummary {
        final_um: last.and_then(|f| f.depth_um),
        u_final_um: last.and_then(|f| f.u_depth_um),
        final_fraction: last.and_then(|f| f.depth_fraction),
        rate_um_per_s: theil_sen(&points, 0.95).map(|line| line.slope),
        rate_ci95: slope_interval_by_blocks(&points, 0.95, RESAMPLES, seed),
    }
}

fn alignment(stretches: &[Stretch], seed: u64) -> Alignment {
    let pieces: Vec<AxialPiece> = stretches
        .iter()
        .map(|s| AxialPiece {
            filament: s.filament,
            angle_deg: s.angle_deg,
            weight: s.length_um,
            load_axis_deg: s.load_direction_deg,
            stress_mpa: s.stress_mpa,
        })
        .collect();
    let Some(all) = summarise(&pieces, TurnDraws { seed, ..TurnDraws::default() }) else { return Alignment::default() };
    Alignment {
        value: all.alignment.as_ref().map(|e| e.value),
        ci95: all.alignment.as_ref().and_then(|e| e.ci95),
        mean_angle_to_load_deg: all.angle_to_load_deg.as_ref().map(|e| e.value),
        n: all.filaments,
    }
}

fn load(input: &Input, frames: &[FrameRow]) -> LoadSummary {
    let usable = || frames.iter().filter(|f| f.usable);
    let stress: Vec<f64> = usable().filter_map(|f| f.stress_mpa).collect();
    let dose: Vec<f64> = usable().filter_map(|f| dose_at(input, f.time_s)).collect();
    let spread = |values: &[f64]| {
        Some(Spread { min: quantile(values, 0.0)?, median: quantile(values, 0.5)?, max: quantile(values, 1.0)? })
    };
    LoadSummary { stress_mpa: spread(&stress), dose_mpa: quantile(&dose, 0.5) }
}

fn short(notes: &Notes) -> ShortSummary {
    ShortSummary {
        observed: notes.short.time_s.is_some(),
        time_s: notes.short.time_s,
        evidence: notes.short.evidence.map(|e| match e {
            Evidence::Electrical => ShortEvidence::Electrical,
            Evidence::Bridging => ShortEvidence::Bridging,
        }),
    }
}

/// Every value used: the manifest as understood and the program's own settings.
fn settings(input: &Input) -> serde_json::Value {
    serde_json::json!({
        "manifest": input.manifest,
        "until_s": input.until_s,
        "false_alarms_per_frame": crate::trace::TraceSettings::default().false_alarms_per_frame,
        "window_frames": crate::trace::WINDOW,
        "rate_resamples": RESAMPLES,
    })
}

/// SHA-256 of each input file by its path from the run folder.
fn inputs(input: &Input, filmed: &Filmed) -> BTreeMap<String, String> {
    let hex = |bytes: &[u8]| bytes.iter().map(|b| format!("{b:02x}")).collect::<String>();
    let frames = input
        .sequence
        .entries
        .iter()
        .zip(&filmed.fates)
        .filter_map(|(e, f)| f.sha256.map(|s| (e.file.clone(), hex(&s))));
    let mut out: BTreeMap<String, String> = frames.collect();
    let folder = &input.manifest.origin.folder;
    let named = [
        Some(crate::run::manifest::FILE_NAME),
        Some(crate::run::review::FILE_NAME),
        input.manifest.frames.times.as_deref(),
        input.manifest.cell.log.as_deref(),
        input.manifest.load.log.as_deref(),
    ];
    for name in named.into_iter().flatten() {
        if let Ok(bytes) = std::fs::read(folder.join(Path::new(name))) {
            out.insert(name.to_owned(), hex(&Sha256::digest(&bytes)));
        }
    }
    out
}

impl From<&GrowthRow> for Stretch {
    fn from(row: &GrowthRow) -> Self {
        Self {
            filament: row.filament,
            angle_deg: row.angle_deg,
            length_um: row.length_um,
            load_direction_deg: row.load_direction_deg,
            stress_mpa: row.stress_mpa,
        }
    }
}
