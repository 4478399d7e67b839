//! A second family of growth histories, which shares nothing with the first but the reading of depths at frames.
//! Method: each filament follows a closed form or a random course of its own, with its own noise; only the time at which the
//! leader would cross the gap is drawn for all. Forms: powers of time, Weibull (1951, J. Appl. Mech. 18, 293–297), logistic
//! (Verhulst 1838), stretches of constant rate, an Ornstein–Uhlenbeck log rate (1930), gamma increments (van Noortwijk 2009).
//! Limits: all ranges are invented (common practice). It exists to judge the forecast, never to tune one of its constants to.

use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, Gamma};

use super::courses::{FINE, Law, exponential, normal};
use super::histories::{Fleet, History, crossing, seen};

/// Draws history `index`, watched until contact or for `fleet.frames` frames.
pub(crate) fn draw(law: Law, fleet: &Fleet, index: u64) -> History {
    let mut rng = ChaCha8Rng::seed_from_u64(fleet.seed ^ 0x5eed);
    rng.set_stream(index);
    let interval = libm::pow(10.0, rng.random_range(0.0..2.5));
    let gap_um = rng.random_range(100.0..1000.0);
    let bare = rng.random_range(3.0..8.0);
    let nominal = (fleet.frames as f64 - bare) * rng.random_range(0.5..1.0);
    let steps = 5 * fleet.frames * FINE;
    let blur = gap_um * libm::exp(rng.random_range(-6.2..-4.8));
    let count = rng.random_range(1..4);
    let form = Form::draw(law, &mut rng);
    let mut truths = Vec::new();
    for number in 0..count {
        let share = if number == 0 { 1.0 } else { rng.random_range(0.5..0.98) };
        let late = if number == 0 { 0.0 } else { rng.random_range(0.0..0.3) };
        let length = nominal * FINE as f64;
        truths.push(form.grow(share * gap_um, late * length, length, steps, fleet.roughness, &mut rng));
    }
    let offset = (bare * FINE as f64) as usize;
    let contact = truths.iter().filter_map(|depth| crossing(depth, gap_um)).fold(f64::INFINITY, f64::min);
    let contact_s = contact.is_finite().then(|| interval * (contact + offset as f64) / FINE as f64);
    let watched = (0..fleet.frames).take_while(|&k| contact_s.is_none_or(|t| (k as f64) * interval < t)).count();
    let tips =
        truths.iter().enumerate().filter_map(|(k, depth)| seen(k, depth, offset, watched, gap_um, blur, &mut rng));
    History {
        law,
        tips: tips.collect(),
        times_s: (0..watched).map(|k| k as f64 * interval).collect(),
        gap_um,
        contact_s,
        stalled_s: None,
    }
}

/// The course of depth against time, both in parts of the crossing of the gap.
enum Form {
    /// Depth by time, 0 at 0 and 1 at 1.
    Closed(Box<dyn Fn(f64) -> f64>),
    /// Rates from the given times on.
    Stretches(Vec<(f64, f64)>),
    /// SD and memory of the log rate.
    LogRate(f64, f64),
    /// Mean jump.
    Jumps(f64),
}

impl Form {
    fn draw(law: Law, rng: &mut ChaCha8Rng) -> Self {
        match law {
            Law::Weibull => {
                let (plateau, shape) = (rng.random_range(1.1..2.0), rng.random_range(0.7..2.5));
                let full = -libm::log(1.0 - 1.0 / plateau);
                Self::Closed(Box::new(move |t| plateau * (1.0 - libm::exp(-full * libm::pow(t, shape)))))
            }
            Law::Sigmoid => {
                let (plateau, start): (f64, f64) = (rng.random_range(1.1..2.0), rng.random_range(0.01..0.2));
                // starts at this share of the plateau's height and has crossed the gap at time 1
                let logit = |share: f64| libm::log(share / (1.0 - share));
                let whole = (1.0 - start) / plateau;
                let (low, steep) = (logit(start), logit(start + whole) - logit(start));
                Self::Closed(Box::new(move |t| (1.0 / (1.0 + libm::exp(-low - steep * t)) - start) / whole))
            }
            Law::Stretches => {
                let mut from = 0.0;
                let mut all = Vec::new();
                while from < 4.0 {
                    all.push((from, libm::exp(0.45 * normal(rng))));
                    from += 0.15 + 0.4 * exponential(rng);
                }
                Self::Stretches(all)
            }
            Law::LogRate => Self::LogRate(rng.random_range(0.15..0.5), rng.random_range(0.05..0.5)),
            Law::GammaSteps => Self::Jumps(rng.random_range(0.003..0.03)),
            _ => {
                let power = libm::exp(rng.random_range(-0.7..0.7));
                Self::Closed(Box::new(move |t| libm::pow(t, power)))
            }
        }
    }

    /// Depth after every step, µm: `size` crossed after `length` steps from step `late` on.
    fn grow(&self, size: f64, late: f64, length: f64, steps: usize, roughness: f64, rng: &mut ChaCha8Rng) -> Vec<f64> {
        let (mut depth, mut all) = (0.0, Vec::with_capacity(steps));
        let (sd, memory) = match self {
            Self::LogRate(sd, memory) => (roughness * sd, memory * length),
            _ => (0.15 * roughness, 0.1 * length),
        };
        let keep = libm::exp(-1.0 / memory);
        let mut wander = sd * normal(rng);
        for k in 0..steps {
            let (from, to) = ((k as f64 - late) / length, (k as f64 + 1.0 - late) / length);
            let gain = match self {
                Self::Closed(course) => course(to.max(0.0)) - course(from.max(0.0)),
                Self::Stretches(all) => {
                    let next = all.partition_point(|stretch| stretch.0 <= from).max(1);
                    all[next - 1].1 / length
                }
                Self::LogRate(..) => 1.0 / length,
                // gamma increments: mean as given, variance jump × mean
                Self::Jumps(jump) => {
                    let jump = jump * roughness.max(0.1);
                    Gamma::new(1.0 / (length * jump), jump).map_or(1.0 / length, |law| law.sample(rng))
                }
            };
            wander = keep * wander + sd * (1.0 - keep * keep).sqrt() * normal(rng);
            if to > 0.0 {
                depth += size * gain * libm::exp(wander - 0.5 * sd * sd);
            }
            all.push(depth);
        }
        all
    }
}
