//! Statistics: pure functions on slices, no images.

pub mod angles;
pub mod axial;
pub mod concentration;
pub mod distributions;
pub mod order;
pub mod uniformity;
