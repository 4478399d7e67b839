//! Tails and quantiles of the normal, Student t and chi-squared distributions.
//! The functions themselves are `statrs`'; this file only fixes the domain: an argument without meaning gives NaN-free,
//! documented results, so that callers can test once. Limit: a quantile needs 0 < p < 1.

use statrs::function::{beta::beta_reg, erf::erfc, gamma::gamma_ur};

/// P(Z ≤ z) for a standard normal Z. ±∞ give 1 and 0.
#[must_use]
pub fn normal_cdf(z: f64) -> f64 {
    0.5 * erfc(-z / std::f64::consts::SQRT_2)
}

/// Density of the standard normal at `z`.
#[must_use]
pub fn normal_pdf(z: f64) -> f64 {
    libm::exp(-0.5 * z * z) / libm::sqrt(std::f64::consts::TAU)
}

/// The z with P(Z ≤ z) = p; −∞ at p ≤ 0, +∞ at p ≥ 1.
#[must_use]
pub fn normal_quantile(p: f64) -> f64 {
    if p <= 0.0 {
        return f64::NEG_INFINITY;
    }
    if p >= 1.0 {
        return f64::INFINITY;
    }
    -std::f64::consts::SQRT_2 * statrs::function::erf::erfc_inv(2.0 * p)
}

/// P(|T| ≥ |t|) for Student's t with `dof` > 0 degrees of freedom (need not be whole); 1 when `dof` ≤ 0.
#[must_use]
pub fn t_two_sided(t: f64, dof: f64) -> f64 {
    if dof <= 0.0 || t.is_nan() {
        return 1.0;
    }
    if t.is_infinite() {
        return 0.0;
    }
    beta_reg(0.5 * dof, 0.5, dof / (dof + t * t)).clamp(0.0, 1.0)
}

/// The t ≥ 0 with P(|T| ≤ t) = `confidence`; +∞ when `dof` ≤ 0 or `confidence` ≥ 1. By bisection of [`t_two_sided`].
#[must_use]
pub fn t_critical(confidence: f64, dof: f64) -> f64 {
    if dof <= 0.0 || confidence >= 1.0 {
        return f64::INFINITY;
    }
    let tail = 1.0 - confidence;
    let (mut low, mut high) = (0.0, 1.0);
    while t_two_sided(high, dof) > tail {
        high *= 2.0;
        if high > 1e12 {
            return f64::INFINITY;
        }
    }
    // Each halving gains a bit; a double holds 53.
    for _ in 0..64 {
        let middle = 0.5 * (low + high);
        if t_two_sided(middle, dof) > tail {
            low = middle;
        } else {
            high = middle;
        }
    }
    0.5 * (low + high)
}

/// P(X ≥ x) for chi-squared with `dof` degrees of freedom; 1 at x ≤ 0.
#[must_use]
pub fn chi_squared_tail(x: f64, dof: f64) -> f64 {
    if x <= 0.0 {
        return 1.0;
    }
    gamma_ur(0.5 * dof, 0.5 * x)
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    #[test]
    fn tables_of_the_normal_and_t() {
        // Tabled values, common practice: z 1.959964, t(4) 2.776445, t(30) 2.042272, chi² 3.841459.
        assert_abs_diff_eq!(normal_quantile(0.975), 1.959_963_985, epsilon = 1e-8);
        assert_abs_diff_eq!(normal_cdf(1.959_963_985), 0.975, epsilon = 1e-9);
        assert_abs_diff_eq!(t_critical(0.95, 4.0), 2.776_445_105, epsilon = 1e-8);
        assert_abs_diff_eq!(t_critical(0.95, 30.0), 2.042_272_456, epsilon = 1e-8);
        assert_abs_diff_eq!(chi_squared_tail(3.841_458_821, 1.0), 0.05, epsilon = 1e-9);
    }

    #[test]
    fn edges_are_finite_or_infinite_never_nan() {
        assert!(normal_quantile(0.0).is_infinite() && normal_quantile(1.0).is_infinite());
        assert!(t_critical(0.95, 0.0).is_infinite());
        assert_abs_diff_eq!(t_two_sided(0.0, 3.0), 1.0);
        assert_abs_diff_eq!(chi_squared_tail(-1.0, 1.0), 1.0);
    }
}
