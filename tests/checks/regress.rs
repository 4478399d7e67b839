//! Straight lines, trends and resampling against certified values and reference libraries.

use approx::{assert_abs_diff_eq, assert_relative_eq};
use veerlog::stats::bootstrap;
use veerlog::stats::isotonic::isotonic;
use veerlog::stats::order::{mean, variance};
use veerlog::stats::regress::least_squares;
use veerlog::stats::theil_sen::theil_sen;
use veerlog::stats::trend::mann_kendall;

#[test]
fn nist_norris() {
    let points: Vec<(f64, f64)> = include_str!("../../fixtures/stats/nist_norris.csv")
        .lines()
        .filter(|line| line.starts_with(|c: char| c.is_ascii_digit()))
        .map(|line| line.split_once(',').unwrap())
        .map(|(x, y)| (x.parse().unwrap(), y.parse().unwrap()))
        .collect();
    assert_eq!(points.len(), 36);
    let line = least_squares(&points).unwrap();
    // NIST StRD, certified.
    assert_relative_eq!(line.intercept, -0.262_323_073_774_029, max_relative = 1e-9);
    assert_relative_eq!(line.slope, 1.002_116_818_020_45, max_relative = 1e-9);
    assert_relative_eq!(line.se_intercept.unwrap(), 0.232_818_234_301_152, max_relative = 1e-9);
    assert_relative_eq!(line.se_slope.unwrap(), 0.429_796_848_199_937e-3, max_relative = 1e-9);
    assert_relative_eq!(line.residual_sd.unwrap(), 0.884_796_396_144_373, max_relative = 1e-9);
}

#[test]
fn mann_kendall_of_four() {
    let values = [10.0, 15.0, 14.0, 20.0];
    let test = mann_kendall(&values).unwrap();
    // Gilbert (1987) section 16.4 (from memory): S = 4; pymannkendall 1.4.3, scipy 1.17.1 kendalltau.
    assert_eq!(test.s, 4);
    assert_abs_diff_eq!(test.variance, 8.666_666_667, epsilon = 1e-6);
    assert_abs_diff_eq!(test.z, 1.019_049_3, epsilon = 1e-6);
    assert_abs_diff_eq!(test.p_normal, 0.308_179_5, epsilon = 1e-6);
    assert_abs_diff_eq!(test.p_exact.unwrap(), 1.0 / 3.0, epsilon = 1e-12);
    // scipy theilslopes, pymannkendall.
    let points: Vec<(f64, f64)> = values.iter().enumerate().map(|(i, &y)| (i as f64, y)).collect();
    assert_abs_diff_eq!(theil_sen(&points, 0.95).unwrap().slope, 2.916_666_7, epsilon = 1e-6);
}

#[test]
fn theil_sen_with_one_wild_point() {
    let y = [1.1, 2.3, 2.9, 4.2, 5.1, 5.8, 7.4, 7.9, 9.2, 30.0];
    let points: Vec<(f64, f64)> = y.iter().enumerate().map(|(i, &y)| (i as f64, y)).collect();
    let line = theil_sen(&points, 0.95).unwrap();
    // scipy 1.17.1 theilslopes.
    assert_abs_diff_eq!(line.slope, 1.025, epsilon = 1e-9);
    assert_abs_diff_eq!(line.interval[0], 0.933_333_3, epsilon = 1e-6);
    assert_abs_diff_eq!(line.interval[1], 1.3, epsilon = 1e-9);
    // scipy linregress.
    assert_abs_diff_eq!(least_squares(&points).unwrap().slope, 2.083_030, epsilon = 1e-6);
}

#[test]
fn isotonic_as_scikit_learn() {
    let plain = [1.0, 3.0, 2.0, 4.0, 3.0, 5.0, 7.0, 6.0, 8.0, 9.0].map(|v| (v, 1.0));
    assert_eq!(isotonic(&plain), [1.0, 2.5, 2.5, 3.5, 3.5, 5.0, 6.5, 6.5, 8.0, 9.0]);
    let weighted = [(5.0, 1.0), (4.0, 2.0), (6.0, 1.0), (2.0, 3.0), (8.0, 1.0), (7.0, 1.0)];
    for (fitted, expected) in isotonic(&weighted).iter().zip([25.0 / 7.0, 25.0 / 7.0, 25.0 / 7.0, 25.0 / 7.0, 7.5, 7.5])
    {
        assert_abs_diff_eq!(*fitted, expected, epsilon = 1e-12);
    }
}

/// Law school: LSAT and GPA of 15 schools, in Efron & Tibshirani (1993); data from memory.
const LAW_SCHOOL: [(f64, f64); 15] = [
    (576.0, 3.39),
    (635.0, 3.30),
    (558.0, 2.81),
    (578.0, 3.03),
    (666.0, 3.44),
    (580.0, 3.07),
    (555.0, 3.00),
    (661.0, 3.43),
    (651.0, 3.36),
    (605.0, 3.13),
    (653.0, 3.12),
    (575.0, 2.74),
    (545.0, 2.76),
    (572.0, 2.88),
    (594.0, 2.96),
];

fn correlation(pairs: &[(f64, f64)]) -> Option<f64> {
    let (x, y): (Vec<f64>, Vec<f64>) = pairs.iter().copied().unzip();
    let (mx, my) = (mean(&x)?, mean(&y)?);
    let covariance: f64 = pairs.iter().map(|(a, b)| (a - mx) * (b - my)).sum::<f64>() / (pairs.len() as f64 - 1.0);
    let spread = (variance(&x)? * variance(&y)?).sqrt();
    (spread > 0.0).then(|| covariance / spread)
}

#[test]
fn law_school_bootstrap() {
    let r = correlation(&LAW_SCHOOL).unwrap();
    let left_out = bootstrap::leave_one_out(&LAW_SCHOOL, correlation);
    // numpy; bootstrap figures scipy.stats.bootstrap with 40 000 resamples.
    assert_abs_diff_eq!(r, 0.776_374_5, epsilon = 1e-7);
    assert_abs_diff_eq!(bootstrap::jackknife_se(&left_out).unwrap(), 0.142_518_6, epsilon = 1e-6);
    assert_abs_diff_eq!(bootstrap::acceleration(&left_out).unwrap(), -0.075_671_6, epsilon = 1e-6);
    let replicates = bootstrap::replicates(20_000, 1, |rng| correlation(&bootstrap::resample(&LAW_SCHOOL, rng)));
    assert_abs_diff_eq!(variance(&replicates).unwrap().sqrt(), 0.134, epsilon = 0.003);
    let [low, high] = bootstrap::bca(r, &replicates, &left_out, 0.90).unwrap();
    assert_abs_diff_eq!(low, 0.424, epsilon = 0.015);
    assert_abs_diff_eq!(high, 0.927, epsilon = 0.015);
}
