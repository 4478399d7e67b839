//! Statistics: pure functions on slices, no images.
