//! From a recorded frame to one comparable with the bare cell: drift, light and focus taken out, noise known.
//!
//! [`SceneBuilder`] averages the bare frames; [`Scene::correct`] lays any later frame on that average and gives what
//! differs, in the coordinates of the first usable frame. Without bare frames ([`Scene::without_bare`]) what differs is
//! measured against the frame's own smooth background. Memory: the bare planes while building, then about eight planes.

pub(crate) mod align;
pub(crate) mod build;
pub mod drift;
pub(crate) mod fit;
pub(crate) mod light;
pub(crate) mod noise;
pub(crate) mod plane;
pub(crate) mod quality;
pub(crate) mod resample;
#[cfg(test)]
mod trials;

use ndarray::Array2;
use rayon::prelude::*;

pub use build::{MOST_BARE, SceneBuilder};

use align::Aligner;
use fit::{BLURS, Fitted};
use light::{OWN_BACKGROUND, UNEVEN_LIGHT, background};
use plane::{blur, combine, own_noise, quantile, robust_spread, rows_mut, sample};

/// Share of the reference's median under which a pixel is too dark to divide by.
const DARK_SHARE: f32 = 0.02;
/// Least grey level to divide by.
const DARK_LEVEL: f32 = 3.0;
/// Wavelength at which sharpness is reported, px: fine detail a microscope still shows at full contrast.
const SHARPNESS_WAVELENGTH: f64 = 8.0;
/// Pixels from which a frame's noise is taken.
const LOOKED_AT: usize = 100_000;
/// Shift error that interpolation leaves on noiseless trial films, px (measured; see `trials`).
const INTERPOLATION_PX: f64 = 0.01;
/// Mean absolute deviation of a normal variable to its standard deviation: √(π/2).
const MEAN_ABS_TO_SD: f32 = 1.253_314_1;

/// What the scene stage needs to know.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct SceneSettings {
    /// Whether filaments are darker than the electrolyte around them.
    pub darker: bool,
}

/// Against what a frame's residual is measured.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Mode {
    /// The mean of the bare frames.
    Bare,
    /// The frame's own smooth background.
    OwnBackground,
}

/// The reference a run's frames are compared with.
pub struct Scene {
    settings: SceneSettings,
    mode: Mode,
    reference: Array2<f32>,
    blurred: [Array2<f32>; 2],
    noise: Array2<f32>,
    aligner: Aligner,
    floor: f32,
    usual_likeness: f64,
    frames: usize,
    /// Fingerprints of the bare frames and how they were found to lie against the mean of the others: laid on the
    /// whole mean they would be held by their own noise.
    bare: Vec<(u64, Fitted)>,
}

/// A frame laid on the reference.
#[derive(Debug, Clone)]
pub struct Corrected {
    /// (reference − frame) / reference in reference coordinates, light removed; positive where there may be filament
    /// (the sign follows [`SceneSettings::darker`]). NaN where the frame does not reach.
    pub residual: Array2<f32>,
    /// Shift of the scene against the first usable frame, px: x right, y down.
    pub drift_px: [f64; 2],
    /// Standard uncertainty of the shift along its worse and its better determined direction, px; infinite where the
    /// picture tells nothing and the guess was kept.
    pub u_drift_px: [f64; 2],
    /// Turn of the scene against the reference, degrees, anticlockwise as displayed; 0 unless significant.
    pub rotation_deg: f64,
    /// Brightness against the reference.
    pub exposure: f64,
    /// Contrast of detail 8 px long against the reference: 1 as sharp, below 1 blurred.
    pub sharpness: f64,
    /// This frame's noise over [`Scene::noise`].
    pub noise_factor: f32,
    /// Why the frame should be set aside; `None` when it can be used.
    pub verdict: Option<String>,
}

impl Scene {
    /// A scene without bare frames: residuals are taken against each frame's own smooth background (104 px wide), drift
    /// against `first` (grey levels).
    pub fn without_bare(first: &Array2<f32>, settings: SceneSettings) -> Self {
        let first = first.as_standard_layout().to_owned();
        let sd = Array2::from_elem(first.dim(), own_noise(&first).max(0.29));
        let mut scene = Self::assemble(settings, Mode::OwnBackground, first.clone(), &sd, 1.0);
        let (_, residual) = own_residual(&first, None, settings.darker, scene.floor);
        scene.noise = local_spread(&residual);
        scene.bare.push((build::fingerprint(&first), Fitted::start([0.0; 2])));
        scene
    }

    /// Puts a scene together. `sd`: noise of a new frame's residual, grey levels; `noise_share`: noise variance of
    /// the reference over one frame's.
    pub(crate) fn assemble(
        settings: SceneSettings,
        mode: Mode,
        reference: Array2<f32>,
        sd: &Array2<f32>,
        noise_share: f64,
    ) -> Self {
        let middle = quantile(&mut sample(&reference, LOOKED_AT), 0.5).unwrap_or(1.0);
        let floor = (DARK_SHARE * middle).max(DARK_LEVEL);
        Self {
            settings,
            mode,
            blurred: BLURS.map(|sigma| blur(&reference, sigma) - &reference),
            noise: combine(sd, &reference, |sd, r| sd / r.max(floor)),
            aligner: Aligner::new(&reference, sd, noise_share),
            floor,
            usual_likeness: 1.0,
            frames: 1,
            bare: Vec::new(),
            reference,
        }
    }

    /// Standard deviation of a pixel of [`Corrected::residual`] where there is no metal, for a frame of ordinary
    /// quality: the pixel noise of frame and reference, and what a small misplacement does on steep texture, as a
    /// fraction of the local brightness. It is the noise of a *recorded* pixel: resampling lowers the scatter of single
    /// pixels a little but not that of sums over many, so evidence gathered along a line can be judged by it as if
    /// pixels were independent.
    pub fn noise(&self) -> &Array2<f32> {
        &self.noise
    }

    /// The bare mean (grey levels); the first frame itself when there were no bare frames.
    pub fn reference(&self) -> &Array2<f32> {
        &self.reference
    }

    /// Bare frames in the reference (1 when there were none). 1 / (n + 1) of the residual's noise variance is the
    /// reference's own, the same in every frame: averaging over time does not lower it.
    pub fn frames(&self) -> usize {
        self.frames
    }

    /// Lays a frame (grey levels, same shape) on the reference. `metal`: true where filament is known, in reference
    /// coordinates, left out of every fit; `guess`: shift of the previous usable frame, px.
    pub fn correct(&self, frame: &Array2<f32>, metal: Option<&Array2<bool>>, guess: [f64; 2]) -> Corrected {
        if let Some(reason) = self.unusable(frame) {
            return self.set_aside(guess, reason);
        }
        let frame = frame.as_standard_layout().to_owned();
        let (fitted, unlike) = self.lay(&frame, metal, guess);
        let laid = self.aligner.interpolator().resample(&frame, &fitted.motion);
        let residual = match self.mode {
            Mode::Bare => self.bare_residual(laid, metal, &fitted),
            Mode::OwnBackground => own_residual(&laid, metal, self.settings.darker, self.floor).1,
        };
        let noise_factor = self.noise_factor(&residual, metal, &fitted);
        let verdict = unlike.or_else(|| quality::hopeless(noise_factor));
        Corrected {
            residual,
            drift_px: fitted.motion.shift,
            u_drift_px: fitted.u_shift.map(with_origin),
            rotation_deg: fitted.motion.turn.to_degrees(),
            exposure: fitted.light[0],
            sharpness: fitted.transfer(SHARPNESS_WAVELENGTH).max(0.0),
            noise_factor,
            verdict,
        }
    }

    /// How a frame lies, and whether it shows something else.
    fn lay(&self, frame: &Array2<f32>, metal: Option<&Array2<bool>>, guess: [f64; 2]) -> (Fitted, Option<String>) {
        let print = build::fingerprint(frame);
        if let Some((_, known)) = self.bare.iter().find(|(bare, _)| *bare == print) {
            return (*known, None);
        }
        let aligned = self.aligner.align(frame, metal, guess);
        (aligned.fitted, quality::unlike(aligned.likeness, self.usual_likeness, aligned.pixels))
    }

    fn unusable(&self, frame: &Array2<f32>) -> Option<String> {
        if frame.dim() != self.reference.dim() {
            let ((h, w), (rh, rw)) = (frame.dim(), self.reference.dim());
            return Some(format!("is {w} × {h} px, the first usable frame {rw} × {rh}"));
        }
        quality::unreadable(frame)
    }

    fn set_aside(&self, guess: [f64; 2], reason: String) -> Corrected {
        Corrected {
            residual: Array2::from_elem(self.reference.dim(), f32::NAN),
            drift_px: guess,
            u_drift_px: [f64::INFINITY; 2],
            rotation_deg: 0.0,
            exposure: 0.0,
            sharpness: 0.0,
            noise_factor: f32::INFINITY,
            verdict: Some(reason),
        }
    }

    /// Residual against the bare mean under the frame's light and focus, what slow light is left taken off.
    fn bare_residual(&self, mut laid: Array2<f32>, metal: Option<&Array2<bool>>, fitted: &Fitted) -> Array2<f32> {
        let sign = if self.settings.darker { 1.0 } else { -1.0 };
        let [soft, softer] = fitted.blur.map(|s| s as f32);
        let shape = laid.dim();
        rows_mut(&mut laid).for_each(|(y, row)| {
            for (x, value) in row.iter_mut().enumerate() {
                let reference = self.reference[[y, x]];
                let light = fitted.light_at(shape, x as f64, y as f64).max(0.05) as f32;
                let model = reference + soft * self.blurred[0][[y, x]] + softer * self.blurred[1][[y, x]];
                *value = sign * (model - *value / light) / reference.max(self.floor);
            }
        });
        let uneven = background(&laid, metal, UNEVEN_LIGHT);
        laid -= &uneven;
        laid
    }

    /// Robust spread of the residual over the noise expected, resampling allowed for.
    fn noise_factor(&self, residual: &Array2<f32>, metal: Option<&Array2<bool>>, fitted: &Fitted) -> f32 {
        let mut scaled = combine(residual, &self.noise, |r, n| r / n);
        if let Some(metal) = metal {
            scaled.zip_mut_with(metal, |v, &m| *v = if m { f32::NAN } else { *v });
        }
        let spread = robust_spread(&mut sample(&scaled, LOOKED_AT)).map_or(f32::INFINITY, |(_, sd)| sd);
        match self.mode {
            Mode::Bare => {
                // Only the frame's share of the variance goes through the resampling.
                let share = self.frames as f32 / (self.frames as f32 + 1.0);
                let gain = self.aligner.interpolator().noise_gain(&fitted.motion);
                spread / (share * gain * gain + 1.0 - share).sqrt()
            }
            Mode::OwnBackground => spread,
        }
    }
}

/// Adds to the uncertainty of a fitted shift that of the origin (the first frame's own place, found as well) and of
/// interpolation.
fn with_origin(fitted_px: f64) -> f64 {
    (2.0 * fitted_px * fitted_px + INTERPOLATION_PX * INTERPOLATION_PX).sqrt()
}

/// Background of a frame and its residual against it. A second pass leaves out what the first showed to be filament.
fn own_residual(
    plane: &Array2<f32>,
    metal: Option<&Array2<bool>>,
    darker: bool,
    floor: f32,
) -> (Array2<f32>, Array2<f32>) {
    let sign = if darker { 1.0 } else { -1.0 };
    let relative = |ground: &Array2<f32>| combine(plane, ground, |p, g| sign * (g - p) / g.max(floor));
    let first = relative(&background(plane, metal, OWN_BACKGROUND));
    let spread = robust_spread(&mut sample(&first, LOOKED_AT)).map_or(0.0, |(_, sd)| sd);
    let mut excluded = first.mapv(|r| r > 2.5 * spread);
    if let Some(metal) = metal {
        excluded.zip_mut_with(metal, |e, &m| *e |= m);
    }
    let ground = background(plane, Some(&excluded), OWN_BACKGROUND);
    let residual = relative(&ground);
    (ground, residual)
}

/// Local standard deviation of a residual: its mean size in blocks, the median over about a hundred px.
fn local_spread(residual: &Array2<f32>) -> Array2<f32> {
    let middle = robust_spread(&mut sample(residual, LOOKED_AT)).map_or(1.0, |(_, sd)| sd);
    let mut spread = background(&residual.mapv(f32::abs), None, UNEVEN_LIGHT);
    spread.mapv_inplace(|s| (MEAN_ABS_TO_SD * s).max(0.25 * middle).max(1e-6));
    spread
}
