//! Line evidence: how surely a thin line runs through a pixel, in standard deviations of bare ceramic.
//!
//! Method: second Gaussian derivative across the line (Steger 1998, IEEE Trans. Pattern Anal. Mach.
//! Intell. 20, 113–125) at two scales, averaged along the line over twelve orientations, normalised by
//! the noise's own standard deviation after the same filter.
//! Input: a plane in units of its pixel noise, positive on lines; 0 where nothing is known.
//! Limit: lines wider than about 8 px answer at their edges only.

use ndarray::Array2;
use rayon::prelude::*;

/// Standard deviations of the Gaussians, px: lines of about 2–3 px and of about 4–7 px.
pub const SCALES: [f32; 2] = [1.2, 2.2];
/// Half the length along which evidence is gathered, px.
const HALF_LENGTH: i32 = 5;
/// Orientations, evenly over 180°.
const ORIENTATIONS: usize = 12;
/// A pixel is looked at along all orientations when its own curvature exceeds this many sd.
const SCREEN_SD: f32 = 1.3;
/// Makes the MAD estimate the SD of normal data. Rousseeuw & Croux (1993), J. Am. Stat. Assoc. 88, 1273–1283.
const MAD_TO_SD: f32 = 1.482_602_2;

/// Evidence per pixel, [row, col].
#[derive(Debug, Clone)]
pub struct LineEvidence {
    /// Standard deviations above bare ceramic; 0 where not looked at or negative.
    pub z: Array2<f32>,
}

struct Hessian {
    xx: Array2<f32>,
    xy: Array2<f32>,
    yy: Array2<f32>,
    /// Standard deviation of a directional second derivative for unit white noise.
    sd: f32,
    /// Of its average along the line, for each orientation.
    sd_along: Vec<f32>,
}

/// Line evidence of `plane` at the pixels where `wanted` is true.
#[must_use]
pub fn line_evidence(plane: &Array2<f32>, wanted: &Array2<bool>) -> LineEvidence {
    let steps = orientation_steps();
    let scales: Vec<Hessian> = SCALES.iter().map(|&s| hessian(plane, s, wanted, &steps)).collect();
    let (rows, cols) = plane.dim();
    let lines: Vec<Vec<f32>> = (0..rows)
        .into_par_iter()
        .map(|row| {
            (0..cols)
                .map(|col| {
                    if !wanted[[row, col]] {
                        return 0.0;
                    }
                    scales.iter().fold(0.0f32, |best, h| best.max(h.along(row, col, &steps)))
                })
                .collect()
        })
        .collect();
    let flat: Vec<f32> = lines.into_iter().flatten().collect();
    LineEvidence { z: Array2::from_shape_vec((rows, cols), flat).unwrap_or_else(|_| Array2::zeros((rows, cols))) }
}

struct Orientation {
    /// Squares and product of the normal: nx², 2·nx·ny, ny².
    normal: [f32; 3],
    /// Offsets (row, col) along the line.
    offsets: Vec<[i32; 2]>,
}

fn orientation_steps() -> Vec<Orientation> {
    (0..ORIENTATIONS)
        .map(|i| {
            let angle = std::f64::consts::PI * i as f64 / ORIENTATIONS as f64;
            let (s, c) = (libm::sin(angle), libm::cos(angle));
            let normal = [(s * s) as f32, (-2.0 * s * c) as f32, (c * c) as f32];
            let offsets = (-HALF_LENGTH..=HALF_LENGTH)
                .map(|t| {
                    let t = f64::from(t);
                    [libm::round(t * s) as i32, libm::round(t * c) as i32]
                })
                .collect();
            Orientation { normal, offsets }
        })
        .collect()
}

impl Hessian {
    fn across(&self, row: usize, col: usize, normal: &[f32; 3]) -> f32 {
        -(normal[0] * self.xx[[row, col]] + normal[1] * self.xy[[row, col]] + normal[2] * self.yy[[row, col]])
    }

    /// The largest evidence over orientations, 0 when the pixel does not pass the screen.
    fn along(&self, row: usize, col: usize, steps: &[Orientation]) -> f32 {
        let (xx, xy, yy) = (self.xx[[row, col]], self.xy[[row, col]], self.yy[[row, col]]);
        let half = 0.5 * (xx - yy);
        let strongest = -(0.5 * (xx + yy) - (half * half + xy * xy).sqrt());
        if strongest < SCREEN_SD * self.sd {
            return 0.0;
        }
        let (rows, cols) = self.xx.dim();
        let mut best = 0.0f32;
        for (step, sd) in steps.iter().zip(&self.sd_along) {
            let mut sum = 0.0;
            for offset in &step.offsets {
                let (r, c) = (row as i32 + offset[0], col as i32 + offset[1]);
                if r >= 0 && c >= 0 && r < rows as i32 && c < cols as i32 {
                    sum += self.across(r as usize, c as usize, &step.normal);
                }
            }
            best = best.max(sum / (step.offsets.len() as f32 * sd));
        }
        best
    }
}

fn hessian(plane: &Array2<f32>, scale: f32, wanted: &Array2<bool>, steps: &[Orientation]) -> Hessian {
    let kernels = Kernels::new(scale);
    let smooth = rows_filtered(plane, &kernels.g0);
    let slope = rows_filtered(plane, &kernels.g1);
    let curve = rows_filtered(plane, &kernels.g2);
    let xx = columns_filtered(&curve, &kernels.g0);
    let xy = columns_filtered(&slope, &kernels.g1);
    let yy = columns_filtered(&smooth, &kernels.g2);
    let energy = |k: &[f32]| k.iter().map(|v| v * v).sum::<f32>();
    let theory = (energy(&kernels.g0) * energy(&kernels.g2)).sqrt();
    let sd = theory * excess(&xx, &yy, wanted, theory);
    let sd_along = steps.iter().map(|step| sd * step.along_factor(scale)).collect();
    Hessian { xx, xy, yy, sd, sd_along }
}

/// How much larger the filtered noise is than that of white unit noise, from the median absolute value
/// over a fixed sub-grid of the wanted pixels; 1 where there are too few.
fn excess(xx: &Array2<f32>, yy: &Array2<f32>, wanted: &Array2<bool>, theory: f32) -> f32 {
    let (rows, cols) = xx.dim();
    let step = ((rows * cols) as f64 / 40_000.0).sqrt().ceil().max(1.0) as usize;
    let mut values: Vec<f32> = Vec::new();
    for row in (0..rows).step_by(step) {
        for col in (0..cols).step_by(step) {
            if wanted[[row, col]] {
                values.push(xx[[row, col]].abs());
                values.push(yy[[row, col]].abs());
            }
        }
    }
    if values.len() < 200 {
        return 1.0;
    }
    let middle = values.len() / 2;
    let (_, median, _) = values.select_nth_unstable_by(middle, f32::total_cmp);
    (MAD_TO_SD * *median / theory).max(0.2)
}

impl Orientation {
    /// Standard deviation of the mean over the offsets relative to one sample. White noise after the filter is
    /// correlated as exp(−d²/4s²)·(1 − a²/s² + a⁴/12s⁴), d the distance of two samples and a its part across the line.
    fn along_factor(&self, scale: f32) -> f32 {
        let s2 = scale * scale;
        let (nx2, ny2) = (self.normal[0], self.normal[2]);
        let mut sum = 0.0;
        for p in &self.offsets {
            for q in &self.offsets {
                let (dy, dx) = ((p[0] - q[0]) as f32, (p[1] - q[1]) as f32);
                let d2 = dx * dx + dy * dy;
                let a2 = nx2 * dx * dx + self.normal[1] * dx * dy + ny2 * dy * dy;
                sum += libm::expf(-d2 / (4.0 * s2)) * (1.0 - a2 / s2 + a2 * a2 / (12.0 * s2 * s2));
            }
        }
        sum.max(0.0).sqrt() / self.offsets.len() as f32
    }
}

struct Kernels {
    g0: Vec<f32>,
    g1: Vec<f32>,
    g2: Vec<f32>,
}

impl Kernels {
    fn new(scale: f32) -> Self {
        let radius = (3.5 * scale).ceil() as i32;
        let s2 = scale * scale;
        let gauss: Vec<f32> = (-radius..=radius).map(|i| libm::expf(-(i * i) as f32 / (2.0 * s2))).collect();
        let total: f32 = gauss.iter().sum();
        let g0: Vec<f32> = gauss.iter().map(|v| v / total).collect();
        let at = |i: usize| (i as i32 - radius) as f32;
        let g1 = g0.iter().enumerate().map(|(i, v)| at(i) / s2 * v).collect();
        let mut g2: Vec<f32> = g0.iter().enumerate().map(|(i, v)| (at(i) * at(i) / s2 - 1.0) / s2 * v).collect();
        let mean = g2.iter().sum::<f32>() / g2.len() as f32;
        g2.iter_mut().for_each(|v| *v -= mean);
        Self { g0, g1, g2 }
    }
}

/// Filters along rows; beyond the border nothing is known, so 0.
fn rows_filtered(plane: &Array2<f32>, kernel: &[f32]) -> Array2<f32> {
    let (rows, cols) = plane.dim();
    let radius = kernel.len() / 2;
    let mut out = Array2::<f32>::zeros((rows, cols));
    out.axis_iter_mut(ndarray::Axis(0)).into_par_iter().enumerate().for_each(|(row, mut line)| {
        let mut padded = vec![0.0f32; cols + 2 * radius];
        padded[radius..radius + cols].iter_mut().zip(plane.row(row)).for_each(|(a, b)| *a = *b);
        for (col, value) in line.iter_mut().enumerate() {
            *value = padded[col..col + kernel.len()].iter().zip(kernel).map(|(a, b)| a * b).sum();
        }
    });
    out
}

/// Filters along columns; beyond the border 0.
fn columns_filtered(plane: &Array2<f32>, kernel: &[f32]) -> Array2<f32> {
    let (rows, cols) = plane.dim();
    let radius = kernel.len() / 2;
    let mut out = Array2::<f32>::zeros((rows, cols));
    out.axis_iter_mut(ndarray::Axis(0)).into_par_iter().enumerate().for_each(|(row, mut line)| {
        for (k, weight) in kernel.iter().enumerate() {
            if let Some(source) = (row + k).checked_sub(radius).filter(|&r| r < rows) {
                line.iter_mut().zip(plane.row(source)).for_each(|(a, b)| *a += weight * b);
            }
        }
    });
    out
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::{RngExt, SeedableRng};

    fn noise(rows: usize, cols: usize, seed: u64) -> Array2<f32> {
        let mut rng = rand_chacha::ChaCha8Rng::seed_from_u64(seed);
        Array2::from_shape_fn((rows, cols), |_| {
            let sum: f32 = (0..12).map(|_| rng.random::<f32>()).sum();
            sum - 6.0
        })
    }

    #[test]
    fn bare_noise_stays_low() {
        for seed in 0..4 {
            let plane = noise(200, 200, seed);
            let z = line_evidence(&plane, &Array2::from_elem((200, 200), true)).z;
            let top = z.iter().fold(0.0f32, |a, &b| a.max(b));
            assert!(top < 5.5, "{top}");
        }
    }

    #[test]
    fn a_faint_line_at_any_angle_is_seen() {
        for degrees in [0.0f64, 20.0, 45.0, 77.0, 90.0, 130.0] {
            let (s, c) = degrees.to_radians().sin_cos();
            let mut plane = noise(100, 100, 3);
            for ((row, col), v) in plane.indexed_iter_mut() {
                let off = -(col as f64 - 50.0) * s + (row as f64 - 50.0) * c;
                if off.abs() <= 1.5 {
                    *v += 1.5;
                }
            }
            let z = line_evidence(&plane, &Array2::from_elem((100, 100), true)).z;
            assert!(z[[50, 50]] > 6.0, "{degrees}: {}", z[[50, 50]]);
        }
    }
}
