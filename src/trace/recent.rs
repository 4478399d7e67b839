//! The last few corrected frames: the bounded window from which arrivals are decided.
//!
//! Method: a pixel's value is the median of its last three frames, so that one bad frame or a speck
//! that passes through counts for nothing. Memory: `capacity` planes, whatever the length of the run.

use std::collections::VecDeque;

use ndarray::{Array2, Zip};

/// Frames over which the median is taken.
const MEDIAN_OF: usize = 3;
/// Standard deviation of the median of three normal values relative to one: sqrt(1 − √3/π).
/// Order statistics of the normal distribution; Kendall & Stuart, The Advanced Theory of Statistics, vol. 1 (from memory).
const MEDIAN_OF_THREE_SD: f32 = 0.669_87;

/// One corrected frame.
#[derive(Debug, Clone)]
pub struct Corrected {
    /// Index over all files.
    pub frame: usize,
    /// Fraction by which the frame differs from the bare cell, positive on filaments, NaN where not covered.
    pub residual: Array2<f32>,
    /// This frame's noise relative to the scene's ordinary noise.
    pub noise_factor: f32,
}

/// A window of the latest frames, oldest first.
#[derive(Debug)]
pub struct Recent {
    frames: VecDeque<Corrected>,
    capacity: usize,
}

impl Recent {
    /// Holds at most `capacity` frames (at least one).
    #[must_use]
    pub fn new(capacity: usize) -> Self {
        Self { frames: VecDeque::new(), capacity: capacity.max(1) }
    }

    /// Takes in the newest frame and lets go of the oldest.
    pub fn push(&mut self, frame: Corrected) {
        if self.frames.len() == self.capacity {
            self.frames.pop_front();
        }
        self.frames.push_back(frame);
    }

    /// The frames held, oldest first.
    #[must_use]
    pub fn frames(&self) -> &VecDeque<Corrected> {
        &self.frames
    }

    /// The median of the last three frames and its standard deviation relative to one ordinary frame.
    /// With fewer frames it is their mean. A pixel is NaN when fewer than two of three are known.
    #[must_use]
    pub fn median(&self) -> Option<(Array2<f32>, f32)> {
        let last: Vec<&Corrected> = self.frames.iter().rev().take(MEDIAN_OF).collect();
        match last[..] {
            [] => None,
            [only] => Some((only.residual.clone(), only.noise_factor)),
            [a, b] => {
                let mean = Zip::from(&a.residual).and(&b.residual).par_map_collect(|x, y| 0.5 * (x + y));
                let sd = 0.5 * (a.noise_factor.powi(2) + b.noise_factor.powi(2)).sqrt();
                Some((mean, sd))
            }
            [a, b, c, ..] => {
                let middle = Zip::from(&a.residual)
                    .and(&b.residual)
                    .and(&c.residual)
                    .par_map_collect(|&x, &y, &z| median_of_three(x, y, z));
                let power = a.noise_factor.powi(2) + b.noise_factor.powi(2) + c.noise_factor.powi(2);
                Some((middle, MEDIAN_OF_THREE_SD * (power / 3.0).sqrt()))
            }
        }
    }
}

fn median_of_three(a: f32, b: f32, c: f32) -> f32 {
    match (a.is_nan(), b.is_nan(), c.is_nan()) {
        (false, false, false) => a.min(b).max(a.max(b).min(c)),
        (true, false, false) => b.min(c),
        (false, true, false) => a.min(c),
        (false, false, true) => a.min(b),
        _ => f32::NAN,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn flat(frame: usize, value: f32) -> Corrected {
        Corrected { frame, residual: Array2::from_elem((2, 2), value), noise_factor: 1.0 }
    }

    #[test]
    fn one_bad_frame_counts_for_nothing() {
        let mut recent = Recent::new(4);
        for (i, v) in [0.1, 9.0, 0.2].into_iter().enumerate() {
            recent.push(flat(i, v));
        }
        let (median, _) = recent.median().unwrap();
        assert!((median[[0, 0]] - 0.2).abs() < 1e-6);
    }

    #[test]
    fn the_window_is_bounded() {
        let mut recent = Recent::new(3);
        (0..10).for_each(|i| recent.push(flat(i, 0.0)));
        assert_eq!(recent.frames().iter().map(|f| f.frame).collect::<Vec<_>>(), [7, 8, 9]);
    }

    #[test]
    fn unknown_pixels_need_two_witnesses() {
        assert!(median_of_three(f32::NAN, f32::NAN, 1.0).is_nan());
        assert!((median_of_three(f32::NAN, 2.0, 1.0) - 1.0).abs() < 1e-6);
    }
}
