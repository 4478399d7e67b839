//! Growth histories drawn without frames, to measure the forecast over many runs.
//! Method: a common pace by one of [`LAWS`], several filaments with their own onset, pace and gamma noise, depths read at frames
//! with measurement noise and never falling. Most laws share nothing with the forecast's own clock. All is invented; the ranges
//! are common practice. Source of the gamma noise: van Noortwijk (2009), Reliab. Eng. Syst. Safety 94, 2–21.
//! Limits: filaments do not touch each other; a turn shows only in the depth it costs.

use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, Exp1, Gamma, StandardNormal};

use super::{Record, TipSeries};

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
}

/// Every law, in the order in which fleets draw them.
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

/// Leading frames before any growth.
const BARE: usize = 6;
/// Steps of the simulation a frame.
const FINE: usize = 6;

/// One drawn run.
#[derive(Debug, Clone)]
pub struct History {
    /// Its law.
    pub law: Law,
    /// Frame times, s.
    pub times_s: Vec<f64>,
    /// Measured depths of each filament, as long as the run was watched.
    pub tips: Vec<TipSeries>,
    /// Distance of the edges, µm.
    pub gap_um: f64,
    /// Time of true first contact, s; `None` if growth ended before, or it never came while simulated
    /// (five times the watched time).
    pub contact_s: Option<f64>,
    /// Time at which growth ended for good, s.
    pub stalled_s: Option<f64>,
}

impl History {
    /// The record at frame `frame` when depths are decided `lag` frames late. `None` before two frames are decided and
    /// after the last.
    pub fn record_at(&self, frame: usize, lag: usize) -> Option<Record> {
        let known = (frame + 1)
            .checked_sub(lag)
            .filter(|&n| n >= 2 && frame < self.times_s.len())?;
        let cut = |tip: &TipSeries| {
            let n = known.saturating_sub(tip.first);
            TipSeries {
                filament: tip.filament,
                first: tip.first,
                depth_um: tip.depth_um[..n].to_vec(),
                u_depth_um: tip.u_depth_um[..n].to_vec(),
                remaining_um: tip.remaining_um[..n].to_vec(),
            }
        };
        Some(Record {
            times_s: self.times_s[..known].to_vec(),
            tips: self
                .tips
                .iter()
                .filter(|tip| tip.first < known)
                .map(cut)
                .collect(),
            gap_um: self.gap_um,
            issued_at_s: self.times_s[frame],
            ..Record::default()
        })
    }

    /// Deepest measured depth at a frame, in parts of the gap.
    pub fn fraction_at(&self, frame: usize) -> f64 {
        let depths = self
            .tips
            .iter()
            .filter(|tip| tip.first <= frame)
            .map(|tip| tip.depth_um[frame - tip.first]);
        depths.fold(0.0, f64::max) / self.gap_um
    }
}

/// What the histories of a fleet have in common.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Fleet {
    /// Frames a run is watched at most.
    pub frames: usize,
    /// Growth noise in parts of the usual one: 0 none, 1 usual.
    pub roughness: f64,
    /// Seed; history i takes stream i.
    pub seed: u64,
}

/// Draws history `index` of a fleet, watched until contact or for `fleet.frames` frames.
///
/// # Examples
/// ```
/// use veerlog::forecast::histories::{draw, Fleet, Law};
/// let fleet = Fleet { frames: 40, roughness: 1.0, seed: 7 };
/// let run = draw(Law::Deflected, &fleet, 3);
/// assert!(run.times_s.len() <= 40 && !run.tips.is_empty());
/// assert_eq!(run.times_s, draw(Law::Deflected, &fleet, 3).times_s);
/// ```
pub fn draw(law: Law, fleet: &Fleet, index: u64) -> History {
    let Fleet {
        frames,
        roughness,
        seed,
    } = *fleet;
    let mut rng = ChaCha8Rng::seed_from_u64(seed);
    rng.set_stream(index);
    let interval = 10.0 * libm::exp(1.5 * normal(&mut rng));
    let gap_um = rng.random_range(250.0..1500.0);
    let steps = 5 * frames * FINE;
    // the course crosses the gap, at pace 1, after this many frames of growth
    let nominal = (frames - BARE) as f64 * rng.random_range(0.6..1.0);
    let course = Course::draw(law, nominal, steps, roughness, &mut rng);
    let count = 1 + (4.0 * rng.random::<f64>() * rng.random::<f64>()) as usize;
    let blur = gap_um * rng.random_range(0.001..0.008);
    let grain =
        gap_um * 0.0005 * (roughness * roughness).max(1e-6) * libm::exp(rng.random_range(0.0..3.4));
    let spread = rng.random_range(0.1..0.4);
    let mut truths: Vec<Vec<f64>> = Vec::new();
    for number in 0..count {
        let late = if number == 0 {
            0.0
        } else {
            0.25 * nominal * exponential(&mut rng)
        };
        let pace = if number == 0 {
            1.0
        } else {
            libm::exp(-0.2 + spread * normal(&mut rng))
        };
        let start = (late * FINE as f64) as usize;
        truths.push(course.grow(start, pace * gap_um, grain, number == 0, &mut rng));
    }
    let bare = BARE as f64 + rng.random::<f64>();
    let offset = (bare * FINE as f64) as usize;
    let contact = truths
        .iter()
        .filter_map(|depth| crossing(depth, gap_um))
        .fold(f64::INFINITY, f64::min);
    let time = |step: f64| interval * (step + offset as f64) / FINE as f64;
    // a contact by creep after the end of growth is not one that anybody waits for
    let contact_s = (contact.is_finite() && course.ends.is_none_or(|end| contact < end as f64))
        .then(|| time(contact));
    let watched = (0..frames)
        .take_while(|&k| contact_s.is_none_or(|t| (k as f64) * interval < t))
        .count();
    let tips = truths
        .iter()
        .enumerate()
        .filter_map(|(k, depth)| seen(k, depth, offset, watched, gap_um, blur, &mut rng));
    History {
        law,
        times_s: (0..watched).map(|k| k as f64 * interval).collect(),
        tips: tips.collect(),
        gap_um,
        contact_s,
        stalled_s: course.ends.map(|step| time(step as f64)),
    }
}

/// The common pace a step (the gap is crossed when it sums to 1), and what becomes of the leading filament.
struct Course {
    pace: Vec<f64>,
    /// Step from which the leader gains only this share of depth.
    turn: Option<(usize, f64)>,
    /// Step from which nothing grows (or creeps, by the second entry).
    ends: Option<usize>,
    creep: f64,
}

impl Course {
    fn draw(law: Law, nominal: f64, steps: usize, roughness: f64, rng: &mut ChaCha8Rng) -> Self {
        if law == Law::Stalled {
            let base = LAWS[rng.random_range(0..LAWS.len() - 1)];
            let mut course = Self::draw(base, nominal, steps, roughness, rng);
            let stop_at = rng.random_range(0.35..0.85);
            course.ends = sums(&course.pace)
                .iter()
                .position(|&depth| depth >= stop_at);
            course.creep = if rng.random::<f64>() < 0.5 {
                0.0
            } else {
                rng.random_range(0.0..0.05)
            };
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
                let k0 = if rng.random::<f64>() < 0.4 {
                    -1.6 * strength
                } else {
                    2.0 * strength
                };
                (0..steps)
                    .map(|k| k0 * libm::exp(k0 * at(k).min(4.0)) / (libm::exp(k0) - 1.0))
                    .collect()
            }
            Law::Logistic => logistic(steps, &at, rng),
            Law::Jumps => jumps(steps, length, rng),
            _ => vec![1.0; steps],
        };
        let wander = if law == Law::Steady {
            rng.random_range(0.1..0.35)
        } else {
            rng.random_range(0.0..0.2)
        };
        wander_about(
            &mut pace,
            roughness * wander,
            length * rng.random_range(0.03..0.2),
            rng,
        );
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
            let step = sums(&pace)
                .iter()
                .position(|&depth| depth >= share)
                .unwrap_or(steps);
            (step, libm::cos(40.0_f64.to_radians()))
        });
        Self {
            pace,
            turn,
            ends: None,
            creep: 1.0,
        }
    }

    /// True depth of one filament after every step, µm, from step 0 on.
    fn grow(
        &self,
        start: usize,
        scale: f64,
        grain: f64,
        leader: bool,
        rng: &mut ChaCha8Rng,
    ) -> Vec<f64> {
        let mut depth = 0.0;
        let mut all = Vec::with_capacity(self.pace.len());
        for (k, &pace) in self.pace.iter().enumerate() {
            let ended = if self.ends.is_some_and(|end| k >= end) {
                self.creep
            } else {
                1.0
            };
            let turned = self
                .turn
                .filter(|turn| leader && k >= turn.0)
                .map_or(1.0, |turn| turn.1);
            let mean = if k >= start {
                scale * pace * ended * turned
            } else {
                0.0
            };
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
    let (plateau, steep, middle) = (
        rng.random_range(1.1..1.8),
        rng.random_range(3.0..7.0),
        rng.random_range(0.25..0.6),
    );
    let rise = |x: f64| plateau / (1.0 + libm::exp(-steep * (x - middle)));
    (0..steps)
        .map(|k| (rise(at(k) + 0.001) - rise(at(k))) / 0.001)
        .collect()
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

/// Step (with its fraction) at which the depth first reaches the gap.
fn crossing(depth: &[f64], gap: f64) -> Option<f64> {
    let at = depth.iter().position(|&d| d >= gap)?;
    let before = if at > 0 { depth[at - 1] } else { 0.0 };
    Some(at as f64 - 1.0 + (gap - before) / (depth[at] - before))
}

/// The measured series of one filament: noise, never falling, from the first frame at which it stands out.
fn seen(
    number: usize,
    truth: &[f64],
    offset: usize,
    watched: usize,
    gap: f64,
    blur: f64,
    rng: &mut ChaCha8Rng,
) -> Option<TipSeries> {
    let mut tip = TipSeries {
        filament: number as u32 + 1,
        ..TipSeries::default()
    };
    let mut deepest = 0.0_f64;
    for frame in 0..watched {
        let depth = (frame * FINE)
            .checked_sub(offset)
            .and_then(|step| truth.get(step))
            .copied()
            .unwrap_or(0.0);
        if depth <= 0.0 {
            continue;
        }
        deepest = deepest.max(depth + blur * normal(rng)).min(0.999 * gap);
        if tip.depth_um.is_empty() {
            if deepest < 3.0 * blur {
                continue;
            }
            tip.first = frame;
        }
        tip.depth_um.push(deepest);
        tip.u_depth_um.push(blur);
        tip.remaining_um.push(gap - deepest);
    }
    (!tip.depth_um.is_empty()).then_some(tip)
}

fn normal(rng: &mut ChaCha8Rng) -> f64 {
    StandardNormal.sample(rng)
}

fn exponential(rng: &mut ChaCha8Rng) -> f64 {
    Exp1.sample(rng)
}
