//! Everything a run folder says, read once: manifest, frames, load, cell log, edges.

use std::path::Path;

use super::Choices;
use crate::Error;
use crate::load::Load;
use crate::results::{CellSamples, LoadSamples, RunFacts};
use crate::run::manifest::Filament;
use crate::run::{CellLog, FrameSequence, LoadLog, Manifest, Review, Series};
use crate::trace::edges::Edges;

/// A run as recorded.
#[derive(Debug)]
pub struct Input {
    /// `run.toml`.
    pub manifest: Manifest,
    /// The frames, up to `--until`.
    pub sequence: FrameSequence,
    /// The load.
    pub load: Load,
    /// The cell log.
    pub cell: CellLog,
    /// The electrodes.
    pub edges: Edges,
    /// What a reader rejected.
    pub review: Option<Review>,
    /// Where the run was cut, s.
    pub until_s: Option<f64>,
}

impl Input {
    /// Reads a run folder; frames and samples after `--until` are as if they had never been.
    ///
    /// # Errors
    /// What is wrong with manifest, frames or logs.
    pub fn open(run: &Path, choices: Choices) -> Result<Self, Error> {
        let manifest = Manifest::load(run)?;
        let mut sequence = FrameSequence::open(run, &manifest)?;
        large_enough(&manifest, &sequence)?;
        let review = Review::load(run, sequence.entries.len())?;
        let mut load_log = LoadLog::open(&manifest, &sequence.clock)?;
        let mut cell = CellLog::open(&manifest, &sequence.clock)?;
        if let Some(until) = choices.until_s {
            sequence.entries.retain(|e| e.time_s <= until);
            for series in [&mut load_log.force_n, &mut load_log.stress_mpa, &mut load_log.direction_deg] {
                cut(series, until);
            }
            for series in [&mut cell.current_ma, &mut cell.voltage_v, &mut cell.temperature_c] {
                cut(series, until);
            }
        }
        let edges = super::edges::edges_of(&manifest)?;
        let load = Load::new(&manifest, load_log)?;
        Ok(Self { manifest, sequence, load, cell, edges, review, until_s: choices.until_s })
    }

    /// Scale.
    #[must_use]
    pub fn um_per_px(&self) -> f64 {
        self.manifest.frames.um_per_px
    }

    /// Whether filaments are darker than what is around them.
    #[must_use]
    pub fn darker(&self) -> bool {
        self.manifest.frames.filament == Filament::Darker
    }

    /// Least distance of the edges, µm.
    #[must_use]
    pub fn gap_um(&self) -> f64 {
        self.edges.gap() * self.um_per_px()
    }

    /// Charge passed since the first frame, mAh; absent where the log leaves a hole.
    #[must_use]
    pub fn charge_mah(&self, time_s: f64) -> Option<f64> {
        self.cell.charge_mah(0.0, time_s)
    }

    /// The facts of the run for the outputs.
    #[must_use]
    pub fn facts(&self) -> RunFacts {
        let m = &self.manifest;
        RunFacts {
            run: m.run.clone(),
            specimen: m.specimen.clone(),
            note: m.note.clone(),
            um_per_px: self.um_per_px(),
            gap_um: Some(self.gap_um()),
            frame_size: [self.sequence.width, self.sequence.height],
            plating_edge: m.cell.plating_edge.clone(),
            far_edge: m.cell.far_edge.clone(),
            darker: self.darker(),
            bare: m.frames.bare,
            fixture: serde_json::to_value(m.load.fixture).ok().and_then(|v| v.as_str().map(str::to_owned)),
        }
    }

    /// The load's samples within the run, for plots.
    #[must_use]
    pub fn load_samples(&self) -> LoadSamples {
        let times = self.plot_times([&self.load.log.force_n, &self.load.log.stress_mpa, &self.load.log.direction_deg]);
        let states: Vec<_> = times.iter().map(|&t| self.load.at(t, None)).collect();
        LoadSamples {
            force_n: states.iter().map(|s| s.force_n).collect(),
            stress_mpa: states.iter().map(|s| s.stress_mpa).collect(),
            direction_deg: states.iter().map(|s| s.direction_deg).collect(),
            time_s: times,
        }
    }

    /// The cell log's samples within the run, for plots.
    #[must_use]
    pub fn cell_samples(&self) -> CellSamples {
        let times = self.plot_times([&self.cell.current_ma, &self.cell.voltage_v, &None]);
        let states: Vec<_> = times.iter().map(|&t| self.cell.at(t)).collect();
        CellSamples {
            current_ma: states.iter().map(|s| s.current_ma).collect(),
            voltage_v: states.iter().map(|s| s.voltage_v).collect(),
            time_s: times,
        }
    }

    /// Sample times of the given series within the frames' time, and the frames' own where a series is a constant.
    fn plot_times(&self, series: [&Option<Series>; 3]) -> Vec<f64> {
        let known: Vec<&Series> = series.into_iter().flatten().collect();
        if known.is_empty() {
            return Vec::new();
        }
        let frames = self.sequence.times_s();
        let last = frames.last().copied().unwrap_or(0.0);
        let mut times: Vec<f64> =
            known.iter().flat_map(|s| s.time_s.iter().copied()).filter(|t| (0.0..=last).contains(t)).collect();
        times.extend([0.0, last]);
        times.sort_by(f64::total_cmp);
        times.dedup_by(|a, b| (*a - *b).abs() < 1e-9);
        times
    }
}

/// Least side of a frame, px: in a smaller one nothing is left beside a line of a few px to tell it from (common practice).
const LEAST_SIDE_PX: u32 = 16;

/// Refuses frames in which no line can be told from its surroundings.
fn large_enough(manifest: &Manifest, sequence: &FrameSequence) -> Result<(), Error> {
    let (width, height) = (sequence.width, sequence.height);
    if width.min(height) >= LEAST_SIDE_PX {
        return Ok(());
    }
    let what = format!(
        "the frames are {width} × {height} px, too small to trace a line in (at least {LEAST_SIDE_PX} px a side)"
    );
    let help = "name the frames as the camera wrote them, not thumbnails or crops";
    Err(manifest.fault("frames", "files", what, help).into())
}

/// Takes away the samples after `until`.
fn cut(series: &mut Option<Series>, until: f64) {
    if let Some(s) = series.as_mut().filter(|s| s.constant.is_none()) {
        let n = s.time_s.partition_point(|&t| t <= until);
        *s = Series::new(s.time_s[..n].to_vec(), s.value[..n].to_vec(), s.hold_s);
    }
}
