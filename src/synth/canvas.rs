//! An oversampled plane of the still scene, read at any sub-pixel place, and Gaussian or disc blur.
//! Interpolation: cubic convolution with a = −½ (Keys 1981, IEEE Trans. ASSP 29, 1153–1160) on two samples a pixel, so that what a shifted
//! frame shows is the shifted scene, not a blur of it. Limit: scene detail finer than half a pixel is not carried.

use rayon::prelude::*;

/// Samples a pixel and direction.
pub const OVER: usize = 2;

/// A float plane of `rows` × `cols` samples, row-major.
#[derive(Debug, Clone, PartialEq)]
pub struct Plane {
    /// Number of columns.
    pub cols: usize,
    /// Number of rows.
    pub rows: usize,
    /// Samples.
    pub data: Vec<f32>,
}

impl Plane {
    /// A plane of one value.
    #[must_use]
    pub fn filled(cols: usize, rows: usize, value: f32) -> Self {
        Self { cols, rows, data: vec![value; cols * rows] }
    }

    /// Computes every sample from its column and row, in parallel.
    #[must_use]
    pub fn from_fn(cols: usize, rows: usize, sample: impl Fn(usize, usize) -> f32 + Sync) -> Self {
        let mut plane = Self::filled(cols, rows, 0.0);
        plane.data.par_chunks_mut(cols).enumerate().for_each(|(row, line)| {
            for (col, value) in line.iter_mut().enumerate() {
                *value = sample(col, row);
            }
        });
        plane
    }

    fn line(&self, row: isize) -> &[f32] {
        let row = row.clamp(0, self.rows as isize - 1) as usize;
        &self.data[row * self.cols..(row + 1) * self.cols]
    }

    /// The value at (x, y) in samples, by cubic convolution; outside, the border's values go on.
    #[must_use]
    pub fn cubic(&self, x: f64, y: f64) -> f32 {
        let (x0, y0) = (x.floor(), y.floor());
        let (wx, wy) = (keys(x - x0), keys(y - y0));
        let (col, row) = (x0 as isize - 1, y0 as isize - 1);
        let inside = col >= 0 && col + 4 <= self.cols as isize;
        let mut sum = 0.0;
        for (weight, j) in wy.iter().zip(row..) {
            let line = self.line(j);
            let across: f64 = if inside {
                let four = &line[col as usize..col as usize + 4];
                wx.iter().zip(four).map(|(w, v)| w * f64::from(*v)).sum()
            } else {
                let at = |i: isize| f64::from(line[i.clamp(0, self.cols as isize - 1) as usize]);
                wx.iter().zip(col..).map(|(w, i)| w * at(i)).sum()
            };
            sum += weight * across;
        }
        sum as f32
    }

    /// Blurred by a Gaussian of `sigma` samples (not at all below 0.05).
    #[must_use]
    pub fn gaussian(&self, sigma: f64) -> Self {
        if sigma < 0.05 {
            return self.clone();
        }
        let kernel = gaussian_kernel(sigma);
        let reach = (kernel.len() / 2) as isize;
        let across = Self::from_fn(self.cols, self.rows, |col, row| {
            let line = self.line(row as isize);
            let at = |i: isize| line[(col as isize + i).clamp(0, self.cols as isize - 1) as usize];
            kernel.iter().zip(-reach..=reach).map(|(w, i)| w * at(i)).sum()
        });
        Self::from_fn(self.cols, self.rows, |col, row| {
            kernel.iter().zip(-reach..=reach).map(|(w, i)| w * across.line(row as isize + i)[col]).sum()
        })
    }

    /// Blurred by a disc of `radius` samples, its rim softened over one sample.
    #[must_use]
    pub fn disc(&self, radius: f64) -> Self {
        let reach = radius.ceil() as isize;
        let mut stamp = Vec::new();
        for j in -reach..=reach {
            for i in -reach..=reach {
                let away = ((i * i + j * j) as f64).sqrt();
                let weight = (radius - away + 0.5).clamp(0.0, 1.0) as f32;
                if weight > 0.0 {
                    stamp.push((i, j, weight));
                }
            }
        }
        let total: f32 = stamp.iter().map(|s| s.2).sum();
        Self::from_fn(self.cols, self.rows, |col, row| {
            let sum: f32 = stamp
                .iter()
                .map(|&(i, j, w)| {
                    w * self.line(row as isize + j)[(col as isize + i).clamp(0, self.cols as isize - 1) as usize]
                })
                .sum();
            sum / total
        })
    }
}

/// Cubic-convolution weights of the four samples around a fraction `t` in [0, 1).
fn keys(t: f64) -> [f64; 4] {
    let (t2, t3) = (t * t, t * t * t);
    [-0.5 * t + t2 - 0.5 * t3, 1.0 - 2.5 * t2 + 1.5 * t3, 0.5 * t + 2.0 * t2 - 1.5 * t3, -0.5 * t2 + 0.5 * t3]
}

/// A normalised Gaussian out to four standard deviations.
fn gaussian_kernel(sigma: f64) -> Vec<f32> {
    let reach = (4.0 * sigma).ceil() as i32;
    let raw: Vec<f64> = (-reach..=reach).map(|i| libm::exp(-0.5 * f64::from(i * i) / (sigma * sigma))).collect();
    let total: f64 = raw.iter().sum();
    raw.iter().map(|w| (w / total) as f32).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn cubic_carries_straight_lines_and_quadratics() {
        // Keys's kernel with a = −½ reproduces polynomials up to the second degree.
        let plane = Plane::from_fn(20, 20, |c, r| (c * c) as f32 * 0.1 + r as f32);
        assert!((f64::from(plane.cubic(7.3, 9.6)) - (7.3 * 7.3 * 0.1 + 9.6)).abs() < 1e-4);
    }

    #[test]
    fn a_shifted_blurred_wave_stays_itself() {
        let wave = |x: f64| libm::sin(x / 3.0) as f32;
        let plane = Plane::from_fn(80, 8, |c, _| wave(c as f64));
        let worst =
            (20..60).map(|c| (plane.cubic(c as f64 + 0.37, 4.0) - wave(c as f64 + 0.37)).abs()).fold(0.0, f32::max);
        assert!(worst < 2e-3, "{worst}");
    }

    #[test]
    fn blurs_keep_the_sum_and_have_their_variance() {
        let mut dot = Plane::filled(61, 61, 0.0);
        dot.data[30 * 61 + 30] = 1.0;
        for (blurred, variance) in [(dot.gaussian(2.0), 4.0), (dot.disc(6.0), 9.0)] {
            let sum: f32 = blurred.data.iter().sum();
            assert!((sum - 1.0).abs() < 1e-4);
            let second: f64 =
                blurred.data.iter().enumerate().map(|(i, &v)| f64::from(v) * ((i % 61) as f64 - 30.0).powi(2)).sum();
            // A disc of radius r has variance r²/4 along x.
            assert!((second / variance - 1.0).abs() < 0.03, "{second} {variance}");
        }
    }
}
