//! The load: force to stress, load axis, expected axis, dose.

pub mod axis;
pub mod fixture;
mod state;

pub use axis::{AxisRule, acute_deg, dose_mpa, expected_axis_deg, image_direction_deg};
pub use fixture::Fixture;
pub use state::{Load, LoadState};
