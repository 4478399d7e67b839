//! scoring
