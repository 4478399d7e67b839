//! Forecast scores against reference libraries and closed forms.

use approx::assert_abs_diff_eq;
use veerlog::stats::scoring::{binomial_band, crps_normal, mean_pinball};

#[test]
fn pinball_as_documented_by_scikit_learn() {
    // scikit-learn 1.9.1, documentation of mean_pinball_loss.
    let truth = [1.0, 2.0, 3.0];
    let loss = |forecast: [f64; 3], level| {
        let pairs: Vec<(f64, f64)> = truth.into_iter().zip(forecast).collect();
        mean_pinball(&pairs, level).unwrap()
    };
    assert_abs_diff_eq!(loss([0.0, 2.0, 3.0], 0.1), 0.033_333_333, epsilon = 1e-8);
    assert_abs_diff_eq!(loss([1.0, 2.0, 4.0], 0.1), 0.3, epsilon = 1e-12);
    assert_abs_diff_eq!(loss([0.0, 2.0, 3.0], 0.9), 0.3, epsilon = 1e-12);
    assert_abs_diff_eq!(loss([1.0, 2.0, 4.0], 0.9), 0.033_333_333, epsilon = 1e-8);
}

#[test]
fn coverage_bands_of_an_80_percent_interval() {
    // scipy 1.17.1 binom.ppf.
    assert_eq!(binomial_band(20, 0.8, 0.95), [12, 19]);
    assert_eq!(binomial_band(50, 0.8, 0.95), [34, 45]);
    assert_eq!(binomial_band(100, 0.8, 0.95), [72, 88]);
}

#[test]
fn crps_of_a_standard_normal_at_its_mean() {
    // Closed form (√2 − 1)/√π, Gneiting & Raftery (2007).
    assert_abs_diff_eq!(crps_normal(0.0, 0.0, 1.0), 0.233_694_977_1, epsilon = 1e-9);
}
