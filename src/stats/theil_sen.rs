//! The median of all pairwise slopes: a rate that a few wild points do not move.
//! Sources: Theil (1950), Sen (1968, J. Am. Stat. Assoc. 63, 1379–1389) with Sen's rank interval; block bootstrap of
//! increments for series whose errors are not independent (Künsch 1989, Ann. Stat. 17, 1217–1241, on the increments).
//! Limit: n(n − 1)/2 slopes; longer series are thinned evenly, first and last point kept, and the result says so.

use super::bootstrap::{BlockPlan, percentile, replicates};
use super::distributions::normal_quantile;
use super::order::{median, median_in_place, sorted};

/// Points used for a slope at most: 2 million slopes, some tens of milliseconds (measured).
pub const MAX_POINTS: usize = 2_000;
/// Points used in each bootstrap resample at most: 20 000 slopes, under a millisecond (measured).
pub const MAX_POINTS_RESAMPLED: usize = 200;
/// Fewest increments from which blocks can be drawn; below, an interval would be made of nothing.
const MIN_INCREMENTS: usize = 5;

/// A robust line.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RobustLine {
    /// Median of the pairwise slopes.
    pub slope: f64,
    /// Median y − slope · median x.
    pub intercept: f64,
    /// Sen's interval at the confidence asked for.
    pub interval: [f64; 2],
    /// Points used; fewer than given when the series was thinned.
    pub points_used: usize,
}

/// Theil–Sen line through (x, y) with Sen's rank interval (ties in y corrected). `None` without two different x.
///
/// ```
/// let points: Vec<(f64, f64)> = [10.0, 15.0, 14.0, 20.0].iter().enumerate().map(|(i, &y)| (i as f64, y)).collect();
/// let line = veerlog::stats::theil_sen::theil_sen(&points, 0.95).unwrap();
/// assert!((line.slope - 35.0 / 12.0).abs() < 1e-9);
/// ```
#[must_use]
pub fn theil_sen(points: &[(f64, f64)], confidence: f64) -> Option<RobustLine> {
    let used = thin(points, MAX_POINTS);
    let mut slopes = pairwise_slopes(&used);
    slopes.sort_by(f64::total_cmp);
    let slope = median(&slopes)?;
    let x: Vec<f64> = used.iter().map(|p| p.0).collect();
    let y: Vec<f64> = used.iter().map(|p| p.1).collect();
    let half = normal_quantile(0.5 + 0.5 * confidence) * libm::sqrt(kendall_variance(&y));
    let count = slopes.len() as f64;
    let last = slopes.len() - 1;
    let low = libm::rint(0.5 * (count - half)) as i64 - 1;
    let high = libm::rint(0.5 * (count + half)) as i64;
    let interval = [slopes[low.max(0) as usize], slopes[(high.max(0) as usize).min(last)]];
    Some(RobustLine { slope, intercept: median(&y)? - slope * median(&x)?, interval, points_used: used.len() })
}

/// Median of the pairwise slopes alone. `None` without two different x.
#[must_use]
pub fn median_slope(points: &[(f64, f64)]) -> Option<f64> {
    median_in_place(&mut pairwise_slopes(&thin(points, MAX_POINTS)))
}

/// Interval of the Theil–Sen slope of a series by a moving-block bootstrap of its increments, percentiles.
/// A growing depth is a running sum: its increments, not its residuals, are near stationary, and blocks of
/// n^(1/3) of them keep their correlation. Seeded; the same on any number of threads. Measurement noise on top of the
/// running sum widens the interval (it is counted as growth), never narrows it.
/// `points` in order of x, strictly rising. `None` with under six points.
///
/// ```
/// use veerlog::stats::theil_sen::slope_interval_by_blocks;
/// // A depth that gains 1, 2 or 3 a frame.
/// let mut depth = 0.0;
/// let gain = |i: u32| f64::from(1 + i * i % 7 % 3);
/// let points: Vec<(f64, f64)> = (0..70).map(|i| { depth += gain(i); (f64::from(i), depth) }).collect();
/// let [low, high] = slope_interval_by_blocks(&points, 0.95, 499, 1).unwrap();
/// let mean = (0..70).map(gain).sum::<f64>() / 70.0;
/// assert!(low < mean && mean < high && high - low < 0.5);
/// ```
#[must_use]
pub fn slope_interval_by_blocks(
    points: &[(f64, f64)],
    confidence: f64,
    resamples: usize,
    seed: u64,
) -> Option<[f64; 2]> {
    let used = thin(points, MAX_POINTS_RESAMPLED);
    if used.len() <= MIN_INCREMENTS {
        return None;
    }
    let steps: Vec<(f64, f64)> = used.windows(2).map(|w| (w[1].0 - w[0].0, w[1].1 - w[0].1)).collect();
    let plan = BlockPlan::cube_root(steps.len());
    let slopes = replicates(resamples, seed, |rng| {
        let (mut x, mut y) = (0.0, 0.0);
        let mut path = vec![(x, y)];
        for i in plan.draw(rng) {
            x += steps[i].0;
            y += steps[i].1;
            path.push((x, y));
        }
        median_slope(&path)
    });
    percentile(&slopes, confidence)
}

/// Every pairwise slope between points of different x.
fn pairwise_slopes(points: &[(f64, f64)]) -> Vec<f64> {
    let mut slopes = Vec::with_capacity(points.len() * points.len() / 2);
    for (i, a) in points.iter().enumerate() {
        for b in &points[i + 1..] {
            let run = b.0 - a.0;
            if run.abs() > 0.0 {
                slopes.push((b.1 - a.1) / run);
            }
        }
    }
    slopes
}

/// At most `most` points, evenly chosen, first and last kept.
fn thin(points: &[(f64, f64)], most: usize) -> Vec<(f64, f64)> {
    let n = points.len();
    if n <= most {
        return points.to_vec();
    }
    (0..most).map(|i| points[i * (n - 1) / (most - 1)]).collect()
}

/// Variance of Kendall's S without a trend, corrected for ties in `values` (Kendall 1975, Rank Correlation Methods).
pub(crate) fn kendall_variance(values: &[f64]) -> f64 {
    let term = |t: f64| t * (t - 1.0) * (2.0 * t + 5.0);
    let order = sorted(values);
    let ties: f64 = order.chunk_by(|a, b| a.total_cmp(b).is_eq()).map(|run| term(run.len() as f64)).sum();
    (term(values.len() as f64) - ties) / 18.0
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;
    use rand::SeedableRng;
    use rand_chacha::ChaCha8Rng;
    use rand_distr::{Distribution, Exp1};

    #[test]
    fn a_long_series_is_thinned_and_says_so() {
        let points: Vec<(f64, f64)> = (0..5_000).map(|i| (f64::from(i), 0.5 * f64::from(i))).collect();
        let line = theil_sen(&points, 0.95).unwrap();
        assert_eq!(line.points_used, MAX_POINTS);
        assert_abs_diff_eq!(line.slope, 0.5, epsilon = 1e-12);
    }

    #[test]
    fn nothing_from_nothing() {
        assert_eq!(theil_sen(&[], 0.95), None);
        assert_eq!(theil_sen(&[(1.0, 1.0), (1.0, 2.0)], 0.95), None);
        assert_eq!(slope_interval_by_blocks(&[(0.0, 0.0), (1.0, 1.0)], 0.95, 99, 0), None);
    }

    /// Running sums of skewed, correlated steps of mean 1: the interval must hold the rate about as often as it says.
    #[test]
    fn block_interval_covers_the_rate_of_a_running_sum() {
        let (runs, mut covered) = (60, 0);
        for run in 0..runs {
            let mut rng = ChaCha8Rng::seed_from_u64(100 + run);
            let mut last = 1.0;
            let mut depth = 0.0;
            let points: Vec<(f64, f64)> = (0..120)
                .map(|i| {
                    let fresh: f64 = Exp1.sample(&mut rng);
                    last = 0.4 * last + 0.6 * fresh;
                    depth += last;
                    (f64::from(i), depth)
                })
                .collect();
            let [low, high] = slope_interval_by_blocks(&points, 0.95, 199, run).unwrap();
            covered += u64::from(low <= 1.0 && 1.0 <= high);
        }
        assert!(covered >= 50, "covered {covered} of {runs}");
    }
}
