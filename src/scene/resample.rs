//! Where a pixel of the reference lies in a frame, and the frame's value there.
//! Method: six-point windowed sinc (Lanczos, a = 3; Duchon 1979, J. Appl. Meteorol. 18, 1016), weights normalised to sum
//! to 1. Values between pixels need three pixels on each side; at the border the last pixel is repeated.

use ndarray::Array2;
use rayon::prelude::*;

use super::plane::rows_mut;

/// Points of the interpolating kernel along each axis.
const TAPS: usize = 6;
/// Steps of the weight table per pixel; a step moves a value by less than 0.2 % of the local slope per px.
const STEPS: usize = 512;
/// How far outside the outermost pixel centres a position still counts as seen, px (its own half pixel).
const EDGE: f64 = 0.5;

/// How the scene of a frame lies against the reference: turned about the picture's centre, then shifted.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub(crate) struct Motion {
    /// Shift of the scene, px (x right, y down).
    pub(crate) shift: [f64; 2],
    /// Turn of the scene, radians, anticlockwise as displayed.
    pub(crate) turn: f64,
}

impl Motion {
    /// Position in the frame of a reference position given from the picture's centre.
    pub(crate) fn apply(&self, x: f64, y: f64) -> (f64, f64) {
        let (sin, cos) = (libm::sin(self.turn), libm::cos(self.turn));
        (cos * x + sin * y + self.shift[0], -sin * x + cos * y + self.shift[1])
    }

    /// Whether there is any turn to account for.
    pub(crate) fn turns(&self) -> bool {
        self.turn.abs() > 0.0
    }
}

/// Centre of a picture, px.
pub(crate) fn centre(shape: (usize, usize)) -> (f64, f64) {
    ((shape.1 as f64 - 1.0) / 2.0, (shape.0 as f64 - 1.0) / 2.0)
}

/// Table of interpolation weights.
pub(crate) struct Interpolator {
    table: Vec<[f32; TAPS]>,
}

impl Interpolator {
    /// Fills the table.
    pub(crate) fn new() -> Self {
        Self { table: (0..=STEPS).map(|i| weights(i as f64 / STEPS as f64)).collect() }
    }

    /// Whole pixel and weights of a position along one axis; `None` when it lies outside `length` pixels.
    fn locate(&self, position: f64, length: usize) -> Option<(isize, &[f32; TAPS])> {
        if !(position >= -EDGE && position <= length as f64 - 1.0 + EDGE) {
            return None;
        }
        let whole = position.floor();
        let step = ((position - whole) * STEPS as f64).round() as usize;
        Some((whole as isize, &self.table[step]))
    }

    /// The frame's value at a position (px); `None` outside the picture.
    pub(crate) fn at(&self, frame: &Array2<f32>, x: f64, y: f64) -> Option<f32> {
        let (height, width) = frame.dim();
        let (x0, across) = self.locate(x, width)?;
        let (y0, down) = self.locate(y, height)?;
        let inside = x0 >= 2 && y0 >= 2 && x0 + 3 < width as isize && y0 + 3 < height as isize;
        let mut sum = 0.0;
        if let (true, Some(values)) = (inside, frame.as_slice()) {
            let mut start = (y0 - 2) as usize * width + (x0 - 2) as usize;
            for weight in down {
                let row = &values[start..start + TAPS];
                sum += weight * row.iter().zip(across).map(|(v, w)| v * w).sum::<f32>();
                start += width;
            }
            return Some(sum);
        }
        for (k, weight_down) in down.iter().enumerate() {
            let row = (y0 + k as isize - 2).clamp(0, height as isize - 1) as usize;
            for (j, weight_across) in across.iter().enumerate() {
                let col = (x0 + j as isize - 2).clamp(0, width as isize - 1) as usize;
                sum += weight_down * weight_across * frame[[row, col]];
            }
        }
        Some(sum)
    }

    /// The frame in reference coordinates; NaN where it does not reach.
    pub(crate) fn resample(&self, frame: &Array2<f32>, motion: &Motion) -> Array2<f32> {
        let mut out = Array2::<f32>::from_elem(frame.dim(), f32::NAN);
        let (cx, cy) = centre(frame.dim());
        let shift_only = !motion.turns();
        rows_mut(&mut out).for_each_init(Vec::new, |buffer, (y, row)| {
            if shift_only {
                self.shifted_row(frame, y as f64 + motion.shift[1], motion.shift[0], buffer, row);
                return;
            }
            for (x, value) in row.iter_mut().enumerate() {
                let (fx, fy) = motion.apply(x as f64 - cx, y as f64 - cy);
                *value = self.at(frame, fx + cx, fy + cy).unwrap_or(f32::NAN);
            }
        });
        out
    }

    /// One row of a purely shifted frame: down the columns first, then along the row.
    fn shifted_row(&self, frame: &Array2<f32>, y: f64, shift_x: f64, buffer: &mut Vec<f32>, out: &mut [f32]) {
        let (height, width) = frame.dim();
        let Some((y0, down)) = self.locate(y, height) else {
            return;
        };
        buffer.clear();
        buffer.resize(width, 0.0);
        for (k, &weight) in down.iter().enumerate() {
            let row = (y0 + k as isize - 2).clamp(0, height as isize - 1) as usize;
            for (sum, &value) in buffer.iter_mut().zip(frame.row(row)) {
                *sum += weight * value;
            }
        }
        let whole = shift_x.floor();
        let across = &self.table[((shift_x - whole) * STEPS as f64).round() as usize];
        for (x, value) in out.iter_mut().enumerate() {
            let position = x as f64 + shift_x;
            if position < -EDGE || position > width as f64 - 1.0 + EDGE {
                continue;
            }
            let x0 = x as isize + whole as isize - 2;
            *value = if x0 >= 0 && x0 + TAPS as isize <= width as isize {
                buffer[x0 as usize..x0 as usize + TAPS].iter().zip(across).map(|(v, w)| v * w).sum()
            } else {
                let clamped = |j: usize| buffer[(x0 + j as isize).clamp(0, width as isize - 1) as usize];
                across.iter().enumerate().map(|(j, w)| w * clamped(j)).sum()
            };
        }
    }

    /// Standard deviation that white noise of 1 has left after resampling by this motion (a turn is taken at the
    /// average over all fractions).
    pub(crate) fn noise_gain(&self, motion: &Motion) -> f32 {
        let energy = |weights: &[f32; TAPS]| weights.iter().map(|w| w * w).sum::<f32>();
        let along = |shift: f64| energy(&self.table[((shift - shift.floor()) * STEPS as f64).round() as usize]);
        if motion.turns() {
            self.table[..STEPS].iter().map(energy).sum::<f32>() / STEPS as f32
        } else {
            (along(motion.shift[0]) * along(motion.shift[1])).sqrt()
        }
    }
}

/// Weights of the six pixels around a position that lies `fraction` past the third of them.
fn weights(fraction: f64) -> [f32; TAPS] {
    let kernel = |x: f64| {
        if x.abs() < 1e-9 {
            return 1.0;
        }
        let px = std::f64::consts::PI * x;
        3.0 * libm::sin(px) * libm::sin(px / 3.0) / (px * px)
    };
    let raw: [f64; TAPS] = std::array::from_fn(|k| {
        let distance = fraction - (k as f64 - 2.0);
        if distance.abs() < 3.0 { kernel(distance) } else { 0.0 }
    });
    let total: f64 = raw.iter().sum();
    raw.map(|w| (w / total) as f32)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn waves(height: usize, width: usize, dx: f64, dy: f64) -> Array2<f32> {
        Array2::from_shape_fn((height, width), |(y, x)| {
            let (x, y) = (x as f64 - dx, y as f64 - dy);
            (100.0 + 20.0 * (0.8 * x + 0.3 * y).sin() + 10.0 * (0.2 * x - 0.9 * y).cos()) as f32
        })
    }

    #[test]
    fn shifting_back_restores_a_smooth_picture() {
        let motion = Motion { shift: [3.37, -2.71], turn: 0.0 };
        let moved = waves(60, 80, 3.37, -2.71);
        let restored = Interpolator::new().resample(&moved, &motion);
        let truth = waves(60, 80, 0.0, 0.0);
        for y in 6..54 {
            for x in 6..70 {
                assert!((restored[[y, x]] - truth[[y, x]]).abs() < 0.5, "{y} {x}");
            }
        }
        assert!(restored[[0, 10]].is_nan() && restored[[10, 79]].is_nan());
    }

    #[test]
    fn a_turn_is_anticlockwise_as_displayed() {
        // A point to the right of the centre moves up (y falls).
        let (x, y) = Motion { shift: [0.0, 0.0], turn: 0.1 }.apply(10.0, 0.0);
        assert!(y < 0.0 && x > 9.9);
    }

    #[test]
    fn row_by_row_and_point_by_point_agree() {
        let frame = waves(40, 50, 0.0, 0.0);
        let interpolator = Interpolator::new();
        let motion = Motion { shift: [1.25, -0.75], turn: 0.0 };
        let whole = interpolator.resample(&frame, &motion);
        for (y, x) in [(0, 0), (1, 3), (20, 48), (39, 10), (20, 20)] {
            let single = interpolator.at(&frame, x as f64 + 1.25, y as f64 - 0.75);
            match single {
                Some(value) => assert!((value - whole[[y, x]]).abs() < 1e-3),
                None => assert!(whole[[y, x]].is_nan()),
            }
        }
    }
}
