//! How far a pixel without metal strays from the reference.
//! Method: variance against grey level, pooled over the bare frames' residuals (photon-transfer manner; EMVA Standard
//! 1288), plus (gradient × registration error)², the error measured on the steepest pixels. Robust throughout: median of squares.
//! Limit: noise that depends on the place alone (a hot row) is not told from the rest.

use ndarray::Array2;

use super::plane::{combine, quantile, sample};

/// Median of the square of a standard normal variable, Φ⁻¹(3/4)².
const MEDIAN_SQUARE: f32 = 0.454_936;
/// Variance of rounding to whole grey levels, grey levels².
const ROUNDING: f32 = 1.0 / 12.0;
/// Grey-level classes, each with the same number of pixels.
const CLASSES: usize = 16;
/// Least registration error assumed, px: what a good frame reaches.
const LEAST_MISPLACEMENT: f32 = 0.03;
/// Pixels looked at per frame.
const LOOKED_AT: usize = 100_000;

/// One look at a pixel of a bare frame.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Look {
    /// Grey level of the reference.
    pub(crate) grey: f32,
    /// Gradient magnitude of the reference, grey levels per px.
    pub(crate) slope: f32,
    /// Squared residual, grey levels², already scaled to the variance of a new frame's recorded pixel.
    pub(crate) square: f32,
}

/// Variance of a pixel by grey level and slope.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct NoiseModel {
    /// (grey, variance), ascending.
    by_grey: Vec<(f32, f32)>,
    /// Registration error, px.
    misplacement: f32,
}

impl NoiseModel {
    /// The same noise everywhere, grey levels.
    pub(crate) fn even(sd: f32) -> Self {
        Self { by_grey: vec![(0.0, (sd * sd).max(ROUNDING))], misplacement: LEAST_MISPLACEMENT }
    }

    /// Measures the model from looks at bare frames.
    pub(crate) fn measure(looks: &mut [Look]) -> Self {
        let mut slopes: Vec<f32> = looks.iter().map(|l| l.slope).collect();
        let Some(steep) = quantile(&mut slopes, 0.5) else {
            return Self::even(1.0);
        };
        looks.sort_unstable_by(|a, b| a.grey.total_cmp(&b.grey));
        let flat: Vec<Look> = looks.iter().filter(|l| l.slope <= steep).copied().collect();
        let by_grey = flat.chunks(flat.len().div_ceil(CLASSES).max(1)).filter_map(class).collect();
        let mut model = Self { by_grey, misplacement: 0.0 };
        looks.sort_unstable_by(|a, b| a.slope.total_cmp(&b.slope));
        model.misplacement = model.measured_misplacement(looks).max(LEAST_MISPLACEMENT);
        model
    }

    /// Least-squares slope through the origin of the variance in excess of the grey level's, against slope², over the
    /// steeper half in classes.
    fn measured_misplacement(&self, by_slope: &[Look]) -> f32 {
        let upper = &by_slope[by_slope.len() / 2..];
        let (mut top, mut bottom) = (0.0, 0.0);
        for looks in upper.chunks(upper.len().div_ceil(CLASSES).max(1)) {
            let mut excess: Vec<f32> = looks.iter().map(|l| l.square / self.flat_variance(l.grey)).collect();
            let base: f32 = looks.iter().map(|l| self.flat_variance(l.grey)).sum::<f32>() / looks.len() as f32;
            let square = looks.iter().map(|l| l.slope * l.slope).sum::<f32>() / looks.len() as f32;
            let Some(middle) = quantile(&mut excess, 0.5) else {
                continue;
            };
            top += square * base * (middle / MEDIAN_SQUARE - 1.0);
            bottom += square * square;
        }
        if bottom > 0.0 { (top / bottom).max(0.0).sqrt() } else { 0.0 }
    }

    /// Variance at a grey level on flat ground: linear between classes, flat beyond them.
    fn flat_variance(&self, grey: f32) -> f32 {
        let after = self.by_grey.partition_point(|&(g, _)| g < grey);
        match (after.checked_sub(1).and_then(|i| self.by_grey.get(i)), self.by_grey.get(after)) {
            (Some(a), Some(b)) => a.1 + (b.1 - a.1) * (grey - a.0) / (b.0 - a.0).max(f32::EPSILON),
            (Some(end), None) | (None, Some(end)) => end.1,
            (None, None) => 1.0,
        }
    }

    /// Standard deviation of each pixel, grey levels.
    pub(crate) fn sd(&self, reference: &Array2<f32>, slope: &Array2<f32>) -> Array2<f32> {
        combine(reference, slope, |grey, slope| (self.flat_variance(grey) + (self.misplacement * slope).powi(2)).sqrt())
    }
}

fn class(looks: &[Look]) -> Option<(f32, f32)> {
    let mut squares: Vec<f32> = looks.iter().map(|l| l.square).collect();
    let middle = quantile(&mut squares, 0.5)?;
    Some((looks[looks.len() / 2].grey, (middle / MEDIAN_SQUARE).max(ROUNDING)))
}

/// Looks at one bare frame: `residual` in grey levels (NaN where not covered), scaled by `to_new_frame`.
pub(crate) fn looks(
    reference: &Array2<f32>,
    slope: &Array2<f32>,
    residual: &Array2<f32>,
    to_new_frame: f32,
) -> Vec<Look> {
    let columns = [reference, slope, residual].map(|plane| sample(plane, LOOKED_AT));
    (0..columns[2].len())
        .filter(|&i| columns[2][i].is_finite())
        .map(|i| Look { grey: columns[0][i], slope: columns[1][i], square: (columns[2][i] * to_new_frame).powi(2) })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::{RngExt, SeedableRng};
    use rand_chacha::ChaCha8Rng;

    #[test]
    fn grey_dependence_and_misplacement_are_recovered() {
        let mut rng = ChaCha8Rng::seed_from_u64(5);
        let normal = rand_distr::StandardNormal;
        let mut looks: Vec<Look> = (0..60_000)
            .map(|_| {
                let grey = rng.random_range(40.0..200.0_f32);
                let slope = rng.random_range(0.0..20.0_f32);
                let sd = (1.0 + 0.05 * grey + (0.2 * slope).powi(2)).sqrt();
                let draw: f32 = rng.sample(normal);
                Look { grey, slope, square: (sd * draw).powi(2) }
            })
            .collect();
        let model = NoiseModel::measure(&mut looks);
        assert!((model.misplacement - 0.2).abs() < 0.03, "{}", model.misplacement);
        // Flat ground holds slopes up to 10: half of the mean excess of 1.3 remains in the class.
        assert!(model.flat_variance(180.0) - model.flat_variance(60.0) > 4.0);
    }
}
