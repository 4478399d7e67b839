//! threshold
