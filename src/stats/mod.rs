//! Statistics: pure functions on slices, no images.

pub mod angles;
pub mod axial;
pub mod bootstrap;
pub mod clusters;
pub mod concentration;
pub mod distributions;
pub mod filaments;
pub mod isotonic;
pub mod kink;
pub mod order;
pub mod regress;
pub mod scoring;
pub mod theil_sen;
pub mod trend;
pub mod uniformity;
