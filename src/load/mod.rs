//! The load: force to stress, load axis, expected axis, dose.

pub mod axis;
pub mod fixture;

/// The load in force.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct LoadState {
    /// Force, N.
    pub force_n: Option<f64>,
    /// Load axis, degrees.
    pub direction_deg: Option<f64>,
    /// Stress, MPa.
    pub stress_mpa: Option<f64>,
    /// Its standard uncertainty.
    pub u_stress_mpa: Option<f64>,
}
