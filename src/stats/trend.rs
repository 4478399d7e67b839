//! Is there a trend at all? The Mann–Kendall test: exact for short series without ties, normal with ties corrected else.
//! Sources: Mann (1945), Econometrica 13, 245–259; Kendall (1975), Rank Correlation Methods.
//! Limit: independent observations. A depth that never falls always "has a trend": test rates, not depths.

use super::distributions::normal_cdf;
use super::theil_sen::kendall_variance;

/// Up to this many untied values the null law of S is counted exactly.
const EXACT_UP_TO: usize = 40;

/// Result of the Mann–Kendall test.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct MannKendall {
    /// Rising pairs less falling pairs.
    pub s: i64,
    /// Variance of S without a trend, ties corrected.
    pub variance: f64,
    /// (S ∓ 1)/√variance, continuity corrected; 0 at S = 0.
    pub z: f64,
    /// Two-sided p by the normal law.
    pub p_normal: f64,
    /// Two-sided exact p; `None` with ties or over 40 values.
    pub p_exact: Option<f64>,
}

/// Mann–Kendall test of values in order of time. `None` under three values or all equal.
///
/// ```
/// let test = veerlog::stats::trend::mann_kendall(&[10.0, 15.0, 14.0, 20.0]).unwrap();
/// assert_eq!(test.s, 4);
/// ```
#[must_use]
pub fn mann_kendall(values: &[f64]) -> Option<MannKendall> {
    let n = values.len();
    if n < 3 {
        return None;
    }
    let (mut s, mut tied) = (0_i64, false);
    for (i, a) in values.iter().enumerate() {
        for b in &values[i + 1..] {
            match b.total_cmp(a) {
                std::cmp::Ordering::Greater => s += 1,
                std::cmp::Ordering::Less => s -= 1,
                std::cmp::Ordering::Equal => tied = true,
            }
        }
    }
    let variance = kendall_variance(values);
    if variance <= 0.0 {
        return None;
    }
    let z = (s - s.signum()) as f64 / libm::sqrt(variance);
    Some(MannKendall {
        s,
        variance,
        z,
        p_normal: (2.0 * normal_cdf(-z.abs())).min(1.0),
        p_exact: (!tied && n <= EXACT_UP_TO).then(|| exact_p(n, s.unsigned_abs() as usize)),
    })
}

/// P(|S| ≥ s) over all orders of n different values, by counting inversions one value at a time.
fn exact_p(n: usize, s: usize) -> f64 {
    let pairs = n * (n - 1) / 2;
    // shares[k]: share of the orders of the values so far with k inversions.
    let mut shares = vec![0.0; pairs + 1];
    shares[0] = 1.0;
    for placed in 2..=n {
        let mut next = vec![0.0; pairs + 1];
        for (k, share) in shares.iter().enumerate() {
            for slot in next.iter_mut().skip(k).take(placed) {
                *slot += share / placed as f64;
            }
        }
        shares = next;
    }
    let reached = |k: usize| pairs.abs_diff(2 * k) >= s;
    shares.iter().enumerate().filter(|(k, _)| reached(*k)).map(|(_, share)| share).sum::<f64>().min(1.0)
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    #[test]
    fn a_rising_series_of_three_has_two_chances_in_six() {
        let test = mann_kendall(&[1.0, 2.0, 3.0]).unwrap();
        assert_abs_diff_eq!(test.p_exact.unwrap(), 1.0 / 3.0, epsilon = 1e-12);
    }

    #[test]
    fn exact_and_normal_agree_when_long() {
        let values: Vec<f64> = (0..35).map(|i| f64::from((i * 17) % 35) + 0.3 * f64::from(i)).collect();
        let test = mann_kendall(&values).unwrap();
        assert_abs_diff_eq!(test.p_exact.unwrap(), test.p_normal, epsilon = 0.02);
    }

    #[test]
    fn ties_and_nothing() {
        assert_eq!(mann_kendall(&[1.0, 1.0, 1.0]), None);
        assert_eq!(mann_kendall(&[1.0, 2.0]), None);
        assert_eq!(mann_kendall(&[1.0, 1.0, 2.0]).unwrap().p_exact, None);
    }
}
