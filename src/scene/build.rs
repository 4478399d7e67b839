//! The bare cell from its first frames: registered, averaged without outliers, its noise measured.
//! Method: every bare frame is laid on the first; their robust mean becomes the reference; all, the first too, are laid
//! on that mean again and averaged again, in the first frame's coordinates. Memory: at most [`MOST_BARE`] planes.

use ndarray::Array2;
use rayon::prelude::*;

use super::align::{Aligned, Aligner};
use super::noise::{NoiseModel, looks};
use super::plane::{blur, combine, median, own_noise, rows_mut, separable};
use super::quality::unlike;
use super::{Mode, Scene, SceneSettings};

/// Bare frames kept; beyond it the reference's own noise hardly falls (a quarter of one frame's).
pub const MOST_BARE: usize = 16;
/// Least noise of a frame, grey levels: rounding to whole levels.
const ROUNDING_SD: f32 = 0.29;
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
        Self {
            settings,
            frames: Vec::new(),
        }
    }

    /// Takes the next usable bare frame, in grey levels, all of one shape. Frames after the first [`MOST_BARE`] are
    /// not kept.
    pub fn push(&mut self, frame: &Array2<f32>) {
        let fits = self
            .frames
            .first()
            .is_none_or(|first| first.dim() == frame.dim());
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
        let to_first = Aligner::new(first, &sd, 1);
        let laid = lay_all(&to_first, &self.frames, &[0.0; 2]);
        let mean = robust_mean(&laid, noise);
        let to_mean = Aligner::new(&mean, &sd, laid.len());
        let laid = lay_all(&to_mean, &self.frames, &[0.0; 2]);
        let reference = robust_mean(&laid, noise);
        let slope = gradient_magnitude(&reference);
        let model = measured_noise(&reference, &slope, &laid, noise);
        let sd = model.sd(&reference, &slope);
        let likeness = median(&mut laid.iter().map(|l| l.likeness as f32).collect()).unwrap_or(0.0);
        Some(Scene::assemble(
            self.settings,
            Mode::Bare,
            reference,
            &sd,
            laid.len(),
            f64::from(likeness),
        ))
    }
}

/// A bare frame in reference coordinates, light removed.
struct Laid {
    plane: Array2<f32>,
    noise_gain: f32,
    likeness: f64,
}

/// Lays frames on a reference; the first fixes the origin. Frames that do not show the scene are left out.
fn lay_all(aligner: &Aligner, frames: &[Array2<f32>], guess: &[f64; 2]) -> Vec<Laid> {
    let mut guess = *guess;
    let mut aligned: Vec<(&Array2<f32>, Aligned)> = Vec::with_capacity(frames.len());
    for frame in frames {
        let one = aligner.align(frame, None, guess);
        guess = one.fitted.motion.shift;
        aligned.push((frame, one));
    }
    let usual =
        median(&mut aligned.iter().map(|(_, a)| a.likeness as f32).collect()).unwrap_or(0.0);
    let origin = aligned
        .first()
        .map_or([0.0; 2], |(_, a)| a.fitted.motion.shift);
    let shown = |(i, (_, a)): &(usize, (&Array2<f32>, Aligned))| {
        *i == 0 || unlike(a.likeness, f64::from(usual), a.pixels).is_none()
    };
    let kept = aligned.into_iter().enumerate().filter(shown);
    kept.map(|(_, (frame, one))| lay(aligner, frame, &one, origin))
        .collect()
}

fn lay(aligner: &Aligner, frame: &Array2<f32>, aligned: &Aligned, origin: [f64; 2]) -> Laid {
    let mut motion = aligned.fitted.motion;
    motion.shift = [motion.shift[0] - origin[0], motion.shift[1] - origin[1]];
    let mut plane = aligner.interpolator().resample(frame, &motion);
    let shape = plane.dim();
    rows_mut(&mut plane).for_each(|(y, row)| {
        for (x, value) in row.iter_mut().enumerate() {
            *value /= aligned.fitted.light_at(shape, x as f64, y as f64).max(0.05) as f32;
        }
    });
    Laid {
        plane,
        noise_gain: aligner.interpolator().noise_gain(&motion),
        likeness: aligned.likeness,
    }
}

/// Mean over frames of each pixel, without those far from its middle; frames that do not reach it do not count.
fn robust_mean(laid: &[Laid], noise: f32) -> Array2<f32> {
    let Some(first) = laid.first() else {
        return Array2::zeros((0, 0));
    };
    let mut mean = first.plane.clone();
    // The scatter of the middle itself is part of the distance.
    let limit = 1.5 * OUTLIER * noise;
    rows_mut(&mut mean).for_each_init(Vec::new, |values, (y, row)| {
        for (x, value) in row.iter_mut().enumerate() {
            values.clear();
            values.extend(laid.iter().map(|l| l.plane[[y, x]]));
            *value = middle_mean(values, limit).unwrap_or(*value);
        }
    });
    mean
}

/// Mean of the finite values within `limit` of their median (of all when fewer than three).
fn middle_mean(values: &mut Vec<f32>, limit: f32) -> Option<f32> {
    let middle = median(values)?;
    let limit = if values.len() < 3 {
        f32::INFINITY
    } else {
        limit
    };
    let near = |v: &&f32| (**v - middle).abs() <= limit;
    let count = values.iter().filter(near).count();
    Some(values.iter().filter(near).sum::<f32>() / count as f32)
}

/// Length of the gradient, grey levels per px, on a lightly smoothed plane (noise must not pass for slope).
pub(crate) fn gradient_magnitude(plane: &Array2<f32>) -> Array2<f32> {
    let smooth = blur(plane, 1.0);
    let central = [-0.5, 0.0, 0.5];
    combine(
        &separable(&smooth, &central, &[1.0]),
        &separable(&smooth, &[1.0], &central),
        f32::hypot,
    )
}

/// Noise model from the bare frames' own scatter about their mean. A frame's residual against a mean that holds it has
/// (1 − 1/n) of its variance, a later frame's (1 + 1/n).
fn measured_noise(
    reference: &Array2<f32>,
    slope: &Array2<f32>,
    laid: &[Laid],
    fallback: f32,
) -> NoiseModel {
    let n = laid.len() as f32;
    if laid.len() < 2 {
        return NoiseModel::even(fallback * std::f32::consts::SQRT_2);
    }
    let to_new_frame = ((n + 1.0) / (n - 1.0)).sqrt();
    let mut all = Vec::new();
    for one in laid {
        let residual = combine(&one.plane, reference, |frame, mean| frame - mean);
        all.extend(looks(
            reference,
            slope,
            &residual,
            to_new_frame / one.noise_gain,
        ));
    }
    NoiseModel::measure(&mut all)
}
