//! distance
