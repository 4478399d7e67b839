//! The bare cell from its first frames: registered, averaged without outliers, its noise measured.
//! Method: every bare frame is laid on the first; then each in turn on the robust mean of the *others* (a frame found
//! in its own reference would be held in place by its own noise), twice; their mean, in the first frame's
//! coordinates, is the reference. Memory: at most [`MOST_BARE`] planes, twice.

use std::borrow::Borrow;

use ndarray::Array2;
use rayon::prelude::*;

use super::align::{Aligner, FULL_PIXELS, FULL_STEPS};
use super::fit::{Fitted, Template, View};
use super::noise::{NoiseModel, looks};
use super::plane::{blur, combine, median, own_noise, rows_mut, separable};
use super::quality::unlike;
use super::resample::Interpolator;
use super::{Mode, Scene, SceneSettings};

/// Bare frames kept; beyond it the reference's own noise hardly falls (a quarter of one frame's).
pub const MOST_BARE: usize = 16;
/// Least noise of a frame, grey levels: rounding to whole levels.
const ROUNDING_SD: f32 = 0.29;
/// Rounds of laying each bare frame on the others.
const ROUNDS: usize = 2;
/// Pixels that enter a frame's fingerprint.
const FINGERPRINT_PIXELS: usize = 50_000;
/// A bare pixel further than this from the middle of its record, in standard deviations, does not enter the mean (dust).
const OUTLIER: f32 = 3.5;

/// Collects bare frames and makes the [`Scene`] of them.
pub struct SceneBuilder {
    settings: SceneSettings,
    frames: Vec<Array2<f32>>,
}

impl SceneBuilder {
    /// An empty builder.
    pub fn new(settings: SceneSettings) -> Self {
        Self { settings, frames: Vec::new() }
    }

    /// Takes the next usable bare frame, in grey levels, all of one shape. Frames after the first [`MOST_BARE`] are
    /// not kept.
    pub fn push(&mut self, frame: &Array2<f32>) {
        let fits = self.frames.first().is_none_or(|first| first.dim() == frame.dim());
        if fits && self.frames.len() < MOST_BARE {
            self.frames.push(frame.as_standard_layout().to_owned());
        }
    }

    /// Frames taken.
    pub fn len(&self) -> usize {
        self.frames.len()
    }

    /// Whether no frame was taken.
    pub fn is_empty(&self) -> bool {
        self.frames.is_empty()
    }

    /// The scene; `None` when no frame was taken (then [`Scene::without_bare`] is the way).
    pub fn finish(self) -> Option<Scene> {
        let first = self.frames.first()?;
        let noise = own_noise(first).max(ROUNDING_SD);
        let sd = Array2::from_elem(first.dim(), noise);
        let mut bare = on_first(first, &self.frames, &sd);
        let interpolator = Interpolator::new();
        for _ in 0..ROUNDS {
            bare = on_each_other(&interpolator, bare, &sd, noise);
        }
        let reference = robust_mean(&planes(&interpolator, &bare), noise);
        let slope = gradient_magnitude(&reference);
        let model = measured_noise(&interpolator, &reference, &slope, &bare, noise);
        let sd = model.sd(&reference, &slope);
        let likeness = median(&mut bare.iter().map(|b| b.likeness as f32).collect()).unwrap_or(0.0);
        let share = noise_share(&interpolator, bare.iter());
        let mut scene = Scene::assemble(self.settings, Mode::Bare, reference, &sd, share);
        scene.frames = bare.len();
        scene.usual_likeness = f64::from(likeness);
        scene.bare = bare.iter().map(|b| (fingerprint(b.frame), b.fitted)).collect();
        Some(scene)
    }
}

/// A bare frame and how it lies.
#[derive(Clone, Copy)]
struct Bare<'a> {
    frame: &'a Array2<f32>,
    fitted: Fitted,
    likeness: f64,
}

/// Lays every frame on the first. Those that do not show the scene are left out.
fn on_first<'a>(first: &'a Array2<f32>, frames: &'a [Array2<f32>], sd: &Array2<f32>) -> Vec<Bare<'a>> {
    let aligner = Aligner::new(first, sd, 1.0);
    let mut bare = vec![Bare { frame: first, fitted: Fitted::start([0.0; 2]), likeness: 1.0 }];
    let mut guess = [0.0; 2];
    let mut aligned = Vec::with_capacity(frames.len());
    for frame in &frames[1..] {
        let one = aligner.align(frame, None, guess);
        guess = one.fitted.motion.shift;
        aligned.push((frame, one));
    }
    let usual = median(&mut aligned.iter().map(|(_, a)| a.likeness as f32).collect()).unwrap_or(0.0);
    aligned.retain(|(_, a)| unlike(a.likeness, f64::from(usual), a.pixels).is_none());
    bare.extend(aligned.into_iter().map(|(frame, a)| Bare { frame, fitted: a.fitted, likeness: a.likeness }));
    if let [own, others @ ..] = bare.as_mut_slice() {
        own.likeness = others.first().map_or(1.0, |_| f64::from(usual));
    }
    bare
}

/// Lays every frame on the mean of the others, then moves all so that the first is at the origin.
/// With e_k the place found for frame k against the mean of the others, moving it by (n − 1)/n · e_k brings all to
/// one common mean.
fn on_each_other<'a>(interpolator: &Interpolator, bare: Vec<Bare<'a>>, sd: &Array2<f32>, noise: f32) -> Vec<Bare<'a>> {
    let n = bare.len();
    if n < 2 {
        return bare;
    }
    let step = (n as f64 - 1.0) / n as f64;
    let laid = planes(interpolator, &bare);
    let mut moved: Vec<Bare<'a>> = Vec::with_capacity(n);
    for (k, one) in bare.iter().enumerate() {
        let others: Vec<&Array2<f32>> = laid.iter().enumerate().filter(|&(i, _)| i != k).map(|(_, p)| p).collect();
        let share = noise_share(interpolator, bare.iter().enumerate().filter(|&(i, _)| i != k).map(|(_, b)| b));
        let template = Template::new(&robust_mean(&others, noise), 1, sd, share, FULL_PIXELS);
        let before = one.fitted.motion.shift;
        let view = View { interpolator, frame: one.frame, metal: None, guess: before };
        let mut fitted = template.fit(&view, one.fitted, one.fitted.motion.turns(), FULL_STEPS);
        let found = fitted.motion.shift;
        fitted.motion.shift = [0, 1].map(|axis| before[axis] + step * (found[axis] - before[axis]));
        moved.push(Bare { fitted, ..*one });
    }
    let origin = moved[0].fitted.motion.shift;
    for one in &mut moved {
        let shift = one.fitted.motion.shift;
        one.fitted.motion.shift = [shift[0] - origin[0], shift[1] - origin[1]];
    }
    moved
}

/// Noise variance of the frames' mean over one frame's: 1/n of it, less what resampling smooths away.
fn noise_share<'a>(interpolator: &Interpolator, bare: impl Iterator<Item = &'a Bare<'a>>) -> f64 {
    let (sum, n) = bare
        .fold((0.0, 0.0), |(sum, n), b| (sum + f64::from(interpolator.noise_gain(&b.fitted.motion)).powi(2), n + 1.0));
    sum / (n * n)
}

/// The frames in reference coordinates, light removed.
fn planes(interpolator: &Interpolator, bare: &[Bare<'_>]) -> Vec<Array2<f32>> {
    bare.iter()
        .map(|one| {
            let mut plane = interpolator.resample(one.frame, &one.fitted.motion);
            let shape = plane.dim();
            rows_mut(&mut plane).for_each(|(y, row)| {
                for (x, value) in row.iter_mut().enumerate() {
                    *value /= one.fitted.light_at(shape, x as f64, y as f64).max(0.05) as f32;
                }
            });
            plane
        })
        .collect()
}

/// Mean over frames of each pixel, without those far from its middle; frames that do not reach it do not count.
/// Where none does, the nearest pixel to the left or above that has one stands in.
fn robust_mean<P: Borrow<Array2<f32>> + Sync>(laid: &[P], noise: f32) -> Array2<f32> {
    let shape = laid.first().map_or((0, 0), |p| p.borrow().dim());
    let mut mean = Array2::from_elem(shape, f32::NAN);
    // The scatter of the middle itself is part of the distance.
    let limit = 1.5 * OUTLIER * noise;
    rows_mut(&mut mean).for_each_init(Vec::new, |values, (y, row)| {
        for (x, value) in row.iter_mut().enumerate() {
            values.clear();
            values.extend(laid.iter().map(|p| p.borrow()[[y, x]]));
            *value = middle_mean(values, limit).unwrap_or(f32::NAN);
        }
    });
    fill_uncovered(&mut mean);
    mean
}

/// Repeats the nearest known pixel along rows, then along columns, where no frame reached.
fn fill_uncovered(plane: &mut Array2<f32>) {
    for axis in [1, 0] {
        for mut lane in plane.lanes_mut(ndarray::Axis(axis)) {
            let Some(first) = lane.iter().position(|v| v.is_finite()) else {
                continue;
            };
            let mut last = lane[first];
            for value in lane.iter_mut() {
                if value.is_finite() {
                    last = *value;
                } else {
                    *value = last;
                }
            }
        }
    }
}

/// Mean of the finite values within `limit` of their median (of all when fewer than three).
fn middle_mean(values: &mut Vec<f32>, limit: f32) -> Option<f32> {
    let middle = median(values)?;
    let limit = if values.len() < 3 { f32::INFINITY } else { limit };
    let near = |v: &&f32| (**v - middle).abs() <= limit;
    let count = values.iter().filter(near).count();
    Some(values.iter().filter(near).sum::<f32>() / count as f32)
}

/// Length of the gradient, grey levels per px, on a lightly smoothed plane (noise must not pass for slope).
pub(crate) fn gradient_magnitude(plane: &Array2<f32>) -> Array2<f32> {
    let smooth = blur(plane, 1.0);
    let central = [-0.5, 0.0, 0.5];
    combine(&separable(&smooth, &central, &[1.0]), &separable(&smooth, &[1.0], &central), f32::hypot)
}

/// Noise model from the bare frames' own scatter about their mean. A frame's residual against a mean that holds it has
/// (1 − 1/n) of its variance, a later frame's (1 + 1/n).
fn measured_noise(
    interpolator: &Interpolator,
    reference: &Array2<f32>,
    slope: &Array2<f32>,
    bare: &[Bare<'_>],
    fallback: f32,
) -> NoiseModel {
    let n = bare.len() as f32;
    if bare.len() < 2 {
        return NoiseModel::even(fallback * std::f32::consts::SQRT_2);
    }
    let to_new_frame = ((n + 1.0) / (n - 1.0)).sqrt();
    let mut all = Vec::new();
    for (one, plane) in bare.iter().zip(planes(interpolator, bare)) {
        let residual = combine(&plane, reference, |frame, mean| frame - mean);
        all.extend(looks(reference, slope, &residual, to_new_frame / interpolator.noise_gain(&one.fitted.motion)));
    }
    NoiseModel::measure(&mut all)
}

/// Tells a recorded frame from all others: the bits of its pixels, FNV-1a (Fowler, Noll & Vo).
pub(crate) fn fingerprint(frame: &Array2<f32>) -> u64 {
    let step = (frame.len() / FINGERPRINT_PIXELS).max(1) | 1;
    frame
        .iter()
        .step_by(step)
        .fold(0xcbf2_9ce4_8422_2325, |hash, value| (hash ^ u64::from(value.to_bits())).wrapping_mul(0x0100_0000_01b3))
}
