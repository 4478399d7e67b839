//! survival
