//! A frame laid on the reference, from any start: phase correlation and the guess propose, the joint fit decides.
//! Both start on a binned level (cheap, wide capture range); the better one is refined on full pixels.

use ndarray::Array2;

use super::drift::{Spectrum, Whitening};
use super::fit::{Fitted, Template, View};
use super::plane::{bin, blur, combine, robust_spread, rows_mut, sample};
use super::resample::Interpolator;
use rayon::prelude::*;

/// Longest side of the coarse level, px.
const COARSE_SIDE: usize = 640;
/// Most pixels the fit looks at on the coarse and the full level.
const COARSE_PIXELS: usize = 40_000;
pub(crate) const FULL_PIXELS: usize = 200_000;
/// Most Gauss–Newton steps on the coarse and the full level.
const COARSE_STEPS: usize = 15;
pub(crate) const FULL_STEPS: usize = 12;
/// Scale above which brightness counts as light, not as detail, px of the coarse level.
const DETAIL_SIGMA: f64 = 6.0;
/// Detail is clipped at this many robust standard deviations: dust and metal weigh no more than texture.
const DETAIL_CLIP: f32 = 3.0;
/// Phase correlation is sought to 1/8 px of the coarse level; the fit does the rest.
const PEAK_PRECISION: usize = 8;
/// A jump must lower the loss by this share to be believed against the guess.
const JUMP_GAIN: f64 = 0.002;
/// Starts closer than this are one, px of the coarse level.
const SAME_START: f64 = 0.25;

/// The reference, prepared for laying frames on it.
pub(crate) struct Aligner {
    interpolator: Interpolator,
    coarse: Template,
    full: Template,
    detail: Array2<f32>,
    spectrum: Spectrum,
}

/// A frame laid on the reference.
pub(crate) struct Aligned {
    pub(crate) fitted: Fitted,
    /// Correlation of the fine detail of frame and reference where both are seen.
    pub(crate) likeness: f64,
    /// Pixels of that correlation.
    pub(crate) pixels: usize,
}

impl Aligner {
    /// `sd`: noise of one frame, grey levels; `noise_share`: the reference's own noise variance over one frame's.
    pub(crate) fn new(reference: &Array2<f32>, sd: &Array2<f32>, noise_share: f64) -> Self {
        let longest = reference.nrows().max(reference.ncols());
        let factor = longest.div_ceil(COARSE_SIDE).next_power_of_two().max(if longest > 200 { 2 } else { 1 });
        let small = bin(reference, factor);
        let small_sd = bin(sd, factor) / factor as f32;
        let detail = detail(&small);
        Self {
            interpolator: Interpolator::new(),
            coarse: Template::new(&small, factor, &small_sd, noise_share, COARSE_PIXELS),
            full: Template::new(reference, 1, sd, noise_share, FULL_PIXELS),
            spectrum: Spectrum::new(&windowed(&detail)),
            detail,
        }
    }

    pub(crate) fn interpolator(&self) -> &Interpolator {
        &self.interpolator
    }

    /// Lays a frame on the reference. `guess`: its likely shift, px.
    pub(crate) fn align(&self, frame: &Array2<f32>, metal: Option<&Array2<bool>>, guess: [f64; 2]) -> Aligned {
        let factor = self.coarse.bin;
        let small = bin(frame, factor);
        let small_metal = metal.map(|m| bin_mask(m, factor));
        let small_detail = detail(&small);
        let moved = Spectrum::new(&windowed(&small_detail));
        let peak = self.spectrum.shift_to(&moved, Whitening::Half, PEAK_PRECISION).px.map(|s| s * factor as f64);
        let view = View { interpolator: &self.interpolator, frame: &small, metal: small_metal.as_ref(), guess };
        let from = |shift: [f64; 2]| {
            let start = Fitted::start(shift);
            self.coarse.fit(&view, start, false, COARSE_STEPS)
        };
        let mut best = from(guess);
        let away = (peak[0] - guess[0]).hypot(peak[1] - guess[1]);
        if away > SAME_START * factor as f64 {
            let jumped = from(peak);
            if jumped.cost < (1.0 - JUMP_GAIN) * best.cost {
                best = jumped;
            }
        }
        let (likeness, pixels) = self.likeness(&small_detail, &best, small_metal.as_ref());
        let fitted = self.full.fit(&View { frame, metal, ..view }, best, true, FULL_STEPS);
        Aligned { fitted, likeness, pixels }
    }

    fn likeness(&self, detail: &Array2<f32>, fitted: &Fitted, metal: Option<&Array2<bool>>) -> (f64, usize) {
        let mut motion = fitted.motion;
        motion.shift = motion.shift.map(|s| s / self.coarse.bin as f64);
        let laid = self.interpolator.resample(detail, &motion);
        let (mut cross, mut own, mut other, mut pixels) = (0.0_f64, 0.0_f64, 0.0_f64, 0);
        for ((at, &a), &b) in laid.indexed_iter().zip(&self.detail) {
            if a.is_finite() && !metal.is_some_and(|m| m[at]) {
                let (a, b) = (f64::from(a), f64::from(b));
                cross += a * b;
                own += a * a;
                other += b * b;
                pixels += 1;
            }
        }
        let norm = (own * other).sqrt();
        (if norm > 0.0 { cross / norm } else { 0.0 }, pixels)
    }
}

/// Fine detail of a picture, free of light: relative to its own blur, clipped.
fn detail(plane: &Array2<f32>) -> Array2<f32> {
    let smooth = blur(plane, DETAIL_SIGMA);
    let relative = combine(plane, &smooth, |p, s| p / s.max(1.0) - 1.0);
    let spread = robust_spread(&mut sample(&relative, 50_000)).map_or(0.0, |(_, sd)| sd);
    let limit = DETAIL_CLIP * spread;
    relative.mapv_into(|v| v.clamp(-limit, limit))
}

/// Fades a picture out towards its border (Hann), so that what enters and leaves the view does not count.
fn windowed(plane: &Array2<f32>) -> Array2<f32> {
    let hann = |i: usize, n: usize| (0.5 - 0.5 * libm::cos(std::f64::consts::TAU * (i as f64 + 0.5) / n as f64)) as f32;
    let (height, width) = plane.dim();
    let across: Vec<f32> = (0..width).map(|x| hann(x, width)).collect();
    let down: Vec<f32> = (0..height).map(|y| hann(y, height)).collect();
    let mut out = plane.clone();
    rows_mut(&mut out).for_each(|(y, row)| row.iter_mut().zip(&across).for_each(|(v, a)| *v *= a * down[y]));
    out
}

/// Blocks that hold any metal.
fn bin_mask(mask: &Array2<bool>, factor: usize) -> Array2<bool> {
    let (height, width) = (mask.nrows() / factor, mask.ncols() / factor);
    Array2::from_shape_fn((height, width), |(y, x)| {
        (y * factor..(y + 1) * factor).any(|yy| (x * factor..(x + 1) * factor).any(|xx| mask[[yy, xx]]))
    })
}
