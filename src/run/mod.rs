//! What was recorded: the manifest, the frames, the logs.

pub mod draft;
pub mod frames;
pub mod logs;
pub mod manifest;
