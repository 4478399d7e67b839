//! The load: force to stress, load axis, expected axis, dose.

pub mod axis;
pub mod fixture;
