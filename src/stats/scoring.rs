//! How good was a forecast: pinball loss of a quantile, CRPS of a normal forecast, how many hits to expect.
//! Sources: Koenker & Bassett (1978), Econometrica 46, 33–50; Gneiting & Raftery (2007), J. Am. Stat. Assoc. 102, 359–378.

use super::distributions::{normal_cdf, normal_pdf};

/// Pinball loss of forecasting quantile `level` as `forecast` when `truth` came: 0 at a hit, in the unit of the truth.
#[must_use]
pub fn pinball(truth: f64, forecast: f64, level: f64) -> f64 {
    let miss = truth - forecast;
    if miss >= 0.0 { level * miss } else { (level - 1.0) * miss }
}

/// Mean pinball loss over pairs (truth, forecast). `None` when empty.
///
/// ```
/// let loss = veerlog::stats::scoring::mean_pinball(&[(1.0, 1.0), (2.0, 2.0), (3.0, 4.0)], 0.1).unwrap();
/// assert!((loss - 0.3).abs() < 1e-12);
/// ```
#[must_use]
pub fn mean_pinball(pairs: &[(f64, f64)], level: f64) -> Option<f64> {
    (!pairs.is_empty()).then(|| {
        pairs.iter().map(|&(truth, forecast)| pinball(truth, forecast, level)).sum::<f64>() / pairs.len() as f64
    })
}

/// Continuous ranked probability score of a normal forecast, in the unit of the truth; |truth − mean| when `sd` ≤ 0.
#[must_use]
pub fn crps_normal(truth: f64, mean: f64, sd: f64) -> f64 {
    if sd <= 0.0 {
        return (truth - mean).abs();
    }
    let z = (truth - mean) / sd;
    let inverse_root_pi = 1.0 / libm::sqrt(std::f64::consts::PI);
    sd * (z * (2.0 * normal_cdf(z) - 1.0) + 2.0 * normal_pdf(z) - inverse_root_pi)
}

/// Central band of the number of hits in `n` trials of chance `p`: the smallest counts whose cumulative probability
/// reaches (1 − confidence)/2 and (1 + confidence)/2. `p` is clamped to 0..=1.
///
/// ```
/// assert_eq!(veerlog::stats::scoring::binomial_band(20, 0.8, 0.95), [12, 19]);
/// ```
#[must_use]
pub fn binomial_band(n: usize, p: f64, confidence: f64) -> [usize; 2] {
    let p = p.clamp(0.0, 1.0);
    let tail = 0.5 * (1.0 - confidence);
    let reach = |level: f64| {
        let mut cumulative = 0.0;
        (0..=n)
            .find(|&k| {
                cumulative += binomial_share(n, k, p);
                cumulative >= level
            })
            .unwrap_or(n)
    };
    [reach(tail), reach(1.0 - tail)]
}

/// P(K = k) of a binomial law, through logarithms.
fn binomial_share(n: usize, k: usize, p: f64) -> f64 {
    let power = |base: f64, times: usize| if times == 0 { 0.0 } else { times as f64 * libm::log(base) };
    let ln_choose = libm::lgamma((n + 1) as f64) - libm::lgamma((k + 1) as f64) - libm::lgamma((n - k + 1) as f64);
    libm::exp(ln_choose + power(p, k) + power(1.0 - p, n - k))
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    #[test]
    fn pinball_weighs_the_two_sides() {
        assert_abs_diff_eq!(pinball(3.0, 1.0, 0.9), 1.8);
        assert_abs_diff_eq!(pinball(1.0, 3.0, 0.9), 0.2, epsilon = 1e-12);
        assert_eq!(mean_pinball(&[], 0.5), None);
    }

    #[test]
    fn crps_of_a_sure_forecast_is_the_distance() {
        assert_abs_diff_eq!(crps_normal(3.0, 1.0, 0.0), 2.0);
        assert_abs_diff_eq!(crps_normal(3.0, 1.0, 1e-9), 2.0, epsilon = 1e-8);
    }

    #[test]
    fn sure_chances() {
        assert_eq!(binomial_band(10, 0.0, 0.95), [0, 0]);
        assert_eq!(binomial_band(10, 1.0, 0.95), [10, 10]);
    }
}
