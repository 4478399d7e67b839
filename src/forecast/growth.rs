//! How each filament grows by the shared clock: fitted under every hypothesis, weighed, and looked ahead from.
//! Method: state (depth, rate per unit of progress), linear and filtered exactly (Kalman 1960). Depth gains noise with progress
//! (variance = grain × rate × progress), the rate wanders with the log of progress, and the measured depth carries its own
//! standard uncertainty, so that neither is taken for the other. Both noises are unknown and summed over a small grid.
//! Limits: noise is Gaussian in the filter; jumps of the rate are met by the wandering rate and by the heavy tail in `contact`.

use super::clock::{Clock, Drive, clocks, drives};
use super::{Record, TipSeries};

/// Fewest depths of a filament from which a rate is read.
pub(crate) const LEAST_POINTS: usize = 3;
/// Intervals the record is thinned to. Few are better than many: neighbouring frames share their noise (a pause, a wandering rate),
/// and many would take it for independent evidence.
const KNOTS: usize = 9;
/// Filaments followed: those nearest to contact at their pace.
const TIPS: usize = 3;
/// First depth, in frames of mean gain, from which a filament counts as seen late.
const LATE_FRAMES: f64 = 5.0;
/// Growth noise: relative SD of the whole depth so far.
const GRAINS: [f64; 4] = [0.03, 0.08, 0.2, 0.45];
/// Wander of the rate: its relative SD over a growth by e in progress.
const WANDERS: [f64; 3] = [0.05, 0.2, 0.5];
/// Prior weights of [`WANDERS`].
const WANDER_WEIGHTS: [f64; 3] = [0.5, 0.35, 0.15];
/// Share of progress below which the wander no longer speeds up (the log would run away at the onset).
const WANDER_FLOOR: f64 = 0.1;
/// The heaviest hypotheses that together hold this share of the weight are kept.
const KEPT: f64 = 0.995;
/// Slots of the noise grid that scout a hypothesis, and how far below the best, as a log, it is not worth the whole grid.
const SCOUTS: [usize; 3] = [0, 4, 8];
/// See [`SCOUTS`].
const HOPELESS: f64 = 9.0;

/// What one filament is expected to do under one hypothesis about the clock. Progress counts from 1 at the end of the record.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Outlook {
    /// Depth still to cross, µm, and growth a unit of progress, µm.
    pub(crate) remaining: f64,
    pub(crate) rate: f64,
    /// Variances of depth and rate and their covariance now.
    pub(crate) depth_variance: f64,
    pub(crate) covariance: f64,
    pub(crate) rate_variance: f64,
    /// Variance of depth gained a unit of progress, and of the rate a unit of log progress.
    pub(crate) grain: f64,
    pub(crate) wander: f64,
}

/// One hypothesis with its weight and the outlook of each filament (in the order of [`Fits::tips`]).
#[derive(Debug, Clone)]
pub(crate) struct Hypothesis {
    pub(crate) clock: Clock,
    pub(crate) weight: f64,
    pub(crate) outlooks: Vec<Outlook>,
}

/// All hypotheses that matter, heaviest first, and the filaments they speak of (indices into the record).
#[derive(Debug, Clone, Default)]
pub(crate) struct Fits {
    pub(crate) tips: Vec<usize>,
    pub(crate) hypotheses: Vec<Hypothesis>,
    pub(crate) drives: Vec<Drive>,
}

/// Fits and weighs every hypothesis. Empty when no filament has [`LEAST_POINTS`] depths.
pub(crate) fn fit(record: &Record) -> Fits {
    let tips = followed(record);
    let Some(first) = tips.iter().map(|&tip| record.tips[tip].first).min() else {
        return Fits::default();
    };
    let knots = knots(first.saturating_sub(1), record.times_s.len() - 1);
    let drives = drives(record);
    let paths: Vec<Path> =
        clocks(&drives, first).into_iter().map(|clock| Path::new(clock, &drives[clock.drive], &knots)).collect();
    let scouted: Vec<f64> = paths.iter().map(|path| path.scout(record, &tips, &knots)).collect();
    let best = scouted.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    let hopeful = paths.iter().zip(scouted).filter(|(_, weight)| *weight >= best - HOPELESS);
    let mut hypotheses: Vec<Hypothesis> = hopeful.map(|(path, _)| path.weigh(record, &tips, &knots)).collect();
    settle(&mut hypotheses);
    Fits { tips, hypotheses, drives }
}

/// From log weights to shares, heaviest first, without the lightest.
fn settle(hypotheses: &mut Vec<Hypothesis>) {
    hypotheses.sort_by(|a, b| b.weight.total_cmp(&a.weight));
    let heaviest = hypotheses.first().map_or(0.0, |h| h.weight);
    for hypothesis in hypotheses.iter_mut() {
        hypothesis.weight = libm::exp(hypothesis.weight - heaviest);
    }
    let enough = KEPT * hypotheses.iter().map(|h| h.weight).sum::<f64>();
    let mut kept = 0.0;
    hypotheses.retain(|h| {
        let wanted = kept < enough;
        kept += if wanted { h.weight } else { 0.0 };
        wanted
    });
    for hypothesis in hypotheses {
        hypothesis.weight /= kept;
    }
}

/// The filaments nearest to contact by remaining distance over mean pace.
fn followed(record: &Record) -> Vec<usize> {
    let wait = |tip: &TipSeries| {
        let last = tip.depth_um.len() - 1;
        tip.remaining_um[last] / (tip.depth_um[last] / tip.depth_um.len() as f64).max(f64::MIN_POSITIVE)
    };
    let mut order: Vec<usize> = (0..record.tips.len())
        .filter(|&k| record.tips[k].depth_um.len() >= LEAST_POINTS && grown(&record.tips[k]))
        .collect();
    order.sort_by(|&a, &b| wait(&record.tips[a]).total_cmp(&wait(&record.tips[b])).then(a.cmp(&b)));
    order.truncate(TIPS);
    order
}

fn grown(tip: &TipSeries) -> bool {
    tip.depth_um[tip.depth_um.len() - 1] > 0.0
}

/// At most [`KNOTS`] + 1 indices from `from` to `to`, about evenly spaced, both ends among them.
fn knots(from: usize, to: usize) -> Vec<usize> {
    let steps = (to - from).clamp(1, KNOTS);
    let mut all: Vec<usize> = (0..=steps).map(|k| from + (to - from) * k / steps).collect();
    all.dedup();
    all
}

/// A clock read at the knots.
struct Path {
    clock: Clock,
    progress: Vec<f64>,
    /// Log of the progress, held back near the onset.
    logs: Vec<f64>,
}

impl Path {
    fn new(clock: Clock, drive: &Drive, knots: &[usize]) -> Self {
        let progress: Vec<f64> = knots.iter().map(|&k| clock.progress(drive.ticks[k])).collect();
        let logs = progress.iter().map(|&s| libm::log(s + WANDER_FLOOR)).collect();
        Self { clock, progress, logs }
    }

    /// States of the filaments under one slot of the noise grid, and the log of the slot's weight.
    fn under(&self, slot: usize, record: &Record, tips: &[usize], knots: &[usize]) -> (f64, [State; TIPS]) {
        let (grain, wander) = (GRAINS[slot / WANDERS.len()], WANDERS[slot % WANDERS.len()]);
        let mut states = [State::default(); TIPS];
        let mut weight = libm::log(WANDER_WEIGHTS[slot % WANDERS.len()]);
        for (state, &tip) in states.iter_mut().zip(tips) {
            *state = filter(&record.tips[tip], knots, &self.progress, &self.logs, grain, wander);
            weight += state.log_likelihood;
        }
        (weight, states)
    }

    /// About the log weight of the hypothesis, from a few slots.
    fn scout(&self, record: &Record, tips: &[usize], knots: &[usize]) -> f64 {
        let weights = SCOUTS.map(|slot| self.under(slot, record, tips, knots).0);
        self.clock.log_prior + weights.into_iter().fold(f64::NEG_INFINITY, f64::max)
    }

    /// Sums over the noise grid; the weight of the result is still a log.
    fn weigh(&self, record: &Record, tips: &[usize], knots: &[usize]) -> Hypothesis {
        let mut candidates = [(f64::NEG_INFINITY, [State::default(); TIPS]); GRAINS.len() * WANDERS.len()];
        for (slot, candidate) in candidates.iter_mut().enumerate() {
            *candidate = self.under(slot, record, tips, knots);
        }
        let best = candidates.iter().map(|c| c.0).fold(f64::NEG_INFINITY, f64::max);
        let weights = candidates.map(|c| libm::exp(c.0 - best));
        let total: f64 = weights.iter().sum();
        let outlooks = (0..tips.len())
            .map(|t| merge(&record.tips[tips[t]], &weights.map(|w| w / total), &candidates.map(|c| c.1[t])))
            .collect();
        Hypothesis { clock: self.clock, weight: self.clock.log_prior + best + libm::log(total), outlooks }
    }
}

#[derive(Debug, Clone, Copy, Default)]
struct State {
    depth: f64,
    rate: f64,
    dd: f64,
    dr: f64,
    rr: f64,
    grain: f64,
    wander: f64,
    log_likelihood: f64,
}

/// Kalman filter of one filament over the knots. It starts at depth 0 at the last knot before its first sight, or at its first
/// sight where that came late.
fn filter(tip: &TipSeries, knots: &[usize], progress: &[f64], logs: &[f64], grain: f64, wander: f64) -> State {
    let unseen = usize::from(!seen_late(tip));
    let start = knots.partition_point(|&k| k < tip.first).saturating_sub(unseen).min(knots.len() - 2);
    let last = tip.depth_um.len() - 1;
    let seen_from_the_start = knots[start] >= tip.first;
    let base = if seen_from_the_start { tip.depth_um[knots[start] - tip.first] } else { 0.0 };
    let top = tip.depth_um[last];
    let pace = ((top - base).max(0.1 * top) / (1.0 - progress[start]).max(1e-6)).max(f64::MIN_POSITIVE);
    // undetected ink at the frame before: a few uncertainties, and a hundredth of the depth
    let blur = 3.0 * tip.u_depth_um[0] + 0.01 * top;
    let mut state = State { depth: base, rate: pace, dd: blur * blur, rr: 4.0 * pace * pace, ..State::default() };
    state.grain = grain * grain * top * pace;
    state.wander = wander * wander * pace * pace;
    let (mut misfit, mut volume) = (0.0, 1.0);
    for k in start + 1..knots.len() {
        let step = progress[k] - progress[k - 1];
        let drift = state.wander * (logs[k] - logs[k - 1]);
        state.depth += step * state.rate;
        state.dd += 2.0 * step * state.dr + step * step * state.rr + state.grain * step + drift * step * step / 3.0;
        state.dr += step * state.rr + 0.5 * drift * step;
        state.rr += drift;
        let at = knots[k] - tip.first;
        let u = tip.u_depth_um[at].max(1e-3 * top);
        let spread = state.dd + u * u;
        let miss = tip.depth_um[at] - state.depth;
        misfit += miss * miss / spread;
        // one logarithm for all knots: in parts of the depth, the product of ten variances stays far from the limits of f64
        volume *= spread / (top * top);
        let (gain, turn) = (state.dd / spread, state.dr / spread);
        state.depth += gain * miss;
        state.rate += turn * miss;
        state.rr -= turn * state.dr;
        state.dr -= gain * state.dr;
        state.dd -= gain * state.dd;
    }
    state.log_likelihood = -0.5 * (misfit + libm::log(volume));
    state
}

/// Whether the filament was already far deeper at first sight than it gained in a frame since: hidden before (in the blur of the
/// electrode, say), so that its first depth tells nothing about its rate.
fn seen_late(tip: &TipSeries) -> bool {
    let last = tip.depth_um.len() - 1;
    let gain = (tip.depth_um[last] - tip.depth_um[0]) / last.max(1) as f64;
    tip.depth_um[0] > LATE_FRAMES * gain + 3.0 * tip.u_depth_um[0]
}

/// One outlook with the mean and spread of the weighted states.
fn merge(tip: &TipSeries, weights: &[f64], states: &[State]) -> Outlook {
    let last = tip.depth_um.len() - 1;
    let far = tip.depth_um[last] + tip.remaining_um[last];
    let mean = |value: &dyn Fn(&State) -> f64| weights.iter().zip(states).map(|(w, s)| w * value(s)).sum::<f64>();
    let (depth, rate) = (mean(&|s| s.depth), mean(&|s| s.rate));
    Outlook {
        remaining: (far - depth).max(0.02 * tip.remaining_um[last]),
        rate,
        depth_variance: mean(&|s| s.dd + (s.depth - depth) * (s.depth - depth)),
        covariance: mean(&|s| s.dr + (s.depth - depth) * (s.rate - rate)),
        rate_variance: mean(&|s| s.rr + (s.rate - rate) * (s.rate - rate)),
        grain: mean(&|s| s.grain),
        wander: mean(&|s| s.wander),
    }
}
