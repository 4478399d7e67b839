//! Mean direction, resultant length, alignment and intervals for the mean, of directions and of axes.
//! Axes are treated by doubling (Krumbein 1939; Mardia & Jupp 2000, section 9.4). Intervals: the circular-dispersion
//! interval (Fisher 1993, Statistical Analysis of Circular Data, section 4.4.4) and the one of Zar (2010, eqs. 26.23–24).
//! Limit: both intervals take observations as independent. Pieces of one filament are not: see [`super::filaments`].

use super::angles::{RADIANS, doubled, fold_axis, fold_direction};
use super::concentration;
use super::distributions::{chi_squared_tail, normal_quantile};

/// Weighted first two trigonometric moments of directions.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Moments {
    /// Number of observations.
    pub n: usize,
    /// Mean direction, degrees in [0, 360); `None` when the resultant vanishes.
    pub mean_deg: Option<f64>,
    /// Mean resultant length R̄, 0 to 1.
    pub resultant: f64,
    /// Length of the second moment, |m₂|: resultant length of the doubled angles.
    pub second: f64,
}

/// A resultant shorter than this is rounding, not direction.
const NO_DIRECTION: f64 = 1e-12;

impl Moments {
    /// Moments of directions in degrees, all weights equal. `None` when empty.
    #[must_use]
    pub fn of_directions(degrees: &[f64]) -> Option<Self> {
        Self::weighted(degrees.iter().map(|&d| (d, 1.0)))
    }

    /// Moments of directions with weights ≥ 0. `None` when the weights add up to nothing.
    #[must_use]
    pub fn weighted(items: impl Iterator<Item = (f64, f64)>) -> Option<Self> {
        let (mut n, mut total, mut c, mut s, mut second) = (0, 0.0, 0.0, 0.0, [0.0; 2]);
        for (degrees, weight) in items {
            let (sin, cos) = libm::sincos(degrees * RADIANS);
            n += 1;
            total += weight;
            c += weight * cos;
            s += weight * sin;
            let twice = doubled(degrees);
            second[0] += weight * twice[0];
            second[1] += weight * twice[1];
        }
        if total <= 0.0 {
            return None;
        }
        let resultant = (libm::hypot(c, s) / total).min(1.0);
        let mean = libm::atan2(s, c);
        let second = libm::hypot(second[0], second[1]) / total;
        let mean_deg = (resultant > NO_DIRECTION).then(|| fold_direction(mean / RADIANS));
        Some(Self { n, mean_deg, resultant, second })
    }

    /// Circular dispersion δ = (1 − |m₂|)/(2R̄²).
    #[must_use]
    pub fn dispersion(&self) -> f64 {
        (1.0 - self.second) / (2.0 * self.resultant * self.resultant)
    }

    /// Half-width of the dispersion interval for the mean direction, degrees: asin(z√(δ/n)) (Fisher 1993, section 4.4.4).
    /// `None` when the interval is the whole circle.
    #[must_use]
    pub fn fisher_half_width(&self, confidence: f64) -> Option<f64> {
        self.mean_deg?;
        let z = normal_quantile(0.5 + 0.5 * confidence);
        let sine = z * libm::sqrt(self.dispersion() / self.n as f64);
        (sine <= 1.0).then(|| libm::asin(sine) / RADIANS)
    }

    /// Half-width of the interval of Zar (2010, eqs. 26.23 for R̄ ≤ 0.9 and 26.24 above), degrees, for a von Mises law.
    /// `None` where the formula has no answer (R̄ too small for n).
    #[must_use]
    pub fn zar_half_width(&self, confidence: f64) -> Option<f64> {
        self.mean_deg?;
        let n = self.n as f64;
        let length = n * self.resultant;
        let chi = chi_squared_critical(1.0 - confidence);
        let cosine = if self.resultant <= 0.9 {
            let inner = 2.0 * n * (2.0 * length * length - n * chi) / (4.0 * n - chi);
            if inner < 0.0 {
                return None;
            }
            libm::sqrt(inner) / length
        } else {
            let inner = n * n - (n * n - length * length) * libm::exp(chi / n);
            if inner < 0.0 {
                return None;
            }
            libm::sqrt(inner) / length
        };
        (cosine <= 1.0).then(|| libm::acos(cosine) / RADIANS)
    }
}

/// Critical value of chi-squared with one degree of freedom, by its square root being normal.
fn chi_squared_critical(tail: f64) -> f64 {
    let z = normal_quantile(1.0 - 0.5 * tail);
    debug_assert!((chi_squared_tail(z * z, 1.0) - tail).abs() < 1e-6);
    z * z
}

/// Mean axis of axes, and what goes with it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct AxialMean {
    /// Moments of the doubled angles.
    pub doubled: Moments,
    /// Mean axis, degrees in [0, 180); `None` when the resultant vanishes.
    pub axis_deg: Option<f64>,
    /// Mean resultant length of the doubled angles: 0 no preferred axis, 1 all parallel.
    pub resultant: f64,
    /// von Mises concentration of the doubled angles, exact maximum likelihood; +∞ when all are parallel.
    pub kappa: f64,
}

/// Axial mean of axes in degrees, all weights equal. `None` when empty.
///
/// ```
/// let mean = veerlog::stats::axial::axial_mean(&[170.0, 10.0]).unwrap();
/// let axis = mean.axis_deg.unwrap();
/// assert!(axis < 1e-9 || 180.0 - axis < 1e-9);
/// ```
#[must_use]
pub fn axial_mean(degrees: &[f64]) -> Option<AxialMean> {
    weighted_axial_mean(degrees.iter().map(|&d| (d, 1.0)))
}

/// Axial mean of (axis in degrees, weight ≥ 0). `None` when the weights add up to nothing.
#[must_use]
pub fn weighted_axial_mean(items: impl Iterator<Item = (f64, f64)>) -> Option<AxialMean> {
    let doubled = Moments::weighted(items.map(|(d, w)| (2.0 * d, w)))?;
    Some(AxialMean {
        doubled,
        axis_deg: doubled.mean_deg.map(|d| fold_axis(0.5 * d)),
        resultant: doubled.resultant,
        kappa: concentration::kappa(doubled.resultant),
    })
}

/// Alignment: weighted mean of cos 2Δ, Δ the angle to `axis_deg`; +1 parallel, −1 perpendicular.
/// `None` when the weights add up to nothing.
///
/// ```
/// use veerlog::stats::axial::alignment;
/// let value = alignment([(90.0, 3.0), (0.0, 1.0)].into_iter(), 90.0).unwrap();
/// assert!((value - 0.5).abs() < 1e-12);
/// ```
#[must_use]
pub fn alignment(items: impl Iterator<Item = (f64, f64)>, axis_deg: f64) -> Option<f64> {
    let (mut sum, mut total) = (0.0, 0.0);
    for (degrees, weight) in items {
        sum += weight * doubled(degrees - axis_deg)[0];
        total += weight;
    }
    (total > 0.0).then(|| sum / total)
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;
    use proptest::prelude::*;

    #[test]
    fn no_direction_in_a_cross() {
        let mean = axial_mean(&[0.0, 90.0]).unwrap();
        assert_eq!(mean.axis_deg, None);
        assert_abs_diff_eq!(mean.resultant, 0.0, epsilon = 1e-12);
        assert_eq!(axial_mean(&[]), None);
        assert_eq!(alignment(std::iter::empty(), 0.0), None);
    }

    #[test]
    fn all_parallel() {
        let mean = axial_mean(&[30.0, 30.0, 210.0]).unwrap();
        assert_abs_diff_eq!(mean.axis_deg.unwrap(), 30.0, epsilon = 1e-9);
        assert_abs_diff_eq!(mean.resultant, 1.0, epsilon = 1e-12);
        assert_abs_diff_eq!(mean.doubled.fisher_half_width(0.95).unwrap(), 0.0, epsilon = 1e-3);
    }

    proptest! {
        #[test]
        fn turning_everything_turns_the_mean(axes in prop::collection::vec(0.0..180.0_f64, 1..20), by in 0.0..180.0_f64) {
            let a = axial_mean(&axes).unwrap();
            let turned: Vec<f64> = axes.iter().map(|d| d + by).collect();
            let b = axial_mean(&turned).unwrap();
            prop_assert!((a.resultant - b.resultant).abs() < 1e-9);
            if let (Some(x), Some(y)) = (a.axis_deg, b.axis_deg)
                && a.resultant > 1e-3 {
                prop_assert!(crate::stats::angles::acute(x + by, y) < 1e-6);
            }
        }
    }
}
