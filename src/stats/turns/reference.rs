//! Did the filaments turn more at a step than they turn by themselves?
//!
//! A filament's change at a time is the gain of mean cos 2(direction − axis expected after the step) from a window before to
//! a window up to twice as wide after, since growth turns late. The same is taken, about the same axis, at times without a
//! step. The contrast is the mean over filaments of (change at the step − its mean change elsewhere), tested one-sided by t
//! on the larger of two standard errors: between filaments, and from the scatter of each filament's own changes. Filaments
//! that cross the gap, curve or wander do so at the other times too. Size measured by [`crate::stats::calibration`].
//! What a filament did before the step counts at least: growth that straightens out does so less and less. A filament
//! without a past before any step is left out. Limit: growth that happens to bend just then, all filaments together, cannot be told from the load in one run.

use std::collections::BTreeMap;

use super::GrowthPiece;
use super::steps::LoadStep;
use crate::stats::angles::doubled;
use crate::stats::distributions::t_two_sided;
use crate::stats::order::{mean, variance};

/// A window is this share of the shortest stretch without a step, ...
const WINDOW_SHARE: f64 = 1.0 / 3.0;
/// ... but within these, in frames.
const WINDOW_FRAMES: [f64; 2] = [4.0, 8.0];

/// The window after a time is this many times as wide as the one before, as far as the stretch goes: growth turns late.
const AFTER: f64 = 2.0;

/// Change at steps against change elsewhere.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Contrast {
    /// Mean over filaments of the gain in alignment with the expected axis, less their gain elsewhere; −2 to 2.
    pub gain: f64,
    /// One-sided p of no gain.
    pub p: f64,
    /// Filaments it rests on.
    pub filaments: usize,
}

/// The windows of a run.
pub(super) struct Judge {
    by_filament: Vec<Vec<GrowthPiece>>,
    steps: Vec<LoadStep>,
    window_s: f64,
    edges: Vec<f64>,
    quiet: Vec<f64>,
}

/// One filament at one step.
#[derive(Debug, Clone, Copy)]
struct Change {
    /// Change at the step less the mean change elsewhere.
    excess: f64,
    /// Variance of one change elsewhere, and how many there were.
    scatter: f64,
    elsewhere: usize,
}

impl Judge {
    /// `pieces` in order of time.
    pub(super) fn new(pieces: &[GrowthPiece], steps: &[LoadStep], spacing_s: f64) -> Self {
        let mut by_filament: BTreeMap<u32, Vec<GrowthPiece>> = BTreeMap::new();
        for piece in pieces {
            by_filament.entry(piece.filament).or_default().push(*piece);
        }
        let mut edges: Vec<f64> = steps.iter().map(|s| s.time_s).collect();
        edges.extend(pieces.first().map(|p| p.time_s - spacing_s));
        edges.extend(pieces.last().map(|p| p.time_s));
        edges.sort_by(f64::total_cmp);
        let shortest = edges.windows(2).map(|w| w[1] - w[0]).fold(f64::INFINITY, f64::min);
        let frames = (WINDOW_SHARE * shortest / spacing_s).clamp(WINDOW_FRAMES[0], WINDOW_FRAMES[1]);
        let window_s = frames.floor() * spacing_s;
        let quiet = quiet_times(&edges, window_s);
        Self { by_filament: by_filament.into_values().collect(), steps: steps.to_vec(), window_s, edges, quiet }
    }

    /// Contrast of one step; `None` when it cannot be judged.
    pub(super) fn at(&self, index: usize) -> Option<Contrast> {
        contrast(&self.by_filament.iter().filter_map(|own| self.change(own, self.steps[index])).collect::<Vec<_>>())
    }

    /// Contrast over all steps: each filament's mean over the steps it grew through.
    pub(super) fn overall(&self) -> Option<Contrast> {
        let means: Vec<Change> = self
            .by_filament
            .iter()
            .filter_map(|own| {
                let at: Vec<Change> = self.steps.iter().filter_map(|s| self.change(own, *s)).collect();
                let over = |f: &dyn Fn(&Change) -> f64| mean(&at.iter().map(f).collect::<Vec<_>>());
                // Changes at different steps have windows of their own: their mean scatters less.
                Some(Change {
                    excess: over(&|c| c.excess)?,
                    scatter: over(&|c| c.scatter)? / at.len() as f64,
                    elsewhere: at.iter().map(|c| c.elsewhere).min()?,
                })
            })
            .collect();
        contrast(&means)
    }

    fn change(&self, own: &[GrowthPiece], step: LoadStep) -> Option<Change> {
        let axis = step.expected_after()?;
        let here = self.gain(own, step.time_s, axis)?;
        let at = |times: &[f64]| times.iter().filter_map(|t| self.gain(own, *t, axis)).collect::<Vec<f64>>();
        let before = at(&self.quiet[..self.quiet.partition_point(|t| *t < step.time_s)]);
        let elsewhere = at(&self.quiet);
        let all = mean(&elsewhere)?;
        // Growth that straightens out does so less and less: what it did before the step bounds what it would have done.
        // A filament without a past cannot say.
        let centre = mean(&before)?.max(all);
        Some(Change { excess: here - centre, scatter: variance(&elsewhere).unwrap_or(0.0), elsewhere: elsewhere.len() })
    }

    /// Gain of alignment with `axis` from the window before `time` to the window after; `None` without growth in both.
    fn gain(&self, own: &[GrowthPiece], time: f64, axis: f64) -> Option<f64> {
        let alignment = |from: f64, to: f64| {
            let window = &own[own.partition_point(|p| p.time_s <= from)..own.partition_point(|p| p.time_s <= to)];
            let (sum, weight) = window
                .iter()
                .fold((0.0, 0.0), |s, p| (s.0 + p.weight * doubled(p.angle_deg - axis)[0], s.1 + p.weight));
            (weight > 0.0).then(|| sum / weight)
        };
        let end = self.edges.iter().copied().find(|e| *e > time).unwrap_or(f64::INFINITY);
        Some(alignment(time, end.min(time + AFTER * self.window_s))? - alignment(time - self.window_s, time)?)
    }
}

/// Times without a step: one window apart, a window from either end of each stretch, and a second one after a step, in
/// which a turn may still go on. `edges`: start of growth, steps, end of growth.
fn quiet_times(edges: &[f64], window_s: f64) -> Vec<f64> {
    let mut times = Vec::new();
    for (i, stretch) in edges.windows(2).enumerate() {
        let mut time = stretch[0] + if i == 0 { window_s } else { 2.0 * window_s };
        while time + window_s <= stretch[1] + 1e-9 * window_s {
            times.push(time);
            time += window_s;
        }
    }
    times
}

/// One-sided p of t by Student's law.
fn one_sided(t: f64, dof: f64) -> f64 {
    let half = 0.5 * t_two_sided(t, dof);
    if t > 0.0 { half } else { 1.0 - half }
}

/// Changes elsewhere overlap by half: two of them carry the news of about this many.
const NEWS: f64 = 0.75;

fn contrast(changes: &[Change]) -> Option<Contrast> {
    let excess: Vec<f64> = changes.iter().map(|c| c.excess).collect();
    let gain = mean(&excess)?;
    let n = changes.len() as f64;
    let between = variance(&excess).map_or(0.0, |v| v / n);
    let pooled: f64 = changes.iter().map(|c| c.scatter * (1.0 + 1.0 / (NEWS * c.elsewhere as f64))).sum();
    let within_dof: f64 = changes.iter().map(|c| (NEWS * c.elsewhere as f64 - 1.0).max(0.0)).sum();
    let dof = within_dof + n - 1.0;
    let variance = between.max(pooled / (n * n));
    if dof <= 0.0 || variance <= 0.0 {
        return None;
    }
    let p = one_sided(gain / libm::sqrt(variance), dof);
    Some(Contrast { gain, p, filaments: changes.len() })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn quiet_times_keep_their_distance_from_steps() {
        assert_eq!(quiet_times(&[0.0, 100.0, 200.0], 20.0), [20.0, 40.0, 60.0, 80.0, 140.0, 160.0, 180.0]);
        assert!(quiet_times(&[0.0, 10.0], 20.0).is_empty());
    }

    #[test]
    fn one_filament_is_judged_against_itself() {
        let own = |excess| Change { excess, scatter: 0.01, elsewhere: 8 };
        assert!(contrast(&[own(0.8)]).unwrap().p < 0.01);
        assert!(contrast(&[own(0.05)]).unwrap().p > 0.2);
        assert_eq!(contrast(&[]), None);
        assert_eq!(contrast(&[Change { excess: 1.0, scatter: 0.0, elsewhere: 1 }]), None);
    }
}
