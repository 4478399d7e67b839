//! Synthetic pictures with known lines.
