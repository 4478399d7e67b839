//! How the picture is taken: light, lens, stage, camera, and the grades of difficulty as settings of it.
//! All values are common practice for transmitted-light films of polished ceramics, chosen for variety, not fitted to any record.

use serde::{Deserialize, Serialize};

/// A grade of difficulty.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Grade {
    /// Contrast 0.35, noise 1 grey level.
    Clear,
    /// Contrast 0.18, noise 2.6, drift, flicker, grain lines, uneven light.
    Typical,
    /// Contrast 0.09, noise 7, drift with jumps, wandering focus, dust, broken and repeated frames, scratches, pores.
    Hard,
}

/// The look of the ceramic.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Texture {
    /// Grain boundaries as thin dark lines.
    Grains,
    /// Grains of different brightness, faint boundaries.
    Tones,
    /// Cloudy, over several sizes.
    Cloud,
    /// Polishing lines along one direction.
    Brushed,
    /// Only a fine roughness.
    Plain,
}

/// The lens's point spread.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Psf {
    /// Gaussian of standard deviation `psf_px`.
    Gaussian,
    /// The same with 15 % of the light in a halo three times as wide.
    Halo,
    /// A disc of the same variance (defocus).
    Disc,
}

/// How light falls on the specimen.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Light {
    /// Brighter to one side.
    Tilt,
    /// Darker toward the corners.
    Vignette,
    /// A bright spot off the centre.
    Spot,
}

/// Everything about the picture but the filaments.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(default, deny_unknown_fields)]
pub struct Imaging {
    /// Share of the local brightness a filament takes away (or adds).
    pub contrast: f64,
    /// Standard deviation of the noise at mid brightness, grey levels of 255.
    pub noise: f64,
    /// Bits a pixel, 8 or 16.
    pub bits: u8,
    /// Mean brightness of the ceramic, share of full scale.
    pub level: f64,
    /// Point spread.
    pub psf: Psf,
    /// Its standard deviation, px.
    pub psf_px: f64,
    /// Look of the ceramic.
    pub texture: Texture,
    /// Relative strength of the texture.
    pub texture_contrast: f64,
    /// Size of a grain (or cloud), px.
    pub grain_px: f64,
    /// Number of pores.
    pub pores: usize,
    /// Number of scratches.
    pub scratches: usize,
    /// Pattern of the light.
    pub light: Light,
    /// Relative amplitude of that pattern.
    pub uneven: f64,
    /// Relative change of light and of its tilt over the run.
    pub light_drift: f64,
    /// Relative standard deviation of brightness from frame to frame.
    pub flicker: f64,
    /// Largest smooth stage drift over the run, px.
    pub drift_px: f64,
    /// Standard deviation of the stage's shake from frame to frame, px.
    pub shake_px: f64,
    /// Number of sudden jumps of the stage.
    pub jumps: usize,
    /// Size of a jump, px.
    pub jump_px: f64,
    /// Largest rotation of the stage over the run, degrees.
    pub rotation_deg: f64,
    /// Largest wandering defocus, px of added blur (standard deviation).
    pub focus_px: f64,
    /// Particles that wander through.
    pub dust: usize,
    /// Frames whose file is cut short.
    pub broken: usize,
    /// Frames that repeat their neighbour byte for byte.
    pub repeated: usize,
    /// Frames without a picture.
    pub blank: usize,
    /// Standard deviation of the camera's fixed pattern, grey levels of 255.
    pub camera_pattern: f64,
    /// Brightness of the plating electrode relative to the ceramic.
    pub plating_level: f64,
    /// Brightness of the far electrode relative to the ceramic.
    pub far_level: f64,
    /// Softness of the electrodes' boundary (standard deviation), px.
    pub edge_blur_px: f64,
    /// Roughness of the electrodes' boundary (standard deviation), px.
    pub edge_rough_px: f64,
}

impl Default for Imaging {
    fn default() -> Self {
        Self::of(Grade::Clear)
    }
}

impl Imaging {
    /// The settings of a grade.
    #[must_use]
    pub fn of(grade: Grade) -> Self {
        let clear = Self {
            contrast: 0.35,
            noise: 1.0,
            bits: 8,
            level: 0.56,
            psf: Psf::Gaussian,
            psf_px: 0.7,
            texture: Texture::Grains,
            texture_contrast: 0.03,
            grain_px: 28.0,
            pores: 4,
            scratches: 0,
            light: Light::Tilt,
            uneven: 0.04,
            light_drift: 0.01,
            flicker: 0.003,
            drift_px: 1.5,
            shake_px: 0.05,
            jumps: 0,
            jump_px: 0.0,
            rotation_deg: 0.0,
            focus_px: 0.0,
            dust: 0,
            broken: 0,
            repeated: 0,
            blank: 0,
            camera_pattern: 0.0,
            plating_level: 0.45,
            far_level: 0.6,
            edge_blur_px: 1.0,
            edge_rough_px: 0.3,
        };
        match grade {
            Grade::Clear => clear,
            Grade::Typical => Self {
                contrast: 0.18,
                noise: 2.6,
                texture_contrast: 0.08,
                pores: 12,
                scratches: 2,
                uneven: 0.15,
                light_drift: 0.03,
                flicker: 0.015,
                drift_px: 4.0,
                shake_px: 0.15,
                focus_px: 0.3,
                camera_pattern: 0.2,
                ..clear
            },
            Grade::Hard => Self {
                contrast: 0.09,
                noise: 7.0,
                texture_contrast: 0.1,
                pores: 30,
                scratches: 6,
                uneven: 0.25,
                light_drift: 0.06,
                flicker: 0.03,
                drift_px: 6.0,
                shake_px: 0.3,
                jumps: 2,
                jump_px: 5.0,
                focus_px: 1.0,
                dust: 5,
                broken: 1,
                repeated: 1,
                camera_pattern: 0.4,
                edge_blur_px: 1.5,
                edge_rough_px: 0.6,
                ..clear
            },
        }
    }
}
