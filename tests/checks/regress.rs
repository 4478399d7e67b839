//! regress
