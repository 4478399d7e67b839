//! Concentration κ of the von Mises law from a mean resultant length: the exact maximum-likelihood solution of A(κ) = R̄,
//! where A = I₁/I₀. Source: Mardia & Jupp (2000), Directional Statistics, section 5.3.1; the ratio by the continued
//! fraction I₁/I₀ = 1/(2/κ + 1/(4/κ + …)) (NIST DLMF 10.33.1), summed backwards.
//! Limit: the estimate is biased upwards in small samples; it describes, it is not tested with.

/// A(κ) = I₁(κ)/I₀(κ), the mean resultant length of a von Mises law; odd in κ, 0 at 0, towards 1.
#[must_use]
pub fn bessel_ratio(kappa: f64) -> f64 {
    if kappa <= 0.0 {
        return if kappa < 0.0 { -bessel_ratio(-kappa) } else { 0.0 };
    }
    // Beyond this, the asymptotic series (Mardia & Jupp eq. A.9) is exact to 1e-15 and the fraction would need many terms.
    if kappa > 2_000.0 {
        let u = 1.0 / kappa;
        return 1.0 - 0.5 * u - 0.125 * u * u - 0.125 * u * u * u;
    }
    // Terms fall once 2j/κ > 1; 40 beyond that leave nothing of a double.
    let terms = (0.5 * kappa) as usize + 60 + (4.0 * libm::sqrt(kappa)) as usize;
    let mut tail = 0.0;
    for j in (1..=terms).rev() {
        tail = 1.0 / (2.0 * j as f64 / kappa + tail);
    }
    tail
}

/// κ with A(κ) = `resultant` (mean resultant length, of doubled angles for axes). 0 at or below 0, +∞ at or above 1.
///
/// ```
/// let kappa = veerlog::stats::concentration::kappa(0.5);
/// assert!((kappa - 1.1593199).abs() < 1e-6);
/// ```
#[must_use]
pub fn kappa(resultant: f64) -> f64 {
    if resultant <= 0.0 {
        return 0.0;
    }
    if resultant >= 1.0 {
        return f64::INFINITY;
    }
    let r = resultant;
    // Start: r(2 − r²)/(1 − r²), Banerjee et al. (2005), J. Mach. Learn. Res. 6, 1345–1382. Then Newton with
    // A' = 1 − A/κ − A²; A is concave and increasing, so the iteration settles.
    let mut k = r * (2.0 - r * r) / (1.0 - r * r);
    for _ in 0..100 {
        let a = bessel_ratio(k);
        let slope = 1.0 - a / k - a * a;
        let step = (a - r) / slope;
        let next = if step < k { k - step } else { 0.5 * k };
        if (next - k).abs() <= 1e-13 * k {
            return next;
        }
        k = next;
    }
    k
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_relative_eq;

    #[test]
    fn ratio_and_inverse_undo_each_other() {
        for k in [1e-6, 0.01, 0.5, 3.0, 40.0, 500.0, 1_900.0, 2_100.0, 1e5] {
            assert_relative_eq!(kappa(bessel_ratio(k)), k, max_relative = 1e-6);
        }
    }

    #[test]
    fn both_branches_meet() {
        let (low, high) = (bessel_ratio(1_999.999_999), bessel_ratio(2_000.000_001));
        assert_relative_eq!(low, high, max_relative = 1e-12);
    }

    #[test]
    fn edges() {
        assert!(kappa(0.0) < 1e-300);
        assert!(kappa(1.0).is_infinite());
        assert!((bessel_ratio(-2.0) + bessel_ratio(2.0)).abs() < 1e-15);
    }
}
