//! First contact of any filament with the far edge: the law of its time, mixed over all hypotheses.
//! Method: a track never falls, so contact by t is depth(t) ≥ gap. Progress over growth, the effective rate, is log-normal with
//! the mean and variance of the growth process, which keeps it positive; a share of runs changes rate for good (wider part).
//! Filaments are combined half as independent, half as moved by one common cause. Quantiles are conditional on contact.
//! Limits: the law is held on a grid of times and interpolated.

use super::first_passage::normal_cdf;
use super::growth::{Fits, Outlook};
use super::{LEVELS, Record};

/// Times at which the law is held.
const TIMES: usize = 60;
/// First and last of them, in parts of the plain expectation of the time left; evenly spaced in the log.
const NEAREST: f64 = 4e-3;
/// See [`NEAREST`].
const FARTHEST: f64 = 4e2;
/// Chance that the rest of the way is run at a lastingly different rate (turn, new branch, fault).
const CHANGE_SHARE: f64 = 0.10;
/// SD of the log of that rate against the old one: a factor of 1.8 either way.
const CHANGE_SD: f64 = 0.6;
/// Relative SD of the rate that no record can exclude.
const LEAST_SPREAD: f64 = 0.03;
/// Standard deviations beyond which arrival is certain, or out of the question.
const CERTAIN: f64 = 6.0;
/// Least rate a standing filament is given, in parts of the one that would just arrive; only keeps the logarithm finite.
const LEAST_RATE: f64 = 0.05;

/// The law of the contact time of one record.
pub(crate) struct Contact {
    issued: f64,
    /// Times after the record's end, and the chance of contact by each had no filament stalled.
    times: Vec<f64>,
    /// Chance by each time with stalls.
    chance: Vec<f64>,
    growing: f64,
}

impl Contact {
    /// `growing[i]`: chance that filament `fits.tips[i]` still grows.
    pub(crate) fn new(record: &Record, fits: &Fits, growing: &[f64]) -> Self {
        let end = record.times_s[record.times_s.len() - 1];
        let wait = plain_wait(record, fits).max(1e-9 * (1.0 + end.abs()));
        let step = libm::log(FARTHEST / NEAREST) / (TIMES - 1) as f64;
        let times: Vec<f64> = (0..TIMES).map(|k| end + wait * NEAREST * libm::exp(step * k as f64)).collect();
        let mut order: Vec<usize> = (0..growing.len()).collect();
        order.sort_by(|&a, &b| growing[b].total_cmp(&growing[a]).then(a.cmp(&b)));
        let mut chance = vec![0.0; TIMES];
        for hypothesis in &fits.hypotheses {
            let drive = &fits.drives[hypothesis.clock.drive];
            for (total, &time) in chance.iter_mut().zip(&times) {
                let ahead = hypothesis.clock.progress(drive.at(time)) - 1.0;
                *total += hypothesis.weight * by_any(&hypothesis.outlooks, &order, growing, ahead);
            }
        }
        for k in 1..TIMES {
            chance[k] = chance[k].max(chance[k - 1]);
        }
        let growing = order.first().map_or(0.0, |&tip| growing[tip]);
        Self { issued: record.issued_at_s, times, chance, growing }
    }

    /// Chance that some filament still grows.
    pub(crate) fn growing(&self) -> f64 {
        self.growing
    }

    fn by(&self, time: f64) -> f64 {
        let next = self.times.partition_point(|&t| t <= time);
        match next {
            0 => 0.0,
            n if n == TIMES => self.chance[TIMES - 1],
            n => {
                let part = (time - self.times[n - 1]) / (self.times[n] - self.times[n - 1]);
                self.chance[n - 1] + part * (self.chance[n] - self.chance[n - 1])
            }
        }
    }

    /// Chance of contact by `time`, given none by the time of issue.
    pub(crate) fn chance_by(&self, time: f64) -> f64 {
        let past = self.by(self.issued);
        ((self.by(time) - past) / (1.0 - past).max(1e-9)).clamp(0.0, 1.0)
    }

    /// Chance a second, just after issue, read over a twentieth of the median wait.
    pub(crate) fn hazard_now(&self) -> f64 {
        let window = self.quantiles().map_or(0.0, |q| 0.05 * (q[3] - self.issued));
        if window > 0.0 { self.chance_by(self.issued + window) / window } else { 0.0 }
    }

    /// Times at [`LEVELS`], given that contact comes, none by the time of issue.
    pub(crate) fn quantiles(&self) -> Option<[f64; 7]> {
        let past = self.by(self.issued);
        let left = self.chance[TIMES - 1] - past;
        (left > 0.0).then(|| LEVELS.map(|level| self.time_at(past + level * left).max(self.issued)))
    }

    fn time_at(&self, chance: f64) -> f64 {
        let next = self.chance.partition_point(|&c| c < chance).clamp(1, TIMES - 1);
        let (low, high) = (self.chance[next - 1], self.chance[next]);
        let part = if high > low { ((chance - low) / (high - low)).clamp(0.0, 1.0) } else { 1.0 };
        self.times[next - 1] + part * (self.times[next] - self.times[next - 1])
    }
}

/// Time left at the mean pace of the filament that is first by it.
fn plain_wait(record: &Record, fits: &Fits) -> f64 {
    let end = record.times_s[record.times_s.len() - 1];
    let waits = fits.tips.iter().map(|&tip| {
        let tip = &record.tips[tip];
        let last = tip.depth_um.len() - 1;
        let from = record.times_s[tip.first.saturating_sub(1)];
        (end - from) * tip.remaining_um[last] / tip.depth_um[last].max(f64::MIN_POSITIVE)
    });
    waits.fold(f64::INFINITY, f64::min)
}

/// Chance that any filament has arrived. Stalls have a common cause: the likeliest to grow goes on alone first.
fn by_any(outlooks: &[Outlook], order: &[usize], growing: &[f64], ahead: f64) -> f64 {
    let (mut total, mut none, mut most) = (0.0, 1.0, 0.0_f64);
    for (rank, &tip) in order.iter().enumerate() {
        let arrived = outlooks[tip].arrived(ahead);
        none *= 1.0 - arrived;
        most = most.max(arrived);
        let share = growing[tip] - order.get(rank + 1).map_or(0.0, |&next| growing[next]);
        total += share * 0.5 * (most + 1.0 - none);
    }
    total
}

impl Outlook {
    /// Variance of the depth after `ahead` units of progress, µm².
    pub(crate) fn variance(&self, ahead: f64) -> f64 {
        let end = 1.0 + ahead;
        // ∫ (end − u)²/u du from 1 to end: how a wandering rate adds up to depth
        let lever = (end * end * libm::log(end) - 2.0 * end * ahead + 0.5 * (end * end - 1.0)).max(0.0);
        let known = self.depth_variance + 2.0 * ahead * self.covariance + ahead * ahead * self.rate_variance;
        (known + self.grain * ahead + self.wander * lever).max(0.0)
    }

    /// Chance of arrival within `ahead` units of progress.
    fn arrived(&self, ahead: f64) -> f64 {
        if ahead <= 0.0 {
            return 0.0;
        }
        let rate = self.rate.max(LEAST_RATE * self.remaining / (ahead + 1.0)).max(f64::MIN_POSITIVE);
        let travelled = rate * ahead;
        let spread = libm::log(1.0 + self.variance(ahead) / (travelled * travelled) + LEAST_SPREAD * LEAST_SPREAD);
        let lead = libm::log(travelled / self.remaining) - 0.5 * spread;
        let wide = spread + CHANGE_SD * CHANGE_SD;
        if lead * lead > CERTAIN * CERTAIN * wide {
            return if lead > 0.0 { 1.0 } else { 0.0 };
        }
        (1.0 - CHANGE_SHARE) * normal_cdf(lead / spread.sqrt()) + CHANGE_SHARE * normal_cdf(lead / wide.sqrt())
    }
}

#[cfg(test)]
mod tests {
    use super::super::FirstPassage;
    use super::*;

    #[test]
    fn with_a_known_rate_it_is_the_inverse_gaussian_law() {
        // Chhikara & Folks (1989); the share of lasting changes is left out on both sides by comparing medians
        let (remaining, rate, grain) = (100.0, 200.0, 50.0_f64);
        let known =
            Outlook { remaining, rate, depth_variance: 0.0, covariance: 0.0, rate_variance: 0.0, grain, wander: 0.0 };
        let exact = FirstPassage::new(remaining, rate, grain.sqrt()).unwrap();
        let median = exact.quantile(0.5).unwrap();
        assert!((known.arrived(median) - 0.5).abs() < 0.02, "{}", known.arrived(median));
        assert!(known.arrived(1.1 * median) > 0.7 && known.arrived(0.9 * median) < 0.3);
    }
}
