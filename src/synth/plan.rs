//! The tables of a scenario: load, cell, growth.
//! Defaults are common practice in sign and order of magnitude, chosen for a plausible picture, not fitted to any record.

use serde::{Deserialize, Serialize};

/// How force becomes stress in the written run.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum FixtureKind {
    /// No load; no log is written.
    None,
    /// The log holds the stress.
    Stress,
    /// Force over `area_mm2`, along `direction_deg`.
    Uniaxial,
    /// Force over `area_mm2`, through the plates.
    Stack,
    /// Bending of a beam held at one end: 6FL/(bh²).
    Cantilever,
}

/// The load history.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(default, deny_unknown_fields)]
pub struct LoadPlan {
    /// How force becomes stress.
    pub fixture: FixtureKind,
    /// In order of time; before the first one its values hold.
    pub stages: Vec<LoadStage>,
    /// Spacing of the log's samples, s; 0: a fifth of the frame interval.
    pub log_every_s: f64,
    /// Standard deviation of the logged stress, MPa.
    pub noise_mpa: f64,
    /// Loaded area (`uniaxial`, `stack`), mm².
    pub area_mm2: f64,
    /// Beam width (`cantilever`), mm.
    pub width_mm: f64,
    /// Beam thickness (`cantilever`), mm.
    pub thickness_mm: f64,
    /// Load point to the filmed spot (`cantilever`), mm.
    pub arm_mm: f64,
}

impl Default for LoadPlan {
    fn default() -> Self {
        Self {
            fixture: FixtureKind::None,
            stages: Vec::new(),
            log_every_s: 0.0,
            noise_mpa: 0.5,
            area_mm2: 3.0,
            width_mm: 4.0,
            thickness_mm: 0.5,
            arm_mm: 12.0,
        }
    }
}

/// A load reached over `ramp_s` from `at_s` on and held from then.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct LoadStage {
    /// When the change starts, s.
    pub at_s: f64,
    /// Stress to reach, MPa, positive in compression.
    pub stress_mpa: f64,
    /// Axis to reach, degrees (the shorter way round); unused by `stack`.
    #[serde(default)]
    pub direction_deg: f64,
    /// Duration of the change, s; 0 is a step.
    #[serde(default)]
    pub ramp_s: f64,
}

/// The cell and its log.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(default, deny_unknown_fields)]
pub struct CellPlan {
    /// Whether `cell.csv` is written.
    pub log: bool,
    /// Current that grows filaments at their nominal speed, mA.
    pub current_ma: f64,
    /// Changes of the current (negative strips, 0 rests); empty: constant.
    pub stages: Vec<CurrentStage>,
    /// Electrode area, mm².
    pub area_mm2: f64,
    /// Depth seen through, mm.
    pub view_depth_mm: f64,
    /// Cell voltage while plating, V.
    pub voltage_v: f64,
    /// Standard deviation of the logged voltage, V.
    pub noise_v: f64,
}

impl Default for CellPlan {
    fn default() -> Self {
        Self {
            log: true,
            current_ma: 0.02,
            stages: Vec::new(),
            area_mm2: 3.2,
            view_depth_mm: 0.4,
            voltage_v: 0.06,
            noise_v: 0.0006,
        }
    }
}

/// A current in force from `at_s` on.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct CurrentStage {
    /// From when, s.
    pub at_s: f64,
    /// mA, positive plates.
    pub current_ma: f64,
}

/// How a tip's speed changes with its age.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum SpeedLaw {
    /// Constant but for noise.
    Steady,
    /// ∝ (1 + age/τ)^−½, τ a quarter of the time there is.
    Slowing,
    /// ∝ 1 + age/τ, τ a quarter of the time there is.
    Accelerating,
    /// Bursts and pauses of exponential length.
    StopAndGo,
}

/// The shape of a live tip.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum TipShape {
    /// Full width to the end, round cap.
    Round,
    /// Narrows over the last three widths to a third of the width.
    Tapered,
}

/// What a tip does that runs into another track.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Meeting {
    /// It joins it and stops.
    Stop,
    /// It goes on across it (another depth of the specimen).
    Cross,
}

/// How filaments grow. A range `[a, b]` is drawn from once a filament.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(default, deny_unknown_fields)]
pub struct GrowthPlan {
    /// Filaments drawn by chance along the plating edge (besides `roots`).
    pub filaments: usize,
    /// Filaments placed by hand.
    pub roots: Vec<RootPlan>,
    /// Start times, s after the last bare frame.
    pub start_s: [f64; 2],
    /// Full widths, px.
    pub width_px: [f64; 2],
    /// Tip speeds at nominal current, px/s; [0, 0]: such that a straight one would need 0.6–1.8 times the time there is.
    pub speed_px_per_s: [f64; 2],
    /// Speed against age.
    pub law: SpeedLaw,
    /// Relative standard deviation of a tip's speed about its law.
    pub speed_noise: f64,
    /// Correlation time of that noise, s.
    pub speed_memory_s: f64,
    /// Pull toward the expected axis, 1/px at 100 MPa (grows in proportion to |stress|).
    pub steering_per_px: f64,
    /// Pull toward the plating edge's normal, 1/px.
    pub field_per_px: f64,
    /// Standard deviation of the wandering curvature, 1/px.
    pub wander_per_px: f64,
    /// Correlation length of the wandering curvature, px.
    pub wander_memory_px: f64,
    /// Directions at the root: degrees off the edge's normal, standard deviation.
    pub root_spread_deg: f64,
    /// Side branches per 100 px of growth.
    pub branches_per_100_px: f64,
    /// Most side branches of one filament.
    pub branch_limit: usize,
    /// Angle of a side branch off its parent, degrees.
    pub branch_angle_deg: [f64; 2],
    /// Relative change of width along a track (standard deviation).
    pub width_noise: f64,
    /// Time constant with which a new stretch reaches its full width from 60 %, s; 0: at once.
    pub widen_s: f64,
    /// Shape of live tips.
    pub tip: TipShape,
    /// What happens where tracks meet.
    pub meeting: Meeting,
    /// Retreat speed at nominal current when stripping, px/s; 0: no retreat.
    pub retreat_px_per_s: f64,
    /// Share of the contrast left where metal was stripped.
    pub stripped_contrast: f64,
}

impl Default for GrowthPlan {
    fn default() -> Self {
        Self {
            filaments: 4,
            roots: Vec::new(),
            start_s: [5.0, 60.0],
            width_px: [2.0, 6.0],
            speed_px_per_s: [0.0, 0.0],
            law: SpeedLaw::Steady,
            speed_noise: 0.25,
            speed_memory_s: 30.0,
            steering_per_px: 0.04,
            field_per_px: 0.012,
            wander_per_px: 0.018,
            wander_memory_px: 25.0,
            root_spread_deg: 15.0,
            branches_per_100_px: 0.3,
            branch_limit: 4,
            branch_angle_deg: [30.0, 65.0],
            width_noise: 0.06,
            widen_s: 0.0,
            tip: TipShape::Round,
            meeting: Meeting::Stop,
            retreat_px_per_s: 0.0,
            stripped_contrast: 0.0,
        }
    }
}

/// A filament placed by hand; what is left out is drawn like the others'.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct RootPlan {
    /// Place along the plating edge, 0 (its first point) to 1 (its last).
    pub along: f64,
    /// First arrival, s.
    pub start_s: Option<f64>,
    /// Full width, px.
    pub width_px: Option<f64>,
    /// Tip speed, px/s.
    pub speed_px_per_s: Option<f64>,
    /// Direction at the root, degrees off the edge's normal, positive anticlockwise as displayed.
    pub lean_deg: Option<f64>,
}
