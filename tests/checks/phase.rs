//! phase
