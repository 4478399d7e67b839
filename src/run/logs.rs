//! logs
