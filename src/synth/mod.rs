//! Frames with known truth, and a run scored against it.
