//! Frames with known truth, and a run scored against it.
//!
//! ```text
//! scenario  what to make (TOML; its tables in plan, imaging), or draw: by chance within a grade
//!  └ grow     tips step, steer, branch, stall, bridge (tip, track; history: load and current at any time)
//!     ├ truth    the contract's measures of that growth
//!     └ recorder drift, light, focus, dust, lost frames
//!        └ render   one frame: ceramic (texture, canvas) and ink through lens, light, camera
//!           └ files    run folder (runfile, logs) and truth/
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
mod logs;
pub mod plan;
pub mod polyline;
pub mod recorder;
pub mod render;
mod runfile;
pub mod scenario;
pub mod score;
mod texture;
mod tip;
mod track;
pub mod truth;

pub use draw::{draw, draw_bare};
pub use error::SynthError;
pub use files::{rebuild, write_run};
pub use grow::grow;
pub use imaging::{Grade, Imaging, Light, Psf, Texture};
pub use scenario::{Polarity, Scenario};
pub use track::{GrownPoint, Growth, Track, TrackEnd, direction_at};
