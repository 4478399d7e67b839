//! A scenario: everything a synthetic run is made from, as a TOML file.
//!
//! Every key is optional but `seed`; unknown keys are errors. `grade` sets the whole `[imaging]` table, whose keys can be
//! set singly on top. Lengths are in px of the picture (scale: `um_per_px`), times in seconds since the first frame, directions in
//! degrees anticlockwise from +x as displayed. The same scenario gives the same bytes everywhere.
//!
//! ```toml
//! name = "ridge-like"
//! seed = 7
//! grade = "typical"
//! plating_edge = [[30, 0], [30, 359]]
//! far_edge = [[440, 0], [440, 359]]
//!
//! [load]
//! fixture = "stress"
//! stages = [{ at_s = 0.0, stress_mpa = 120.0, direction_deg = 90.0 },
//!           { at_s = 200.0, stress_mpa = 120.0, direction_deg = 10.0, ramp_s = 30.0 }]
//!
//! [growth]
//! filaments = 4
//! ```

use std::path::Path;

use serde::{Deserialize, Serialize};

use super::SynthError;
use super::imaging::{Grade, Imaging};

/// Darker or brighter than the electrolyte around it.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Polarity {
    /// Light is lost in the filament.
    Darker,
    /// The filament scatters light.
    Brighter,
}

/// A whole synthetic run.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(default, deny_unknown_fields)]
pub struct Scenario {
    /// Name of the run.
    pub name: String,
    /// Specimen, where several runs share one.
    pub specimen: Option<String>,
    /// A line for the run's note.
    pub note: Option<String>,
    /// Everything drawn by chance is drawn from this.
    pub seed: u64,
    /// Sets `imaging`; keys given there win.
    pub grade: Option<Grade>,
    /// Picture width, px.
    pub width: u32,
    /// Picture height, px.
    pub height: u32,
    /// Number of frames.
    pub frames: usize,
    /// Leading frames without growth.
    pub bare: usize,
    /// Time between frames, s.
    pub interval_s: f64,
    /// µm per pixel.
    pub um_per_px: f64,
    /// Brightness of filaments.
    pub filament: Polarity,
    /// Polyline of the plating edge, px; empty: a line near the left border.
    pub plating_edge: Vec<[f64; 2]>,
    /// Polyline of the far edge, px; empty: a line near the right border.
    pub far_edge: Vec<[f64; 2]>,
    /// The load and its log.
    pub load: LoadPlan,
    /// The cell and its log.
    pub cell: CellPlan,
    /// How filaments grow.
    pub growth: GrowthPlan,
    /// How the picture is taken.
    pub imaging: Imaging,
}

impl Default for Scenario {
    fn default() -> Self {
        Self {
            name: "synthetic".into(),
            specimen: None,
            note: None,
            seed: 1,
            grade: None,
            width: 480,
            height: 360,
            frames: 40,
            bare: 6,
            interval_s: 10.0,
            um_per_px: 1.25,
            filament: Polarity::Darker,
            plating_edge: Vec::new(),
            far_edge: Vec::new(),
            load: LoadPlan::default(),
            cell: CellPlan::default(),
            growth: GrowthPlan::default(),
            imaging: Imaging::of(Grade::Clear),
        }
    }
}

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

impl Scenario {
    /// Reads a scenario file.
    /// # Errors
    /// [`SynthError::Io`] when it cannot be read, [`SynthError::Scenario`] with line and key when it does not parse.
    pub fn load(path: &Path) -> Result<Self, SynthError> {
        let text = std::fs::read_to_string(path).map_err(|source| SynthError::io(path, source))?;
        Self::parse(&text, path)
    }

    /// Parses the text of a scenario file; `path` is only named in errors.
    /// # Errors
    /// [`SynthError::Scenario`] with line and key.
    pub fn parse(text: &str, path: &Path) -> Result<Self, SynthError> {
        let wrong = |message: String| SynthError::Scenario {
            path: path.to_owned(),
            message,
        };
        let mut scenario: Self = toml::from_str(text).map_err(|e| wrong(e.to_string()))?;
        if let Some(grade) = scenario.grade {
            let document: toml::Table = toml::from_str(text).map_err(|e| wrong(e.to_string()))?;
            let mut imaging =
                toml::Table::try_from(Imaging::of(grade)).map_err(|e| wrong(e.to_string()))?;
            if let Some(toml::Value::Table(own)) = document.get("imaging") {
                imaging.extend(own.clone());
            }
            scenario.imaging = imaging
                .try_into()
                .map_err(|e: toml::de::Error| wrong(e.to_string()))?;
        }
        scenario.settle().map_err(wrong)
    }

    /// Fills in what was left to default (edges) and checks the rest.
    ///
    /// # Errors
    /// What is wrong, in words.
    pub fn settle(mut self) -> Result<Self, String> {
        let (w, h) = (f64::from(self.width), f64::from(self.height));
        if self.plating_edge.is_empty() {
            self.plating_edge = vec![[(w * 0.08).round(), 0.0], [(w * 0.08).round(), h - 1.0]];
        }
        if self.far_edge.is_empty() {
            self.far_edge = vec![[(w * 0.92).round(), 0.0], [(w * 0.92).round(), h - 1.0]];
        }
        let must = |good: bool, what: &str| if good { Ok(()) } else { Err(what.to_owned()) };
        must(
            (32..=8192).contains(&self.width) && (32..=8192).contains(&self.height),
            "width and height must be 32 to 8192 px",
        )?;
        must(
            (1..=100_000).contains(&self.frames),
            "frames must be 1 to 100000",
        )?;
        must(self.bare <= self.frames, "bare must not exceed frames")?;
        must(
            self.interval_s > 0.0 && self.um_per_px > 0.0,
            "interval_s and um_per_px must be above 0",
        )?;
        must(
            self.plating_edge.len() >= 2 && self.far_edge.len() >= 2,
            "an edge needs at least two points",
        )?;
        must(
            self.load.stages.windows(2).all(|s| s[0].at_s < s[1].at_s),
            "load.stages must be in order of at_s",
        )?;
        must(
            self.cell.stages.windows(2).all(|s| s[0].at_s < s[1].at_s),
            "cell.stages must be in order of at_s",
        )?;
        must(
            self.cell.current_ma > 0.0,
            "cell.current_ma must be above 0",
        )?;
        must(
            self.load.fixture == FixtureKind::None || !self.load.stages.is_empty(),
            "load.stages is empty: give one stage, or fixture = \"none\"",
        )?;
        must(
            self.growth.width_px[0] > 0.0,
            "growth.width_px must be above 0",
        )?;
        must(
            self.growth.wander_memory_px > 0.0 && self.growth.speed_memory_s > 0.0,
            "a memory must be above 0",
        )?;
        must(
            self.imaging.broken + self.imaging.repeated + self.imaging.blank < self.frames,
            "imaging.broken, repeated and blank leave no usable frame",
        )?;
        must(
            self.imaging.bits == 8 || self.imaging.bits == 16,
            "imaging.bits must be 8 or 16",
        )?;
        Ok(self)
    }

    /// Time of frame `k`, s.
    #[must_use]
    pub fn time(&self, k: usize) -> f64 {
        k as f64 * self.interval_s
    }

    /// Time of the last frame, s.
    #[must_use]
    pub fn end_s(&self) -> f64 {
        self.time(self.frames - 1)
    }

    /// Time of the last bare frame, s (0 without one).
    #[must_use]
    pub fn bare_until_s(&self) -> f64 {
        self.time(self.bare.saturating_sub(1))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn parse(text: &str) -> Result<Scenario, SynthError> {
        Scenario::parse(text, Path::new("scenario.toml"))
    }

    #[test]
    fn grade_sets_imaging_and_single_keys_win() {
        let scenario = parse("seed = 3\ngrade = \"hard\"\n[imaging]\ncontrast = 0.5").unwrap();
        assert!((scenario.imaging.contrast - 0.5).abs() < 1e-12);
        assert!((scenario.imaging.noise - Imaging::of(Grade::Hard).noise).abs() < 1e-12);
    }

    #[test]
    fn unknown_keys_are_named_with_their_line() {
        let message = parse("seed = 3\nframs = 4").unwrap_err().to_string();
        assert!(
            message.contains("frams") && message.contains("line 2"),
            "{message}"
        );
        let message = parse("seed = 3\n[imaging]\ncontrst = 0.4")
            .unwrap_err()
            .to_string();
        assert!(
            message.contains("contrst") && message.contains("line 3"),
            "{message}"
        );
    }

    #[test]
    fn impossible_scenarios_are_refused() {
        for text in [
            "frames = 0",
            "bare = 41",
            "interval_s = 0.0",
            "[imaging]\nbits = 12",
            "[load]\nfixture = \"stress\"",
        ] {
            assert!(parse(text).is_err(), "{text}");
        }
    }
}
