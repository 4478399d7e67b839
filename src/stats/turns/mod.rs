//! The load's effect within a run: did growth turn when the load did?
//!
//! [`steps`] finds the steps of the load, [`change`] when and how each filament turned after one, [`mod@reference`] whether it
//! turned more than the same filaments do at times without a step. [`turns`] puts them together.
//! Limits: one film shows one specimen; a ramp longer than some frames is no step; a turn of less than about 20° in growth
//! that wanders as much by itself stays unseen, and "too few to say" is an answer.

pub mod change;
pub mod reference;
pub mod steps;

use super::angles::{acute, doubled, halved};
use change::{FilamentTurn, TurnTime};
use reference::Contrast;
use steps::LoadStep;

/// A piece of growth.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct GrowthPiece {
    /// Time at which it was new, s.
    pub time_s: f64,
    /// The filament it belongs to.
    pub filament: u32,
    /// Length grown by the filament up to it (any unit, rising with time).
    pub position: f64,
    /// Direction, degrees, axial.
    pub angle_deg: f64,
    /// Its length, same unit as `position`.
    pub weight: f64,
}

/// A sample of the load log; it holds until the next.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct LoadSample {
    /// Time, s.
    pub time_s: f64,
    /// Axis, degrees; `None` where the load has no axis or is absent.
    pub axis_deg: Option<f64>,
    /// Stress, MPa, positive in compression; `None` where absent.
    pub stress_mpa: Option<f64>,
}

/// What counts as a step and as a turn.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct TurnSettings {
    /// Least change of the load that is a step, MPa: length of the change of stress·(cos 2a, sin 2a).
    pub min_step_mpa: f64,
    /// Level of the run's test at which a turn is reported.
    pub level: f64,
    /// Least mean turn toward the expected axis that is reported as one, degrees.
    pub min_turn_deg: f64,
}

impl Default for TurnSettings {
    /// 30 MPa, 0.05, 15°: our choices. With them under 1 % of simulated runs without an effect report a turn.
    fn default() -> Self {
        Self { min_step_mpa: 30.0, level: 0.05, min_turn_deg: 15.0 }
    }
}

/// What was seen at a step.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Verdict {
    /// Growth turned toward the axis expected after the step.
    Turned,
    /// Growth did not turn: the load did nothing that shows.
    NoTurn,
    /// No filament grew long enough on both sides, or there is no time without a step to judge against.
    TooFewToSay,
    /// The load was taken off: no axis is expected.
    NothingExpected,
}

/// One step of the load and what growth did.
#[derive(Debug, Clone, PartialEq)]
pub struct StepTurn {
    /// The step.
    pub step: LoadStep,
    /// What was seen.
    pub verdict: Verdict,
    /// Mean axis of growth before and after the change point, degrees.
    pub before_deg: Option<f64>,
    /// See `before_deg`.
    pub after_deg: Option<f64>,
    /// Mean over filaments of the loss of acute angle to the expected axis, degrees; positive is toward it.
    pub turned_deg: Option<f64>,
    /// When growth turned, over all filaments; only with [`Verdict::Turned`].
    pub turned_at: Option<TurnTime>,
    /// Median length grown on by the filaments that followed, from the step until their own turn, unit of `position`.
    pub grew_on: Option<f64>,
    /// Each filament that grew on both sides.
    pub filaments: Vec<FilamentTurn>,
    /// Filaments that followed.
    pub followed: usize,
    /// Filaments' change at this step against their change at times without a step.
    pub contrast: Option<Contrast>,
}

/// All steps of a run.
#[derive(Debug, Clone, PartialEq)]
pub struct Turns {
    /// In order of time.
    pub steps: Vec<StepTurn>,
    /// The run's one test over all its steps; `None` without steps or without enough growth.
    pub overall: Option<Contrast>,
}

/// Finds the steps of the load and what growth did at each.
///
/// `pieces` in any order; `load` in order of time. A run without a step of the load gives no rows; a step that did nothing
/// is a row that says so. Cost: pieces × steps, plus the log once.
///
/// ```
/// use veerlog::stats::turns::{turns, GrowthPiece, LoadSample, TurnSettings, Verdict};
/// // Six filaments grow along 0°; the load turns from 0° to 90° at 300 s and growth follows 20 s later.
/// let mut pieces = Vec::new();
/// for filament in 0..6 {
///     for frame in 0..60 {
///         let time_s = 10.0 * f64::from(frame) + 5.0;
///         let wander = f64::from((frame * 7 + filament * 5) % 11) - 5.0;
///         let angle_deg = wander + if time_s > 320.0 { 90.0 } else { 0.0 };
///         let position = 4.0 * f64::from(frame);
///         pieces.push(GrowthPiece { time_s, filament: filament as u32, position, angle_deg, weight: 4.0 });
///     }
/// }
/// let sample = |time_s, axis| LoadSample { time_s, axis_deg: Some(axis), stress_mpa: Some(150.0) };
/// let found = turns(&pieces, &[sample(0.0, 0.0), sample(300.0, 90.0)], TurnSettings::default());
/// let step = &found.steps[0];
/// assert_eq!((step.verdict, step.followed), (Verdict::Turned, 6));
/// assert!((step.turned_at.unwrap().time_s - 320.0).abs() <= 20.0);
/// ```
#[must_use]
pub fn turns(pieces: &[GrowthPiece], load: &[LoadSample], settings: TurnSettings) -> Turns {
    let mut order: Vec<GrowthPiece> = pieces.iter().copied().filter(|p| p.weight > 0.0).collect();
    order.sort_by(|a, b| {
        a.time_s.total_cmp(&b.time_s).then(a.filament.cmp(&b.filament)).then(a.position.total_cmp(&b.position))
    });
    let Some(spacing_s) = steps::frame_spacing(&order) else {
        return Turns { steps: Vec::new(), overall: None };
    };
    let found = steps::find(&order, load, spacing_s, settings.min_step_mpa);
    let judged = reference::Judge::new(&order, &found, spacing_s);
    let overall = judged.overall();
    let rows = (0..found.len()).map(|i| describe(i, &found, &order, spacing_s, &judged, overall, settings)).collect();
    Turns { steps: rows, overall }
}

fn describe(
    index: usize,
    found: &[LoadStep],
    pieces: &[GrowthPiece],
    spacing_s: f64,
    judged: &reference::Judge,
    overall: Option<Contrast>,
    settings: TurnSettings,
) -> StepTurn {
    let step = found[index];
    let near = change::near(pieces, found, index, spacing_s);
    let pooled = change::pooled(&near, step, spacing_s);
    let filaments = change::by_filament(&near, step, spacing_s);
    let contrast = judged.at(index);
    let turned: Vec<f64> = filaments.iter().filter_map(|f| f.turned_deg).collect();
    let turned_deg = super::order::mean(&turned);
    let followed = filaments.iter().filter(|f| f.followed).count();
    let verdict = if step.expected_after().is_none() {
        Verdict::NothingExpected
    } else if contrast.is_none() || overall.is_none() || filaments.is_empty() {
        Verdict::TooFewToSay
    } else if overall.is_some_and(|o| o.p <= settings.level)
        && contrast.is_some_and(|c| c.gain > 0.0)
        && turned_deg.is_some_and(|t| t >= settings.min_turn_deg)
        && 2 * followed >= filaments.len()
    {
        Verdict::Turned
    } else {
        Verdict::NoTurn
    };
    let did = verdict == Verdict::Turned;
    let lags: Vec<f64> = filaments.iter().filter(|f| f.followed).filter_map(|f| f.grew_on).collect();
    StepTurn {
        step,
        verdict,
        before_deg: mean_axis(filaments.iter().map(|f| f.before_deg)),
        after_deg: mean_axis(filaments.iter().map(|f| f.after_deg)),
        turned_deg,
        turned_at: pooled.filter(|_| did),
        grew_on: super::order::median(&lags).filter(|_| did),
        followed: if did { followed } else { 0 },
        filaments,
        contrast,
    }
}

fn mean_axis(axes: impl Iterator<Item = f64>) -> Option<f64> {
    let sum = axes.map(doubled).fold([0.0; 2], |s, v| [s[0] + v[0], s[1] + v[1]]);
    halved(sum)
}

/// Loss of acute angle to `expected` from `before` to `after`, degrees.
fn turned_toward(before: f64, after: f64, expected: f64) -> f64 {
    acute(before, expected) - acute(after, expected)
}
