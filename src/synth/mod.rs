//! Frames with known truth, and a run scored against it.
//!
//! ```text
//! scenario  what to make (TOML)      history   load and current at any time
//!  └ grow     tips step, steer, branch, stall, bridge
//!     ├ truth    the contract's measures of that growth
//!     └ recorder drift, light, focus, dust, lost frames
//!        └ ceramic → canvas → render   the scene, its samples, one frame
//!           └ files    run folder and truth/
//! score     an output against that truth
//! ```
//! All specimens are invented. The simulator is a judge of the tracer, not a model of a real cell.

pub mod canvas;
pub mod ceramic;
pub mod dice;
mod draw;
mod error;
mod files;
mod grow;
pub mod history;
mod imaging;
pub mod polyline;
pub mod recorder;
pub mod render;
pub mod scenario;
pub mod score;
pub mod truth;

pub use draw::{draw, draw_bare};
pub use error::SynthError;
pub use files::{rebuild, write_run};
pub use grow::{GrownPoint, Growth, Track, TrackEnd, direction_at, grow};
pub use imaging::{Grade, Imaging, Light, Psf, Texture};
pub use scenario::{Polarity, Scenario};
