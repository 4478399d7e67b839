//! What a finished run is known to be: the one plain struct that every output receives.
//!
//! Everything here is final: the outputs (`report`) format it and compute nothing. Lengths are in µm
//! or px as the field's name says, times in seconds since the first frame, stress in MPa, positive
//! in compression; an absent value is `None`.

use std::collections::BTreeMap;

use image::GrayImage;
use ndarray::Array2;
use serde::{Deserialize, Serialize};

use crate::measure::{FilamentRow, ForecastRow, FrameRow, GrowthRow, PathRow};
use crate::trace::Trace;

mod charge;
mod review;
mod steering;

pub use charge::{ChargeRow, ChargeSummary, Flow, HalfCycleRow};
pub use review::{ReviewMark, ReviewNumbers, ReviewSummary};
pub use steering::{DirectionRow, KinkBin, KinkInputs, KinkModel, LoadKnown, TurnRow, TurnVerdict, TurnsSummary};

/// A finished run.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Results {
    /// What was recorded.
    pub facts: RunFacts,
    /// A row a frame, in order of `frame`.
    pub frames: Vec<FrameRow>,
    /// A row a path a frame, in order of frame, then path.
    pub paths: Vec<PathRow>,
    /// A row a growth piece, in order of frame, then filament.
    pub growth: Vec<GrowthRow>,
    /// A row a filament, in order of `filament`.
    pub filaments: Vec<FilamentRow>,
    /// A row an issued forecast, in order of `frame`.
    pub forecasts: Vec<ForecastRow>,
    /// A row a step of the load, in order of time.
    pub turns: Vec<TurnRow>,
    /// A row a usable frame, in order of `frame`; empty without a cell log.
    pub charge: Vec<ChargeRow>,
    /// A row a half-cycle, in order of time.
    pub half_cycles: Vec<HalfCycleRow>,
    /// The best final geometry.
    pub trace: Trace,
    /// Pictures for the eye, in the coordinates of the first usable frame.
    pub pictures: Pictures,
    /// The load as logged.
    pub load: LoadSamples,
    /// The cell's electrical log.
    pub cell: CellSamples,
    /// The numbers that scripts read.
    pub summary: Summary,
    /// What a reader must know before acting on this run, beside the standing safety caution.
    pub cautions: Vec<String>,
}

/// What was recorded, as the run folder says it.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct RunFacts {
    /// Name of the run.
    pub run: String,
    /// What was tested.
    pub specimen: Option<String>,
    /// The experimenter's remark.
    pub note: Option<String>,
    /// Scale of the picture.
    pub um_per_px: f64,
    /// Least distance between the edges, µm.
    pub gap_um: Option<f64>,
    /// Width and height of a frame, px.
    pub frame_size: [u32; 2],
    /// Polyline where metal deposits, px.
    pub plating_edge: Vec<[f64; 2]>,
    /// Polyline of the opposite electrode, px.
    pub far_edge: Vec<[f64; 2]>,
    /// Whether filaments are darker than what is around them.
    pub darker: bool,
    /// Leading frames taken before any growth.
    pub bare: usize,
    /// How force became stress, as the run folder names it.
    pub fixture: Option<String>,
}

/// Pictures for the eye: 8-bit, drift and uneven light removed.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Pictures {
    /// The first usable frame.
    pub first: GrayImage,
    /// The last usable frame.
    pub last: GrayImage,
    /// The same as it was recorded, drift and light left in.
    pub recorded: Option<GrayImage>,
    /// A choice of frames for the player, in time order, in the view of `last` (they may be smaller). May be empty;
    /// frames from the last usable one on are left out, for `last` shows it.
    pub film: Vec<FilmFrame>,
    /// Frame at which each pixel \[row, col\] became filament; [`NEVER`] where it did not.
    pub arrivals: Option<Array2<u32>>,
}

/// Marks a pixel that never became filament.
pub const NEVER: u32 = u32::MAX;

/// One frame of the player.
#[derive(Debug, Clone, PartialEq)]
pub struct FilmFrame {
    /// Its number over all files.
    pub frame: usize,
    /// Its time, s.
    pub time_s: f64,
    /// The picture; it may be smaller than the recorded frame.
    pub picture: GrayImage,
    /// The same as it was recorded, drift and light left in.
    pub recorded: Option<GrayImage>,
}

/// The load log's samples; all columns are as long as `time_s`.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct LoadSamples {
    /// Run time, s, rising.
    pub time_s: Vec<f64>,
    /// Force, N.
    pub force_n: Vec<Option<f64>>,
    /// Stress along the load axis, MPa.
    pub stress_mpa: Vec<Option<f64>>,
    /// Load axis in the image, degrees in [0, 180).
    pub direction_deg: Vec<Option<f64>>,
}

/// The cell log's samples; all columns are as long as `time_s`.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct CellSamples {
    /// Run time, s, rising.
    pub time_s: Vec<f64>,
    /// Current, mA, positive plates at the plating edge.
    pub current_ma: Vec<Option<f64>>,
    /// Voltage, V.
    pub voltage_v: Vec<Option<f64>>,
}

/// The content of `summary.json`.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct Summary {
    /// Name of the program.
    pub tool: String,
    /// Its version.
    pub version: String,
    /// Version of the tables and of this file.
    pub format: u32,
    /// Name of the run.
    pub run: String,
    /// What was tested.
    pub specimen: Option<String>,
    /// Frames counted.
    pub frames: FrameCount,
    /// Scale of the picture.
    pub um_per_px: f64,
    /// Least distance between the edges, µm.
    pub gap_um: Option<f64>,
    /// Depth at the end and its rate.
    pub depth: DepthSummary,
    /// Alignment with the load axis.
    pub alignment: AlignmentSummary,
    /// The load over the run.
    pub load: LoadSummary,
    /// Whether growth turned when the load did.
    #[serde(default)]
    pub turns: TurnsSummary,
    /// How uneven the directions of growth are, by sign of the stress.
    #[serde(default)]
    pub directions: Vec<DirectionRow>,
    /// Turns of growth beside those a model predicts; absent where an input is not known.
    #[serde(default)]
    pub kink_model: Option<KinkModel>,
    /// Growth against charge.
    #[serde(default)]
    pub charge: ChargeSummary,
    /// What a reader rejected; absent without a `review.toml`.
    #[serde(default)]
    pub review: Option<ReviewSummary>,
    /// Whether and when the cell shorted.
    pub short: ShortSummary,
    /// The last forecast issued.
    pub forecast: Option<ForecastRow>,
    /// Every setting used.
    pub settings: serde_json::Value,
    /// SHA-256 (hexadecimal) of each input file, by its path in the run folder.
    pub inputs: BTreeMap<String, String>,
    /// What could change the result.
    pub warnings: Vec<String>,
}

/// Frames counted.
#[derive(Debug, Clone, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct FrameCount {
    /// All files.
    pub total: usize,
    /// Those used.
    pub usable: usize,
    /// Those set aside, and why.
    pub set_aside: Vec<SetAside>,
}

/// A frame set aside.
#[derive(Debug, Clone, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct SetAside {
    /// Its number over all files.
    pub frame: usize,
    /// Why.
    pub reason: String,
}

/// Depth at the end and its rate.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct DepthSummary {
    /// Depth at the last usable frame, µm.
    pub final_um: Option<f64>,
    /// Its standard uncertainty, µm.
    pub u_final_um: Option<f64>,
    /// Depth fraction at the last usable frame.
    pub final_fraction: Option<f64>,
    /// Theil–Sen slope from first growth to short or end, µm/s.
    pub rate_um_per_s: Option<f64>,
    /// Its 95 % interval.
    pub rate_ci95: Option<[f64; 2]>,
}

/// Alignment of all that was traced and of what grew.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct AlignmentSummary {
    /// Of the paths at the last usable frame, against the load axis then in force.
    pub paths: Alignment,
    /// Of the growth pieces, each against the axis in force while it grew.
    pub growth: Alignment,
}

/// An alignment with its interval.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct Alignment {
    /// Mean cos 2Δ over arc length; absent without a load axis.
    pub value: Option<f64>,
    /// 95 % interval, filaments as sampling units; absent when they are too few.
    pub ci95: Option<[f64; 2]>,
    /// Length-weighted mean of the acute angles, degrees.
    pub mean_angle_to_load_deg: Option<f64>,
    /// Filaments.
    pub n: usize,
}

/// The load over the run.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct LoadSummary {
    /// Stress at the usable frames, MPa; absent without one.
    pub stress_mpa: Option<Spread>,
    /// Median dose at the usable frames, MPa.
    pub dose_mpa: Option<f64>,
}

/// Least, middle and largest value.
#[derive(Debug, Clone, Copy, Default, PartialEq, Serialize, Deserialize)]
pub struct Spread {
    /// Least.
    pub min: f64,
    /// Median.
    pub median: f64,
    /// Largest.
    pub max: f64,
}

/// Whether and when the cell shorted.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct ShortSummary {
    /// Whether one was seen.
    pub observed: bool,
    /// When, s.
    pub time_s: Option<f64>,
    /// What shows it.
    pub evidence: Option<ShortEvidence>,
}

/// What shows a short.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum ShortEvidence {
    /// The voltage or current says so.
    Electrical,
    /// Ink touches the far edge.
    Bridging,
}
