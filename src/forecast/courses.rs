//! The laws of the drawn growth histories: how the pace goes on, and what one filament makes of it.
//! Method: a pace a step from a closed form or a random course, times a wandering factor, with pauses; depth gains gamma steps.
//! Source of the gamma steps: van Noortwijk (2009), Reliab. Eng. Syst. Safety 94, 2–21; of the wandering: Uhlenbeck & Ornstein (1930).
//! Limits: all ranges are invented (common practice); only `Power` is of the forecast's own family.

use rand::RngExt;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, Exp1, Gamma, StandardNormal};

/// How the pace goes on with time.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Law {
    /// Constant mean pace whose log wanders and returns (Ornstein–Uhlenbeck).
    Steady,
    /// Depth as a power of time, slowing or speeding up: the forecast's own family.
    Power,
    /// Square root of time (diffusion), with random pauses.
    Diffusion,
    /// Exponential growth or decay of the pace; a decaying one runs into a limit just beyond the gap.
    Exponential,
    /// An S-shaped course (logistic), slow at both ends.
    Logistic,
    /// Constant stretches with jumps of the pace between them.
    Jumps,
    /// Growth and standstill in turn.
    StopAndGo,
    /// Steady, until the leading filament turns by 40° and gains less depth for the same length.
    Deflected,
    /// Any course, ended by a lasting standstill or a turn along the plates.
    Stalled,
    /// Second family: a power of time between one half and two.
    TimePower,
    /// Second family: Weibull's course towards a plateau beyond the gap.
    Weibull,
    /// Second family: logistic in time.
    Sigmoid,
    /// Second family: stretches of constant rate.
    Stretches,
    /// Second family: the log of the rate wanders and returns (Ornstein–Uhlenbeck).
    LogRate,
    /// Second family: gamma increments.
    GammaSteps,
}

/// The first family, in the order in which fleets draw it.
pub const LAWS: [Law; 9] = [
    Law::Steady,
    Law::Power,
    Law::Diffusion,
    Law::Exponential,
    Law::Logistic,
    Law::Jumps,
    Law::StopAndGo,
    Law::Deflected,
    Law::Stalled,
];

/// The second family (`strangers`): growth that shares nothing with the first.
pub const STRANGERS: [Law; 6] =
    [Law::TimePower, Law::Weibull, Law::Sigmoid, Law::Stretches, Law::LogRate, Law::GammaSteps];

/// Steps of the simulation a frame.
pub(crate) const FINE: usize = 6;

/// The common pace a step (the gap is crossed when it sums to 1), and what becomes of the leading filament.
pub(crate) struct Course {
    pace: Vec<f64>,
    /// Step from which the leader gains only this share of depth.
    turn: Option<(usize, f64)>,
    /// Step from which nothing grows (or creeps, by the second entry).
    pub(crate) ends: Option<usize>,
    creep: f64,
}

impl Course {
    pub(crate) fn draw(law: Law, nominal: f64, steps: usize, roughness: f64, rng: &mut ChaCha8Rng) -> Self {
        if law == Law::Stalled {
            let base = LAWS[rng.random_range(0..LAWS.len() - 1)];
            let mut course = Self::draw(base, nominal, steps, roughness, rng);
            let stop_at = rng.random_range(0.35..0.85);
            course.ends = sums(&course.pace).iter().position(|&depth| depth >= stop_at);
            course.creep = if rng.random::<f64>() < 0.5 { 0.0 } else { rng.random_range(0.0..0.05) };
            course.turn = None;
            return course;
        }
        let length = nominal * FINE as f64;
        let at = |k: usize| (k as f64 + 0.5) / length;
        let mut pace: Vec<f64> = match law {
            Law::Power => {
                let b = libm::exp(rng.random_range(-0.8..0.8));
                (0..steps).map(|k| b * libm::pow(at(k), b - 1.0)).collect()
            }
            Law::Diffusion => (0..steps).map(|k| 0.5 / at(k).sqrt()).collect(),
            Law::Exponential => {
                let strength: f64 = rng.random_range(0.3..1.0);
                let k0 = if rng.random::<f64>() < 0.4 { -1.6 * strength } else { 2.0 * strength };
                (0..steps).map(|k| k0 * libm::exp(k0 * at(k).min(4.0)) / (libm::exp(k0) - 1.0)).collect()
            }
            Law::Logistic => logistic(steps, &at, rng),
            Law::Jumps => jumps(steps, length, rng),
            _ => vec![1.0; steps],
        };
        let wander = if law == Law::Steady { rng.random_range(0.1..0.35) } else { rng.random_range(0.0..0.2) };
        wander_about(&mut pace, roughness * wander, length * rng.random_range(0.03..0.2), rng);
        let (go, stop) = match law {
            Law::StopAndGo => (rng.random_range(0.05..0.2), rng.random_range(0.03..0.12)),
            Law::Diffusion => (rng.random_range(0.1..0.4), rng.random_range(0.01..0.05)),
            _ => (f64::INFINITY, 0.0),
        };
        pause(&mut pace, go * length, stop * length, rng);
        for step in &mut pace {
            *step /= length;
        }
        let turn = (law == Law::Deflected).then(|| {
            let share = rng.random_range(0.2..0.8);
            let step = sums(&pace).iter().position(|&depth| depth >= share).unwrap_or(steps);
            (step, libm::cos(40.0_f64.to_radians()))
        });
        Self { pace, turn, ends: None, creep: 1.0 }
    }

    /// True depth of one filament after every step, µm, from step 0 on.
    pub(crate) fn grow(&self, start: usize, scale: f64, grain: f64, leader: bool, rng: &mut ChaCha8Rng) -> Vec<f64> {
        let mut depth = 0.0;
        let mut all = Vec::with_capacity(self.pace.len());
        for (k, &pace) in self.pace.iter().enumerate() {
            let ended = if self.ends.is_some_and(|end| k >= end) { self.creep } else { 1.0 };
            let turned = self.turn.filter(|turn| leader && k >= turn.0).map_or(1.0, |turn| turn.1);
            let mean = if k >= start { scale * pace * ended * turned } else { 0.0 };
            if mean > 0.0 {
                // gamma steps: mean as given, variance grain × mean
                let shape = (mean / grain).max(1e-12);
                depth += Gamma::new(shape, grain).map_or(mean, |law| law.sample(rng));
            }
            all.push(depth);
        }
        all
    }
}

fn logistic(steps: usize, at: &dyn Fn(usize) -> f64, rng: &mut ChaCha8Rng) -> Vec<f64> {
    let (plateau, steep, middle) =
        (rng.random_range(1.1..1.8), rng.random_range(3.0..7.0), rng.random_range(0.25..0.6));
    let rise = |x: f64| plateau / (1.0 + libm::exp(-steep * (x - middle)));
    (0..steps).map(|k| (rise(at(k) + 0.001) - rise(at(k))) / 0.001).collect()
}

fn jumps(steps: usize, length: f64, rng: &mut ChaCha8Rng) -> Vec<f64> {
    let mut pace = Vec::with_capacity(steps);
    let (mean, spread) = (rng.random_range(0.2..0.6), rng.random_range(0.2..0.6));
    while pace.len() < steps {
        let hold = ((mean * length * exponential(rng)) as usize).max(1);
        let level = libm::exp(spread * normal(rng));
        pace.extend(std::iter::repeat_n(level, hold.min(steps - pace.len())));
    }
    pace
}

/// Multiplies the pace by exp of a wandering, returning noise of the given SD and memory (steps).
fn wander_about(pace: &mut [f64], sd: f64, memory: f64, rng: &mut ChaCha8Rng) {
    let keep = libm::exp(-1.0 / memory.max(1.0));
    let mut state = sd * normal(rng);
    for step in pace {
        *step *= libm::exp(state - 0.5 * sd * sd);
        state = keep * state + sd * (1.0 - keep * keep).sqrt() * normal(rng);
    }
}

/// Inserts standstills: exponential stretches of growth and of standing, mean lengths in steps. Standing shifts the course.
fn pause(pace: &mut Vec<f64>, go: f64, stop: f64, rng: &mut ChaCha8Rng) {
    if !go.is_finite() {
        return;
    }
    let (total, mut from, mut all) = (pace.len(), 0, Vec::with_capacity(pace.len()));
    while all.len() < total {
        let grow = ((go * exponential(rng)) as usize).max(1).min(total - from);
        all.extend_from_slice(&pace[from..from + grow]);
        from += grow;
        all.extend(std::iter::repeat_n(0.0, (stop * exponential(rng)) as usize));
    }
    all.truncate(total);
    *pace = all;
}

fn sums(pace: &[f64]) -> Vec<f64> {
    let mut total = 0.0;
    pace.iter()
        .map(|step| {
            total += step;
            total
        })
        .collect()
}

pub(crate) fn normal(rng: &mut ChaCha8Rng) -> f64 {
    StandardNormal.sample(rng)
}

pub(crate) fn exponential(rng: &mut ChaCha8Rng) -> f64 {
    Exp1.sample(rng)
}
