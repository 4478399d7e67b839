//! Resampling: seeded replicates, percentile, BCa and studentised intervals, moving blocks.
//! Sources: Efron & Tibshirani (1993), An Introduction to the Bootstrap (percentile ch. 13, BCa ch. 14, studentised ch. 12);
//! Künsch (1989) for blocks. Every replicate has its own stream of one seeded generator, so that the result is the same on
//! one thread or many. Limit: no interval can say more than the sample holds; below about 10 units prefer a t interval.

use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rayon::prelude::*;

use super::distributions::{normal_cdf, normal_quantile};
use super::order::{mean, quantile_of_sorted, sorted, variance};

/// The generator of replicate `index` under `seed`.
#[must_use]
pub fn stream(seed: u64, index: u64) -> ChaCha8Rng {
    let mut rng = ChaCha8Rng::seed_from_u64(seed);
    rng.set_stream(index);
    rng
}

/// `count` values of `statistic`, replicate i drawing from its own stream; replicates for which it is `None` are left out.
/// Order is that of the replicates whatever the number of threads.
pub fn replicates<T: Send>(count: usize, seed: u64, statistic: impl Fn(&mut ChaCha8Rng) -> Option<T> + Sync) -> Vec<T> {
    let all: Vec<Option<T>> = (0..count as u64).into_par_iter().map(|i| statistic(&mut stream(seed, i))).collect();
    all.into_iter().flatten().collect()
}

/// `n` items of `sample` drawn with replacement, as many as it holds.
pub fn resample<T: Copy>(sample: &[T], rng: &mut ChaCha8Rng) -> Vec<T> {
    (0..sample.len()).map(|_| sample[rng.random_range(0..sample.len())]).collect()
}

/// Percentile interval of bootstrap replicates. `None` under two replicates.
#[must_use]
pub fn percentile(replicates: &[f64], confidence: f64) -> Option<[f64; 2]> {
    if replicates.len() < 2 {
        return None;
    }
    let order = sorted(replicates);
    let tail = 0.5 * (1.0 - confidence);
    Some([quantile_of_sorted(&order, tail)?, quantile_of_sorted(&order, 1.0 - tail)?])
}

/// Bias-corrected and accelerated interval: `estimate` from the whole sample, `replicates` from resamples, `left_out` the
/// statistic with each unit left out (for the acceleration). `None` under two replicates or two units, or when the estimate
/// lies beyond every replicate (the correction is then infinite).
#[must_use]
pub fn bca(estimate: f64, replicates: &[f64], left_out: &[f64], confidence: f64) -> Option<[f64; 2]> {
    if replicates.len() < 2 {
        return None;
    }
    let acceleration = acceleration(left_out)?;
    let below = replicates.iter().filter(|r| **r < estimate).count() as f64 / replicates.len() as f64;
    let bias = normal_quantile(below);
    if !bias.is_finite() {
        return None;
    }
    let order = sorted(replicates);
    let end = |p: f64| {
        let z = bias + normal_quantile(p);
        quantile_of_sorted(&order, normal_cdf(bias + z / (1.0 - acceleration * z)))
    };
    let tail = 0.5 * (1.0 - confidence);
    Some([end(tail)?, end(1.0 - tail)?])
}

/// Acceleration from the leave-one-out values: Σd³/(6(Σd²)^1.5), d = mean − value. 0 when all are equal; `None` under two.
#[must_use]
pub fn acceleration(left_out: &[f64]) -> Option<f64> {
    let centre = mean(left_out).filter(|_| left_out.len() > 1)?;
    let (mut squares, mut cubes) = (0.0, 0.0);
    for value in left_out {
        let d = centre - value;
        squares += d * d;
        cubes += d * d * d;
    }
    Some(if squares > 0.0 { cubes / (6.0 * squares * libm::sqrt(squares)) } else { 0.0 })
}

/// Jackknife standard error from the leave-one-out values. `None` under two.
#[must_use]
pub fn jackknife_se(left_out: &[f64]) -> Option<f64> {
    let n = left_out.len() as f64;
    Some(libm::sqrt((n - 1.0) * (n - 1.0) / n * variance(left_out)?))
}

/// The statistic with each unit left out in turn; values for which it is `None` are left out of the result.
pub fn leave_one_out<T: Copy>(sample: &[T], statistic: impl Fn(&[T]) -> Option<f64>) -> Vec<f64> {
    (0..sample.len())
        .filter_map(|skip| {
            let rest: Vec<T> = sample.iter().enumerate().filter(|(i, _)| *i != skip).map(|(_, v)| *v).collect();
            statistic(&rest)
        })
        .collect()
}

/// Studentised interval: `replicates` are (value, standard error) of resamples; resamples with no error are left out.
/// `None` under two usable replicates.
#[must_use]
pub fn studentised(estimate: f64, se: f64, replicates: &[(f64, f64)], confidence: f64) -> Option<[f64; 2]> {
    let pivots: Vec<f64> =
        replicates.iter().filter(|(_, s)| *s > 0.0).map(|(value, s)| (value - estimate) / s).collect();
    let [low, high] = percentile(&pivots, confidence)?;
    Some([estimate - high * se, estimate - low * se])
}

/// How a series of `len` items is redrawn in overlapping blocks.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct BlockPlan {
    /// Items in the series.
    pub len: usize,
    /// Items in a block, 1 to `len`.
    pub block: usize,
}

impl BlockPlan {
    /// Blocks of n^(1/3), rounded up: the order at which the variance of a mean is estimated best (Künsch 1989).
    #[must_use]
    pub fn cube_root(len: usize) -> Self {
        Self { len, block: (libm::cbrt(len as f64).ceil() as usize).clamp(1, len.max(1)) }
    }

    /// Indices of a redrawn series: blocks from random starts, wrapping at the end so that every item is as likely.
    pub fn draw(&self, rng: &mut ChaCha8Rng) -> Vec<usize> {
        let mut indices = Vec::with_capacity(self.len + self.block);
        while indices.len() < self.len {
            let start = rng.random_range(0..self.len);
            indices.extend((0..self.block).map(|i| (start + i) % self.len));
        }
        indices.truncate(self.len);
        indices
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    #[test]
    fn replicates_do_not_depend_on_threads() {
        let draw = |rng: &mut ChaCha8Rng| Some(rng.random::<f64>());
        let many = replicates(64, 9, draw);
        let pool = rayon::ThreadPoolBuilder::new().num_threads(1).build().unwrap();
        let one = pool.install(|| replicates(64, 9, draw));
        assert_eq!(
            many.iter().map(|v| v.to_bits()).collect::<Vec<_>>(),
            one.iter().map(|v| v.to_bits()).collect::<Vec<_>>()
        );
    }

    #[test]
    fn blocks_are_runs_of_neighbours_and_every_item_is_as_likely() {
        let plan = BlockPlan { len: 10, block: 3 };
        let mut seen = [0_u32; 10];
        for i in 0..3_000 {
            let drawn = plan.draw(&mut stream(5, i));
            assert_eq!(drawn.len(), 10);
            assert_eq!((drawn[0] + 1) % 10, drawn[1]);
            for d in drawn {
                seen[d] += 1;
            }
        }
        for count in seen {
            assert!((2_700..3_300).contains(&count), "{seen:?}");
        }
    }

    #[test]
    fn a_symmetric_case_needs_no_correction() {
        let replicates: Vec<f64> = (0..1_001).map(|i| f64::from(i) - 500.0).collect();
        let plain = percentile(&replicates, 0.9).unwrap();
        let corrected = bca(0.0, &replicates, &[-1.0, 0.0, 1.0], 0.9).unwrap();
        assert_abs_diff_eq!(plain[0], corrected[0], epsilon = 3.0);
        assert_abs_diff_eq!(plain[1], corrected[1], epsilon = 3.0);
    }

    #[test]
    fn too_little_gives_nothing() {
        assert_eq!(percentile(&[1.0], 0.95), None);
        assert_eq!(acceleration(&[1.0]), None);
        assert_eq!(studentised(0.0, 1.0, &[(0.0, 0.0)], 0.95), None);
        assert_eq!(bca(9.0, &[1.0, 2.0], &[1.0, 2.0], 0.95), None);
    }
}
