//! Statistics: pure functions on slices, no images.

pub mod angles;
pub mod axial;
pub mod bootstrap;
pub mod calibration;
pub mod clusters;
pub mod concentration;
pub mod distributions;
pub mod dose;
pub mod filaments;
pub mod isotonic;
pub mod kink;
pub mod linear;
pub mod order;
pub mod regress;
pub mod scoring;
pub mod survival;
pub mod theil_sen;
pub mod trend;
pub mod turns;
pub mod uniformity;
