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
use super::plan::{CellPlan, FixtureKind, GrowthPlan, LoadPlan};

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
        let wrong = |message: String| SynthError::Scenario { path: path.to_owned(), message };
        let mut scenario: Self = toml::from_str(text).map_err(|e| wrong(e.to_string()))?;
        if let Some(grade) = scenario.grade {
            let document: toml::Table = toml::from_str(text).map_err(|e| wrong(e.to_string()))?;
            let mut imaging = toml::Table::try_from(Imaging::of(grade)).map_err(|e| wrong(e.to_string()))?;
            if let Some(toml::Value::Table(own)) = document.get("imaging") {
                imaging.extend(own.clone());
            }
            scenario.imaging = imaging.try_into().map_err(|e: toml::de::Error| wrong(e.to_string()))?;
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
        must((1..=100_000).contains(&self.frames), "frames must be 1 to 100000")?;
        must(self.bare <= self.frames, "bare must not exceed frames")?;
        must(self.interval_s > 0.0 && self.um_per_px > 0.0, "interval_s and um_per_px must be above 0")?;
        must(self.plating_edge.len() >= 2 && self.far_edge.len() >= 2, "an edge needs at least two points")?;
        must(self.load.stages.windows(2).all(|s| s[0].at_s < s[1].at_s), "load.stages must be in order of at_s")?;
        must(self.cell.stages.windows(2).all(|s| s[0].at_s < s[1].at_s), "cell.stages must be in order of at_s")?;
        must(self.cell.current_ma > 0.0, "cell.current_ma must be above 0")?;
        must(
            self.load.fixture == FixtureKind::None || !self.load.stages.is_empty(),
            "load.stages is empty: give one stage, or fixture = \"none\"",
        )?;
        must(self.growth.width_px[0] > 0.0, "growth.width_px must be above 0")?;
        must(self.growth.wander_memory_px > 0.0 && self.growth.speed_memory_s > 0.0, "a memory must be above 0")?;
        must(
            self.imaging.broken + self.imaging.repeated + self.imaging.blank < self.frames,
            "imaging.broken, repeated and blank leave no usable frame",
        )?;
        must(self.imaging.bits == 8 || self.imaging.bits == 16, "imaging.bits must be 8 or 16")?;
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
        assert!(message.contains("frams") && message.contains("line 2"), "{message}");
        let message = parse("seed = 3\n[imaging]\ncontrst = 0.4").unwrap_err().to_string();
        assert!(message.contains("contrst") && message.contains("line 3"), "{message}");
    }

    #[test]
    fn impossible_scenarios_are_refused() {
        for text in
            ["frames = 0", "bare = 41", "interval_s = 0.0", "[imaging]\nbits = 12", "[load]\nfixture = \"stress\""]
        {
            assert!(parse(text).is_err(), "{text}");
        }
    }
}
