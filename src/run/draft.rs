//! draft
use std::path::Path;
/// Patterns.
#[must_use]
pub fn frame_patterns(_folder: &Path) -> Vec<(String, usize)> {
    Vec::new()
}
