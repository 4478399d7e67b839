//! Whole-plane helpers of the scene stage: blur, binning, order statistics.
//! Planes are `Array2<f32>` [row, col]; every sum runs in an order fixed by the plane's shape, so that results
//! do not depend on the number of threads.

use ndarray::Array2;
use rayon::prelude::*;

/// Makes the median absolute deviation estimate the standard deviation of normal data: 1 / Φ⁻¹(3/4).
/// Rousseeuw & Croux (1993), J. Am. Stat. Assoc. 88, 1273.
pub(crate) const MAD_TO_SD: f32 = 1.482_602_2;

/// Half-width of a sampled Gaussian in standard deviations; beyond it the weight is under 0.3 % of the peak.
const GAUSSIAN_REACH: f64 = 3.5;

/// Normalised samples of a Gaussian, `2·half + 1` of them.
pub(crate) fn gaussian_kernel(sigma: f64) -> Vec<f32> {
    let half = (GAUSSIAN_REACH * sigma).ceil().max(1.0) as i32;
    let weights: Vec<f64> = (-half..=half).map(|k| libm::exp(-0.5 * f64::from(k * k) / (sigma * sigma))).collect();
    let total: f64 = weights.iter().sum();
    weights.iter().map(|w| (w / total) as f32).collect()
}

/// The rows of a freshly made plane (standard layout), with their numbers, in parallel.
pub(crate) fn rows_mut<T: Send>(plane: &mut Array2<T>) -> impl IndexedParallelIterator<Item = (usize, &mut [T])> {
    let width = plane.ncols().max(1);
    plane.as_slice_mut().unwrap_or_default().par_chunks_mut(width).enumerate()
}

/// Correlates a plane with `down` along columns and `across` along rows (odd lengths); the border pixel is
/// repeated outside.
pub(crate) fn separable(plane: &Array2<f32>, across: &[f32], down: &[f32]) -> Array2<f32> {
    let (height, width) = plane.dim();
    let mut out = Array2::<f32>::zeros((height, width));
    let half_down = (down.len() / 2) as isize;
    let half_across = across.len() / 2;
    rows_mut(&mut out).for_each_init(
        || vec![0.0_f32; width + 2 * half_across],
        |padded, (y, row)| {
            let column_sum = &mut padded[half_across..half_across + width];
            column_sum.fill(0.0);
            for (k, &weight) in down.iter().enumerate() {
                let source = (y as isize + k as isize - half_down).clamp(0, height as isize - 1);
                for (sum, &value) in column_sum.iter_mut().zip(plane.row(source as usize)) {
                    *sum += weight * value;
                }
            }
            let (first, last) = (column_sum[0], column_sum[width - 1]);
            padded[..half_across].fill(first);
            padded[half_across + width..].fill(last);
            for (x, value) in row.iter_mut().enumerate() {
                *value = across.iter().zip(&padded[x..]).map(|(weight, v)| weight * v).sum();
            }
        },
    );
    out
}

/// Gaussian blur; `sigma` in px, 0 copies.
pub(crate) fn blur(plane: &Array2<f32>, sigma: f64) -> Array2<f32> {
    if sigma <= 0.0 {
        return plane.clone();
    }
    let kernel = gaussian_kernel(sigma);
    separable(plane, &kernel, &kernel)
}

/// Means of `factor` × `factor` blocks; a last incomplete block is left out.
pub(crate) fn bin(plane: &Array2<f32>, factor: usize) -> Array2<f32> {
    if factor == 1 {
        return plane.clone();
    }
    let (height, width) = (plane.nrows() / factor, plane.ncols() / factor);
    let mut out = Array2::<f32>::zeros((height, width));
    let scale = 1.0 / (factor * factor) as f32;
    rows_mut(&mut out).for_each(|(y, row)| {
        for source in y * factor..(y + 1) * factor {
            let values = plane.row(source);
            for (x, sum) in row.iter_mut().enumerate() {
                *sum += (x * factor..(x + 1) * factor).map(|i| values[i]).sum::<f32>();
            }
        }
        row.iter_mut().for_each(|sum| *sum *= scale);
    });
    out
}

/// Applies `f` to every pair of pixels of two planes of one shape.
pub(crate) fn combine(a: &Array2<f32>, b: &Array2<f32>, f: impl Fn(f32, f32) -> f32 + Sync) -> Array2<f32> {
    let mut out = a.as_standard_layout().to_owned();
    rows_mut(&mut out)
        .for_each(|(y, row)| row.iter_mut().zip(b.row(y)).for_each(|(value, &other)| *value = f(*value, other)));
    out
}

/// The `q` quantile (0..=1, nearest rank) of the finite values; `None` when there is none.
pub(crate) fn quantile(values: &mut Vec<f32>, q: f64) -> Option<f32> {
    values.retain(|v| v.is_finite());
    if values.is_empty() {
        return None;
    }
    let rank = ((values.len() - 1) as f64 * q).round() as usize;
    Some(*values.select_nth_unstable_by(rank, f32::total_cmp).1)
}

/// Median of the finite values.
pub(crate) fn median(values: &mut Vec<f32>) -> Option<f32> {
    quantile(values, 0.5)
}

/// Median and standard deviation by the median absolute deviation, of the finite values.
pub(crate) fn robust_spread(values: &mut Vec<f32>) -> Option<(f32, f32)> {
    let middle = median(values)?;
    for value in values.iter_mut() {
        *value = (*value - middle).abs();
    }
    median(values).map(|mad| (middle, MAD_TO_SD * mad))
}

/// At most about `most` values of a plane, evenly spread over it (every k-th in a fixed order).
pub(crate) fn sample(plane: &Array2<f32>, most: usize) -> Vec<f32> {
    // An odd stride walks through all columns of a plane of even width.
    let step = (plane.len() / most.max(1)).max(1) | 1;
    plane.iter().step_by(step).copied().collect()
}

/// Standard deviation of the pixel noise of one picture, from its own finest detail: the mask
/// [1 −2 1; −2 4 −2; 1 −2 1] is blind to anything locally linear (Immerkær 1996, Comput. Vis. Image Underst. 64,
/// 300), and its median absolute value to fine lines. Texture at the scale of a pixel is counted as noise.
pub(crate) fn own_noise(plane: &Array2<f32>) -> f32 {
    let mask = [1.0, -2.0, 1.0];
    let detail = separable(plane, &mask, &mask);
    let mut values: Vec<f32> = sample(&detail, 200_000).iter().map(|v| v.abs()).collect();
    // Sum of the squared weights is 36.
    median(&mut values).map_or(0.0, |m| MAD_TO_SD * m / 6.0)
}

/// Sum of products of two kernels laid centre on centre (odd lengths).
pub(crate) fn kernel_dot(a: &[f32], b: &[f32]) -> f64 {
    let (long, short) = if a.len() >= b.len() { (a, b) } else { (b, a) };
    let offset = (long.len() - short.len()) / 2;
    short.iter().zip(&long[offset..]).map(|(x, y)| f64::from(*x) * f64::from(*y)).sum()
}

/// Correlation of two kernels (odd lengths): what applying both in turn amounts to.
pub(crate) fn kernel_chain(a: &[f32], b: &[f32]) -> Vec<f32> {
    let mut out = vec![0.0; a.len() + b.len() - 1];
    for (i, x) in a.iter().enumerate() {
        for (j, y) in b.iter().enumerate() {
            out[i + j] += x * y;
        }
    }
    out
}
