//! A threshold for each pixel from the mean and spread around it.
//! Source: Sauvola & Pietikäinen (2000), Adaptive document image binarization, Pattern Recognition 33, 225–236:
//! T = m · (1 + k · (s/R − 1)), m the mean and s the population standard deviation of a square window.
//! Beyond the border the picture is mirrored without repeating the edge pixel. Limit: values must be finite.

use ndarray::{Array2, ArrayView2};

/// Settings of the local threshold.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Sauvola {
    /// Pixels from the middle of the window to its side: a window of 15 has 7.
    pub radius: usize,
    /// Weight of the spread, without unit; 0.2 to 0.5 in the source.
    pub k: f64,
    /// Largest spread expected, in the unit of the values; half of the range: 127.5 for 8 bits.
    pub range: f64,
}

impl Sauvola {
    /// Pixels of `values` above their own threshold.
    #[must_use]
    pub fn above(self, values: &Array2<f32>) -> Array2<bool> {
        let mut mask = Array2::from_elem(values.dim(), false);
        self.for_each_row(values.view(), |row, thresholds| {
            for (column, &threshold) in thresholds.iter().enumerate() {
                mask[[row, column]] = f64::from(values[[row, column]]) > threshold;
            }
        });
        mask
    }

    /// Calls `visit` with each row's number and its thresholds, from the top; no plane of thresholds is kept.
    pub fn for_each_row(self, values: ArrayView2<'_, f32>, mut visit: impl FnMut(usize, &[f64])) {
        let (rows, columns) = values.dim();
        let mut thresholds = vec![0.0; columns];
        for row in 0..rows {
            let sums = self.column_sums(values, row);
            for (column, threshold) in thresholds.iter_mut().enumerate() {
                let window = Moments::over(self.window(column, columns).map(|near| sums[near]));
                *threshold = self.threshold(window);
            }
            visit(row, &thresholds);
        }
    }

    fn column_sums(self, values: ArrayView2<'_, f32>, row: usize) -> Vec<Moments> {
        let mut sums = vec![Moments::default(); values.ncols()];
        for near in self.window(row, values.nrows()) {
            for (sum, &value) in sums.iter_mut().zip(values.row(near)) {
                let value = f64::from(value);
                *sum = sum.plus(Moments { count: 1.0, sum: value, squares: value * value });
            }
        }
        sums
    }

    /// The places of a window around `middle` in a row of `length`, mirrored at its ends.
    fn window(self, middle: usize, length: usize) -> impl Iterator<Item = usize> {
        let period = (2 * (length - 1)).max(1);
        let radius = self.radius.cast_signed();
        (-radius..=radius).map(move |step| {
            let place = (middle.cast_signed() + step).rem_euclid(period.cast_signed()).unsigned_abs();
            place.min(period - place).min(length - 1)
        })
    }

    fn threshold(self, window: Moments) -> f64 {
        let mean = window.sum / window.count;
        let variance = (window.squares / window.count - mean * mean).max(0.0);
        mean * (1.0 + self.k * (variance.sqrt() / self.range - 1.0))
    }
}

/// Count, sum and sum of squares of some values.
#[derive(Debug, Clone, Copy, Default)]
struct Moments {
    count: f64,
    sum: f64,
    squares: f64,
}

impl Moments {
    fn over(parts: impl Iterator<Item = Self>) -> Self {
        parts.fold(Self::default(), Self::plus)
    }

    fn plus(self, other: Self) -> Self {
        Self { count: self.count + other.count, sum: self.sum + other.sum, squares: self.squares + other.squares }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_border_is_mirrored_without_its_pixel() {
        let sauvola = Sauvola { radius: 3, k: 0.2, range: 1.0 };
        assert_eq!(sauvola.window(0, 5).collect::<Vec<_>>(), [3, 2, 1, 0, 1, 2, 3]);
        assert_eq!(sauvola.window(4, 5).collect::<Vec<_>>(), [1, 2, 3, 4, 3, 2, 1]);
        assert_eq!(sauvola.window(0, 1).collect::<Vec<_>>(), [0; 7]);
    }

    #[test]
    fn an_even_plane_is_above_its_threshold_and_an_empty_one_has_none() {
        let sauvola = Sauvola { radius: 2, k: 0.2, range: 1.0 };
        assert!(sauvola.above(&Array2::from_elem((4, 6), 0.5)).iter().all(|&on| on));
        assert_eq!(sauvola.above(&Array2::zeros((0, 0))).len(), 0);
    }
}
