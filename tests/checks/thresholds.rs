//! thresholds
