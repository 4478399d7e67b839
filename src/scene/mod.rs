//! From a recorded frame to one comparable with the bare reference.

pub mod drift;
pub mod light;
pub mod quality;
