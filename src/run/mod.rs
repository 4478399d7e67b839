//! What was recorded: the manifest, the frames, the logs.

mod block;
mod clock;
mod decode;
pub mod draft;
pub mod frames;
mod gaps;
mod guess;
mod keys;
mod load_section;
pub mod logs;
pub mod manifest;
mod order;
mod plan_section;
mod propose;
pub mod review;
mod series;
mod stamps;
mod tags;
mod textlog;
mod times;

pub use block::block_mean;
pub use clock::{Clock, ClockError, parse_offset, parse_stamp};
pub use decode::{Decoded, FrameFault, MAX_PIXELS, repeats};
pub use frames::{FrameEntry, FrameSequence, FramesError};
pub use gaps::{Gap, describe_gaps};
pub use keys::{KEYS, Key};
pub use load_section::{Dimension, FixtureName, Hold, LoadSection, Sense, Side};
pub use logs::{CellAt, CellLog, LoadAt, LoadLog, LogFacts};
pub use manifest::{Manifest, ManifestError};
pub use plan_section::{PlanSection, PlannedStep};
pub use review::{Rejection, Review};
pub use series::Series;
pub use textlog::{Layout, LogError};
