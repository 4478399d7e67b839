//! First passage of a drifting Brownian motion: the inverse Gaussian law.
//! Method: X(t) = v·t + σ·W(t) starts at 0; T is the first time at which X reaches a > 0. Source: Chhikara & Folks (1989), The
//! Inverse Gaussian Distribution, chapters 1–2; the case v ≤ 0: Cox & Miller (1965), The Theory of Stochastic Processes, 5.7.
//! Limits: one barrier, constant drift and noise; a growing track that never falls is described by `growth`, which has this
//! law as its limit when the rate is known.

use std::f64::consts::{PI, SQRT_2};

/// First passage of X(t) = `drift`·t + `sigma`·W(t) over `distance`. Any consistent units (µm, µm/s, µm/√s).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct FirstPassage {
    distance: f64,
    drift: f64,
    sigma: f64,
}

impl FirstPassage {
    /// `None` unless `distance` > 0 and `sigma` > 0 and all three are finite. `drift` may have any sign.
    ///
    /// # Examples
    /// ```
    /// use veerlog::forecast::FirstPassage;
    /// let contact = FirstPassage::new(100.0, 2.0, 5.0).unwrap();
    /// assert!((contact.mean().unwrap() - 50.0).abs() < 1e-12);
    /// assert!((contact.cdf(50.0) - 0.568_499_728_8).abs() < 1e-9);
    /// // a drift away from the barrier: it may never be reached, so there is no mean
    /// assert_eq!(FirstPassage::new(100.0, -2.0, 5.0).unwrap().mean(), None);
    /// ```
    pub fn new(distance: f64, drift: f64, sigma: f64) -> Option<Self> {
        let usable = distance.is_finite() && drift.is_finite() && sigma.is_finite();
        (usable && distance > 0.0 && sigma > 0.0).then_some(Self { distance, drift, sigma })
    }

    /// Mean time a/v; `None` when v ≤ 0 (it is infinite, or the barrier may never be reached).
    pub fn mean(&self) -> Option<f64> {
        (self.drift > 0.0).then(|| self.distance / self.drift)
    }

    /// Variance aσ²/v³; `None` when v ≤ 0.
    pub fn variance(&self) -> Option<f64> {
        (self.drift > 0.0).then(|| self.distance * self.sigma * self.sigma / (self.drift * self.drift * self.drift))
    }

    /// Most likely time; for v = 0 it is a²/(3σ²), and for v < 0 that of the passages that do happen.
    pub fn mode(&self) -> f64 {
        let (v2, s2) = (self.drift * self.drift, self.sigma * self.sigma);
        // root of v²t² + 3σ²t − a² = 0 in the form that does not cancel
        2.0 * self.distance * self.distance
            / (3.0 * s2 + (9.0 * s2 * s2 + 4.0 * v2 * self.distance * self.distance).sqrt())
    }

    /// Chance that the barrier is ever reached: 1 for v ≥ 0, exp(2va/σ²) for v < 0.
    pub fn ever(&self) -> f64 {
        libm::exp((2.0 * self.drift * self.distance / (self.sigma * self.sigma)).min(0.0))
    }

    /// Density of the passage time at `t` (integrates to [`Self::ever`]); 0 for t ≤ 0.
    pub fn pdf(&self, t: f64) -> f64 {
        if t <= 0.0 {
            return 0.0;
        }
        let miss = self.distance - self.drift * t;
        let scale = self.sigma * (2.0 * PI * t).sqrt() * t;
        self.distance / scale * libm::exp(-miss * miss / (2.0 * self.sigma * self.sigma * t))
    }

    /// Chance of passage by `t`; 0 for t ≤ 0.
    pub fn cdf(&self, t: f64) -> f64 {
        if t <= 0.0 {
            return 0.0;
        }
        let root = self.sigma * t.sqrt();
        let ahead = (self.drift * t - self.distance) / root;
        let behind = (self.drift * t + self.distance) / root;
        // exp(2va/σ²)·Φ(−behind) = exp(−ahead²/2)·erfcx(behind/√2)/2: neither factor overflows when behind > 0
        let reflected = if behind > 0.0 {
            0.5 * libm::exp(-0.5 * ahead * ahead) * scaled_erfc(behind / SQRT_2)
        } else {
            self.ever() * normal_cdf(-behind)
        };
        (normal_cdf(ahead) + reflected).clamp(0.0, 1.0)
    }

    /// Time by which a share `p` of all starts has passed; `None` unless 0 < p < [`Self::ever`]. Bisection, to 1e-12 relative.
    pub fn quantile(&self, p: f64) -> Option<f64> {
        if !(p > 0.0 && p < self.ever()) {
            return None;
        }
        let (mut low, mut high) = (0.0, self.mode());
        while self.cdf(high) < p {
            low = high;
            high *= 2.0;
            if !high.is_finite() {
                return None;
            }
        }
        while high - low > 1e-12 * high {
            let middle = 0.5 * (low + high);
            if middle <= low || middle >= high {
                break;
            }
            if self.cdf(middle) < p { low = middle } else { high = middle }
        }
        Some(0.5 * (low + high))
    }
}

/// Φ(z) of the standard normal law.
pub(crate) fn normal_cdf(z: f64) -> f64 {
    0.5 * libm::erfc(-z / SQRT_2)
}

/// exp(y²)·erfc(y) for y ≥ 0, which falls like 1/(y√π) where erfc itself underflows.
/// Asymptotic series from y = 10 (Abramowitz & Stegun 7.1.23; the first term left out is below 1e-13 there).
fn scaled_erfc(y: f64) -> f64 {
    if y < 10.0 {
        return libm::exp(y * y) * libm::erfc(y);
    }
    let step = 1.0 / (2.0 * y * y);
    let mut term = 1.0;
    let mut sum = 1.0;
    for k in 1..=9 {
        term *= -f64::from(2 * k - 1) * step;
        sum += term;
    }
    sum / (y * PI.sqrt())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn series_meets_the_direct_form() {
        let y = 10.0_f64;
        let direct = libm::exp(y * y) * libm::erfc(y);
        assert!((scaled_erfc(y) / direct - 1.0).abs() < 1e-11);
    }

    #[test]
    fn a_nearly_certain_rate_neither_overflows_nor_blurs() {
        let sharp = FirstPassage::new(100.0, 2.0, 1e-3).unwrap();
        assert!(sharp.cdf(49.9) < 1e-12);
        assert!(sharp.cdf(50.1) > 1.0 - 1e-12);
        assert!((sharp.quantile(0.5).unwrap() - 50.0).abs() < 1e-3);
    }

    #[test]
    fn unusable_input_is_refused() {
        assert_eq!(FirstPassage::new(0.0, 1.0, 1.0), None);
        assert_eq!(FirstPassage::new(1.0, f64::NAN, 1.0), None);
        assert_eq!(FirstPassage::new(1.0, 1.0, 0.0), None);
        let away = FirstPassage::new(1.0, -1.0, 1.0).unwrap();
        assert_eq!(away.quantile(0.9), None);
        assert!(away.cdf(-1.0) <= 0.0);
    }
}
