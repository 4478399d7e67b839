//! Is there any preferred direction? Rayleigh's test, the V test about a given direction, Kuiper's statistic.
//! Sources: exact law of the resultant of n unit vectors, P(R ≤ r) = r∫J₁(rt)J₀(t)ⁿdt (Mardia & Jupp 2000, eq. 4.4.4);
//! approximations of Zar (2010, eq. 27.4) and Wilkie (1983, Appl. Stat. 32, 311–312); V test and Kuiper as in Zar (2010),
//! Fisher (1993). For axes give doubled angles. Limit: independent unit vectors; for filaments see [`super::filaments`].

use super::angles::RADIANS;
use super::distributions::normal_cdf;
use super::order::sorted;

/// Above this many vectors the exact integral gains nothing over Zar's approximation (their difference is below 1e-4).
const EXACT_UP_TO: usize = 200;

/// p of Rayleigh's test, exact, for `n` unit vectors with mean resultant length `resultant`.
/// n ≤ 1 gives 1. Above 200 vectors [`rayleigh_p_zar`] answers. Always in 0..=1.
#[must_use]
pub fn rayleigh_p(n: usize, resultant: f64) -> f64 {
    let r = n as f64 * resultant.clamp(0.0, 1.0);
    match n {
        0 | 1 => 1.0,
        // Two unit vectors: R = 2|cos(θ/2)|, θ uniform.
        2 => (2.0 / std::f64::consts::PI * libm::acos((0.5 * r).min(1.0))).clamp(0.0, 1.0),
        _ if n <= EXACT_UP_TO => (1.0 - resultant_cdf(n, r)).clamp(0.0, 1.0),
        _ => rayleigh_p_zar(n, resultant),
    }
}

/// P(R ≤ r) for n ≥ 3 unit vectors with independent uniform directions.
fn resultant_cdf(n: usize, r: f64) -> f64 {
    // |J₀(t)| ≤ √(2/πt) and |J₁| likewise: the neglected tail is below (2/πT)^((n+1)/2)·T·√r.
    let target = 1e-11;
    let mut end = 20.0;
    while end < 2e4 && libm::pow(2.0 / (std::f64::consts::PI * end), 0.5 * (n + 1) as f64) * end > target {
        end *= 1.3;
    }
    // The integrand turns with frequency up to r + n in t; 5-point Gauss on panels of half a radian of that phase.
    let panels = (end * (1.0 + r + n as f64) / 2.0).ceil() as usize;
    let width = end / panels as f64;
    let mut sum = 0.0;
    for panel in 0..panels {
        let middle = (panel as f64 + 0.5) * width;
        for (node, weight) in GAUSS_5 {
            let t = middle + 0.5 * width * node;
            sum += weight * libm::j1(r * t) * power(libm::j0(t), n);
        }
    }
    r * sum * 0.5 * width
}

/// Gauss–Legendre nodes and weights of order 5 on [−1, 1] (NIST DLMF table 3.5.1).
const GAUSS_5: [(f64, f64); 5] = [
    (-0.906_179_845_938_664, 0.236_926_885_056_189),
    (-0.538_469_310_105_683, 0.478_628_670_499_366),
    (0.0, 0.568_888_888_888_889),
    (0.538_469_310_105_683, 0.478_628_670_499_366),
    (0.906_179_845_938_664, 0.236_926_885_056_189),
];

/// xⁿ by repeated squaring: the same bytes on every platform.
fn power(mut x: f64, mut n: usize) -> f64 {
    let mut product = 1.0;
    while n > 0 {
        if n % 2 == 1 {
            product *= x;
        }
        x *= x;
        n /= 2;
    }
    product
}

/// p of Rayleigh's test by Zar's approximation: exp(√(1 + 4n + 4(n² − R²)) − (1 + 2n)), clamped to 0..=1.
#[must_use]
pub fn rayleigh_p_zar(n: usize, resultant: f64) -> f64 {
    let n = n as f64;
    let r = n * resultant;
    libm::exp(libm::sqrt(1.0 + 4.0 * n + 4.0 * (n * n - r * r)) - (1.0 + 2.0 * n)).clamp(0.0, 1.0)
}

/// p of Rayleigh's test by Wilkie's series in z = nR̄²; the series goes negative for strong alignment: clamped to 0..=1.
#[must_use]
pub fn rayleigh_p_wilkie(n: usize, resultant: f64) -> f64 {
    let n = n as f64;
    let z = n * resultant * resultant;
    let first = (2.0 * z - z * z) / (4.0 * n);
    let second = (24.0 * z - 132.0 * z * z + 76.0 * z * z * z - 9.0 * z * z * z * z) / (288.0 * n * n);
    (libm::exp(-z) * (1.0 + first - second)).clamp(0.0, 1.0)
}

/// The V test against uniformity with one direction expected beforehand.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct VTest {
    /// V = n·mean cos(angle to the expected direction).
    pub v: f64,
    /// u = V√(2/n), about standard normal without a preferred direction.
    pub u: f64,
    /// One-sided p of u by the normal law.
    pub p: f64,
}

/// V test of directions in degrees about `expected_deg`; for axes double both. `None` when empty.
///
/// ```
/// let test = veerlog::stats::uniformity::v_test(&[88.0, 90.0, 95.0, 85.0], 90.0).unwrap();
/// assert!(test.p < 0.01);
/// ```
#[must_use]
pub fn v_test(degrees: &[f64], expected_deg: f64) -> Option<VTest> {
    if degrees.is_empty() {
        return None;
    }
    let v: f64 = degrees.iter().map(|d| libm::cos((d - expected_deg) * RADIANS)).sum();
    let u = v * libm::sqrt(2.0 / degrees.len() as f64);
    Some(VTest { v, u, p: normal_cdf(-u).clamp(0.0, 1.0) })
}

/// Kuiper's V* = V(√n + 0.155 + 0.24/√n) against the uniform law (Fisher 1993, eq. 4.16). `None` when empty.
/// Above 1.747 is beyond the 5 % point (Fisher 1993, table A.5, from memory).
#[must_use]
pub fn kuiper(degrees: &[f64]) -> Option<f64> {
    if degrees.is_empty() {
        return None;
    }
    let n = degrees.len() as f64;
    let fractions: Vec<f64> = degrees.iter().map(|&d| super::angles::fold_direction(d) / 360.0).collect();
    let (mut above, mut below) = (f64::NEG_INFINITY, f64::NEG_INFINITY);
    for (i, x) in sorted(&fractions).into_iter().enumerate() {
        above = above.max((i + 1) as f64 / n - x);
        below = below.max(x - i as f64 / n);
    }
    let root = libm::sqrt(n);
    Some((above + below) * (root + 0.155 + 0.24 / root))
}

/// Distance of Kolmogorov and Smirnov of values in 0..=1 from the uniform law, and its asymptotic p with Stephens' (1970,
/// J. R. Stat. Soc. B 32, 115–122) correction for n. `None` when empty.
#[must_use]
pub fn uniform_ks(values: &[f64]) -> Option<(f64, f64)> {
    if values.is_empty() {
        return None;
    }
    let n = values.len() as f64;
    let mut distance = 0.0_f64;
    for (i, x) in sorted(values).into_iter().enumerate() {
        distance = distance.max((i + 1) as f64 / n - x).max(x - i as f64 / n);
    }
    let root = libm::sqrt(n);
    let t = distance * (root + 0.12 + 0.11 / root);
    if t < 0.2 {
        return Some((distance, 1.0));
    }
    let mut p = 0.0;
    for k in 1..=100 {
        let sign = if k % 2 == 1 { 2.0 } else { -2.0 };
        p += sign * libm::exp(-2.0 * (k * k) as f64 * t * t);
    }
    Some((distance, p.clamp(0.0, 1.0)))
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;
    use rand::RngExt;
    use rand::SeedableRng;
    use rand_chacha::ChaCha8Rng;

    #[test]
    fn exact_p_agrees_with_simulation() {
        for n in [2_usize, 3, 4, 7] {
            let mut rng = ChaCha8Rng::seed_from_u64(11);
            let draws = 40_000;
            let limit = 0.6;
            let mut beyond = 0;
            for _ in 0..draws {
                let (mut c, mut s) = (0.0, 0.0);
                for _ in 0..n {
                    let (sin, cos) = libm::sincos(std::f64::consts::TAU * rng.random::<f64>());
                    c += cos;
                    s += sin;
                }
                beyond += usize::from(libm::hypot(c, s) / n as f64 >= limit);
            }
            let share = beyond as f64 / f64::from(draws);
            // Four standard errors of a share near 0.3 of 40 000 draws.
            assert_abs_diff_eq!(rayleigh_p(n, limit), share, epsilon = 0.01);
        }
    }

    #[test]
    fn exact_meets_the_approximation_at_large_n() {
        assert_abs_diff_eq!(rayleigh_p(150, 0.12), rayleigh_p_zar(150, 0.12), epsilon = 1e-3);
        assert_abs_diff_eq!(rayleigh_p(300, 0.0), 1.0, epsilon = 1e-9);
    }

    #[test]
    fn p_stays_a_probability() {
        for n in [1, 2, 3, 10, 100, 1_000] {
            for r in [0.0, 0.3, 0.99, 1.0] {
                for p in [rayleigh_p(n, r), rayleigh_p_zar(n, r), rayleigh_p_wilkie(n, r)] {
                    assert!((0.0..=1.0).contains(&p), "n {n} r {r} p {p}");
                }
            }
        }
    }

    #[test]
    fn ks_knows_uniform_from_not() {
        let even: Vec<f64> = (0..100).map(|i| (f64::from(i) + 0.5) / 100.0).collect();
        let low: Vec<f64> = even.iter().map(|v| v * v).collect();
        assert!(uniform_ks(&even).unwrap().1 > 0.99);
        assert!(uniform_ks(&low).unwrap().1 < 0.001);
        assert_eq!(uniform_ks(&[]), None);
    }
}
