//! Shift between two pictures by phase correlation, sub-pixel.
//! Method: cross-power spectrum, peak of its inverse transform, then a locally up-sampled discrete Fourier transform
//! around the peak (Guizar-Sicairos, Thurman & Fienup 2008, Opt. Lett. 33, 156). Limit: the shift is periodic; one
//! beyond half the picture is found modulo its size.

use ndarray::Array2;
use rayon::prelude::*;
use rustfft::{FftDirection, FftPlanner, num_complex::Complex};

use super::plane::rows_mut;

/// How the spectrum is weighted before the peak is sought.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Whitening {
    /// Plain cross-correlation.
    None,
    /// Divide by the square root of the magnitude: between the two, for pictures whose finest detail is noise.
    Half,
    /// Phase only.
    Full,
}

/// A shift found between two pictures.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Shift {
    /// Shift of the second picture's scene against the first's, px: x right, y down.
    pub px: [f64; 2],
    /// Height of the peak over the correlation's standard deviation.
    pub peak: f64,
}

/// Two-dimensional spectrum of a picture, ready to be compared with others.
#[derive(Debug, Clone)]
pub struct Spectrum(Array2<Complex<f32>>);

impl Spectrum {
    /// Transforms a picture (rows × columns, any size). Values must be finite.
    pub fn new(plane: &Array2<f32>) -> Self {
        let mut values = plane.mapv(|v| Complex::new(v, 0.0));
        transform(&mut values, FftDirection::Forward);
        Self(values)
    }

    /// Where `moved` lies against `self`, to `1 / precision` px (`precision` ≥ 1). The two must have one shape.
    ///
    /// # Examples
    /// ```
    /// use ndarray::Array2;
    /// use veerlog::scene::drift::{Spectrum, Whitening};
    /// let blob = |cx: f32, cy: f32| {
    ///     Array2::from_shape_fn((32, 48), |(y, x)| {
    ///         (-((x as f32 - cx).powi(2) + (y as f32 - cy).powi(2)) / 18.0).exp()
    ///     })
    /// };
    /// let shift = Spectrum::new(&blob(20.0, 15.0)).shift_to(&Spectrum::new(&blob(22.5, 14.0)), Whitening::None, 50);
    /// assert!((shift.px[0] - 2.5).abs() < 0.05 && (shift.px[1] + 1.0).abs() < 0.05);
    /// ```
    pub fn shift_to(&self, moved: &Self, whitening: Whitening, precision: usize) -> Shift {
        let (height, width) = self.0.dim();
        let mut cross = moved.0.clone();
        cross.zip_mut_with(&self.0, |m, r| *m = weigh(*m * r.conj(), whitening));
        cross[[0, 0]] = Complex::new(0.0, 0.0);
        let mut surface = cross.clone();
        transform(&mut surface, FftDirection::Inverse);
        let (mut row, mut col, mut top) = (0, 0, f32::NEG_INFINITY);
        let mut energy = 0.0_f64;
        for ((y, x), value) in surface.indexed_iter() {
            energy += f64::from(value.re * value.re);
            if value.re > top {
                (row, col, top) = (y, x, value.re);
            }
        }
        let spread = (energy / (height * width) as f64).sqrt();
        let mut px = [signed(col, width), signed(row, height)];
        let mut step = 1.0;
        while step * precision as f64 > 1.0 {
            let next = (step / 10.0_f64).max(1.0 / precision as f64);
            px = refine(&cross, px, next, (step / next).ceil() as i32);
            step = next;
        }
        Shift { px, peak: if spread > 0.0 { f64::from(top) / spread } else { 0.0 } }
    }
}

/// Applies the weighting to one term of the cross-power spectrum.
fn weigh(term: Complex<f32>, whitening: Whitening) -> Complex<f32> {
    let magnitude = term.norm();
    if magnitude <= f32::MIN_POSITIVE {
        return Complex::new(0.0, 0.0);
    }
    match whitening {
        Whitening::None => term,
        Whitening::Half => term / magnitude.sqrt(),
        Whitening::Full => term / magnitude,
    }
}

/// Index of a periodic axis as a signed shift or frequency.
fn signed(index: usize, length: usize) -> f64 {
    if index > length / 2 { index as f64 - length as f64 } else { index as f64 }
}

/// Best shift on the grid `around ± reach·step`, by the discrete Fourier transform taken only there.
fn refine(cross: &Array2<Complex<f32>>, around: [f64; 2], step: f64, reach: i32) -> [f64; 2] {
    let (height, width) = cross.dim();
    let offsets: Vec<f64> = (-reach..=reach).map(|k| f64::from(k) * step).collect();
    let phases = |length: usize, centre: f64| -> Vec<Vec<Complex<f64>>> {
        let turn = std::f64::consts::TAU / length as f64;
        let phase = |shift: f64, k: usize| {
            let angle = turn * signed(k, length) * shift;
            Complex::new(libm::cos(angle), libm::sin(angle))
        };
        offsets.iter().map(|o| (0..length).map(|k| phase(centre + o, k)).collect()).collect()
    };
    let (across, down) = (phases(width, around[0]), phases(height, around[1]));
    // Along every row first: one value per row and x offset.
    let rows: Vec<Vec<Complex<f64>>> = (0..height)
        .into_par_iter()
        .map(|y| {
            let row = cross.row(y);
            let term = |value: &Complex<f32>| Complex::new(f64::from(value.re), f64::from(value.im));
            across.iter().map(|phase| row.iter().zip(phase).map(|(v, p)| term(v) * p).sum()).collect()
        })
        .collect();
    let mut best = (f64::NEG_INFINITY, around);
    for (phase, oy) in down.iter().zip(&offsets) {
        for (i, ox) in offsets.iter().enumerate() {
            let value: f64 = rows.iter().zip(phase).map(|(row, p)| (row[i] * p).re).sum();
            if value > best.0 {
                best = (value, [around[0] + ox, around[1] + oy]);
            }
        }
    }
    best.1
}

/// In-place two-dimensional transform, unscaled.
fn transform(values: &mut Array2<Complex<f32>>, direction: FftDirection) {
    along_rows(values, direction);
    let mut turned = values.t().as_standard_layout().to_owned();
    along_rows(&mut turned, direction);
    values.assign(&turned.t());
}

fn along_rows(values: &mut Array2<Complex<f32>>, direction: FftDirection) {
    let plan = FftPlanner::new().plan_fft(values.ncols(), direction);
    rows_mut(values).for_each(|(_, row)| plan.process(row));
}
