//! Do the statistics keep their word? Rates over simulated growth, without frames.
//!
//! Growth is drawn by laws of our own, broad on purpose: directions that wander with memory, curve, start anywhere and bend
//! across the gap, steered by the load or not. Each function here draws many runs and counts; the tests hold the counts to
//! their bounds, a reduced set always, the full set by `VEERLOG_FULL=1 cargo test --release --test checks full_`.

use rand::RngExt;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};

use super::angles::{RADIANS, turn_between};
use super::bootstrap::{replicates, stream};
use super::filaments::{AxialPiece, TurnDraws, summarise};
use super::turns::{GrowthPiece, LoadSample, TurnSettings, Turns, Verdict, turns};
use super::uniformity::uniform_ks;

/// A normal deviate.
fn normal(rng: &mut ChaCha8Rng) -> f64 {
    StandardNormal.sample(rng)
}

/// A filament without load: where it heads and how it wanders.
#[derive(Debug, Clone, Copy)]
struct Wander {
    /// Direction at its start, degrees.
    start: f64,
    /// Direction it returns to (across the gap), degrees, and the share of the way it does so each frame.
    home: f64,
    pull: f64,
    /// Steady curvature, degrees a frame.
    curve: f64,
    /// Slow wander of the direction, degrees a frame, and independent scatter of each piece, degrees.
    drift: f64,
    scatter: f64,
}

impl Wander {
    /// One of four kinds: home-bound from anywhere, free wander, curved, straight.
    fn draw(kind: usize, home: f64, rng: &mut ChaCha8Rng) -> Self {
        let start = home + 20.0 * normal(rng);
        let scatter = rng.random_range(3.0..10.0);
        let still = Self { start, home, pull: 0.0, curve: 0.0, drift: rng.random_range(1.0..3.0), scatter };
        match kind % 4 {
            0 => Self { start: home + 45.0 * normal(rng), pull: rng.random_range(0.03..0.2), drift: 4.0, ..still },
            1 => Self { drift: rng.random_range(2.0..6.0), ..still },
            2 => Self { curve: 0.8 * normal(rng), ..still },
            _ => still,
        }
    }
}

/// A run to simulate.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct TurnCase {
    /// Filaments.
    pub filaments: u32,
    /// Frames with growth.
    pub frames: u32,
    /// Steps of the load, evenly spread.
    pub steps: u32,
    /// Turn of the axis at each step, degrees.
    pub turn_deg: f64,
    /// Stress, MPa.
    pub stress_mpa: f64,
    /// Share of the way to the expected axis that growth turns each frame; 0 is no effect.
    pub response: f64,
    /// Frames from a step until growth feels it.
    pub delay: u32,
    /// Kind of wander.
    pub kind: usize,
}

/// Sets the draws of growth apart from those of the case.
const GROWTH_SEED: u64 = 0x5eed;
/// Seconds between simulated frames.
const FRAME_S: f64 = 10.0;

/// A step comes this share of a frame before the frame that first shows it.
const STEP_BEFORE_FRAME: f64 = 0.3;

impl TurnCase {
    /// A case drawn from broad ranges: 2–8 filaments, 40–100 frames, 1–3 steps of 60–90°, 100–200 MPa.
    #[must_use]
    pub fn draw(seed: u64, run: u64, response: f64) -> Self {
        let mut rng = stream(seed, run);
        Self {
            filaments: rng.random_range(2..=8),
            frames: rng.random_range(40..=100),
            steps: rng.random_range(1..=3),
            turn_deg: rng.random_range(60.0..90.0),
            stress_mpa: rng.random_range(100.0..200.0),
            response,
            delay: rng.random_range(0..=4),
            kind: rng.random_range(0..4),
        }
    }

    /// Frames from the first response until half of the turn is made.
    fn half_turn(&self) -> f64 {
        if self.response >= 0.5 { 0.0 } else { libm::log(0.5) / libm::log(1.0 - self.response) - 1.0 }
    }

    /// Frame of step `i`.
    fn step_frame(&self, i: u32) -> u32 {
        self.frames * (i + 1) / (self.steps + 1)
    }

    fn load(&self, first_axis: f64) -> Vec<LoadSample> {
        (0..=self.steps)
            .map(|i| LoadSample {
                time_s: if i == 0 { -1e4 } else { FRAME_S * (f64::from(self.step_frame(i - 1)) - STEP_BEFORE_FRAME) },
                axis_deg: Some(first_axis + self.turn_deg * f64::from(i)),
                stress_mpa: Some(self.stress_mpa),
            })
            .collect()
    }

    /// The run's growth pieces and load.
    #[must_use]
    pub fn simulate(&self, seed: u64, run: u64) -> (Vec<GrowthPiece>, Vec<LoadSample>) {
        let mut rng = stream(seed ^ GROWTH_SEED, run);
        let home = rng.random_range(0.0..180.0);
        let first_axis = if self.response > 0.0 { home } else { rng.random_range(0.0..180.0) };
        let load = self.load(first_axis);
        let mut pieces = Vec::new();
        for filament in 0..self.filaments {
            let wander = Wander::draw(self.kind, home, &mut rng);
            let starts = rng.random_range(0..self.frames / 4);
            let (mut direction, mut position) = (wander.start, 0.0);
            for frame in starts..self.frames {
                let passed = (0..self.steps).filter(|i| self.step_frame(*i) + self.delay <= frame).count();
                let axis = load[passed].axis_deg.unwrap_or(home);
                direction += wander.curve + wander.drift * normal(&mut rng);
                direction += wander.pull * turn_between(direction, wander.home);
                direction += self.response * turn_between(direction, axis);
                if rng.random::<f64>() < 0.15 {
                    continue;
                }
                let weight = rng.random_range(2.0..6.0);
                position += weight;
                let angle_deg = direction + wander.scatter * normal(&mut rng);
                pieces.push(GrowthPiece { time_s: f64::from(frame) * FRAME_S, filament, position, angle_deg, weight });
            }
        }
        (pieces, load)
    }

    fn judged(&self, seed: u64, run: u64) -> Turns {
        let (pieces, load) = self.simulate(seed, run);
        turns(&pieces, &load, TurnSettings::default())
    }
}

/// Rates of the turn finder.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct TurnRates {
    /// Runs.
    pub runs: usize,
    /// Runs whose overall test had p ≤ 0.05.
    pub rejected: usize,
    /// Runs without enough growth for the test.
    pub untested: usize,
    /// Runs in which some step was reported as turned.
    pub reported: usize,
    /// Steps, and of them those reported as turned, and those timed within two frames of the truth.
    pub steps: usize,
    /// Steps reported as turned.
    pub found: usize,
    /// Of the found, timed within two frames.
    pub timed: usize,
    /// Of the found, truth within the interval.
    pub covered: usize,
}

/// Simulates `runs` runs drawn by [`TurnCase::draw`] and counts.
#[must_use]
pub fn turn_rates(runs: u64, seed: u64, response: f64) -> TurnRates {
    let mut rates =
        TurnRates { runs: 0, rejected: 0, untested: 0, reported: 0, steps: 0, found: 0, timed: 0, covered: 0 };
    for run in 0..runs {
        let case = TurnCase::draw(seed, run, response);
        let seen = case.judged(seed, run);
        rates.runs += 1;
        rates.untested += usize::from(seen.overall.is_none());
        rates.rejected += usize::from(seen.overall.is_some_and(|o| o.p <= 0.05));
        rates.reported += usize::from(seen.steps.iter().any(|s| s.verdict == Verdict::Turned));
        rates.steps += case.steps as usize;
        for turned in seen.steps.iter().filter_map(|s| s.turned_at) {
            let truth = (0..case.steps)
                .map(|i| (f64::from(case.step_frame(i)), f64::from(case.delay)))
                .map(|(step, delay)| FRAME_S * (step + delay - 0.5 + case.half_turn()).max(step - STEP_BEFORE_FRAME))
                .min_by(|a, b| (a - turned.time_s).abs().total_cmp(&(b - turned.time_s).abs()));
            rates.found += 1;
            rates.timed += usize::from(truth.is_some_and(|t| (t - turned.time_s).abs() <= 2.0 * FRAME_S));
            rates.covered += usize::from(truth.is_some_and(|t| turned.ci95[0] <= t && t <= turned.ci95[1]));
        }
    }
    rates
}

/// Pieces of `filaments` filaments whose axes are drawn by `axis`, correlated strongly within each.
fn correlated(filaments: u32, rng: &mut ChaCha8Rng, axis: impl Fn(&mut ChaCha8Rng) -> f64) -> Vec<AxialPiece> {
    let mut pieces = Vec::new();
    for filament in 0..filaments {
        let main = axis(rng);
        let mut off = 12.0 * normal(rng);
        for _ in 0..rng.random_range(5..60) {
            off = 0.9 * off + 5.2 * normal(rng);
            let weight = rng.random_range(1.0..5.0);
            pieces.push(AxialPiece {
                filament,
                angle_deg: main + off,
                weight,
                load_axis_deg: Some(30.0),
                stress_mpa: Some(120.0),
            });
        }
    }
    pieces
}

/// p of Kolmogorov and Smirnov that Rayleigh and V p-values of `runs` isotropic runs (5–20 filaments) are uniform.
#[must_use]
pub fn isotropic_p_values(runs: usize, seed: u64) -> [Option<f64>; 2] {
    let both = replicates(runs, seed, |rng| {
        let filaments = rng.random_range(5..=20);
        let pieces = correlated(filaments, rng, |r| r.random_range(0.0..180.0));
        let turns = TurnDraws { draws: 1_999, seed: rng.random() };
        let summary = summarise(&pieces, turns)?;
        Some((summary.rayleigh_p?, summary.v_p?))
    });
    let (rayleigh, v): (Vec<f64>, Vec<f64>) = both.into_iter().unzip();
    [rayleigh, v].map(|p| uniform_ks(&p).map(|(_, p)| p))
}

/// Of `runs` runs of 8–20 filaments whose axes scatter by `spread_deg` about the load, how many alignment intervals hold the
/// law's alignment, exp(−2σ²) for a normal law of axes (σ in radians, all scatter together).
#[must_use]
pub fn alignment_coverage(runs: usize, seed: u64, spread_deg: f64) -> usize {
    // Scatter within a filament: start 12°, then 0.9·off + 5.2·normal, whose standing standard deviation is 11.93°.
    let within = 11.93;
    let sigma = libm::hypot(spread_deg, within) * RADIANS;
    let truth = libm::exp(-2.0 * sigma * sigma);
    let held = replicates(runs, seed, |rng| {
        let filaments = rng.random_range(8..=20);
        let pieces = correlated(filaments, rng, |r| 30.0 + spread_deg * normal(r));
        let [low, high] = summarise(&pieces, TurnDraws { draws: 1, seed: 0 })?.alignment?.ci95?;
        Some(low <= truth && truth <= high)
    });
    held.into_iter().filter(|h| *h).count()
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The worst case for a test within a run: filaments still bend home when the load turns, just there.
    #[test]
    fn homing_growth_is_not_taken_for_an_effect() {
        let (runs, mut rejected) = (150, 0);
        for run in 0..runs {
            let case = TurnCase { kind: 0, steps: 1, ..TurnCase::draw(9, run, 0.0) };
            let (pieces, _) = case.simulate(9, run);
            let home = stream(9 ^ GROWTH_SEED, run).random_range(0.0..180.0);
            let at = |time_s, axis| LoadSample { time_s, axis_deg: Some(axis), stress_mpa: Some(150.0) };
            let step_s = 0.2 * f64::from(case.frames) * FRAME_S;
            let seen = turns(&pieces, &[at(-1e4, home + 75.0), at(step_s, home)], TurnSettings::default());
            rejected += u64::from(seen.overall.is_some_and(|o| o.p <= 0.05));
        }
        assert!(rejected * 100 <= 8 * runs, "{rejected} of {runs}");
    }

    #[test]
    fn the_same_seed_draws_the_same_run() {
        let case = TurnCase::draw(4, 2, 0.6);
        assert_eq!(case, TurnCase::draw(4, 2, 0.6));
        let (a, b) = (case.simulate(4, 2), case.simulate(4, 2));
        assert_eq!(a, b);
        assert_ne!(a.0, case.simulate(4, 3).0);
    }

    #[test]
    fn a_prompt_turn_is_seen_in_most_runs_and_none_where_there_is_none() {
        let with = turn_rates(30, 21, 0.6);
        assert!(with.reported >= 24, "{with:?}");
        let without = turn_rates(30, 22, 0.0);
        assert!(without.reported <= 1, "{without:?}");
    }
}
