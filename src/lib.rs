//! `veerlog` traces metal filaments in films of ceramic electrolyte cells, measures their angle to
//! the logged mechanical load and forecasts the short circuit.
//!
//! The flow, one direction only (a module reads from those above it, never from those below):
//!
//! ```text
//! run        what was recorded: run.toml, frames, load and cell logs
//!  └ scene     a recorded frame → one comparable with the bare cell (drift, light, quality)
//!     └ trace     scenes → filaments: arrivals, centre-lines, graph, growth
//!        └ load      force → stress, load axis, expected axis, dose
//!           └ measure   traces + load → one row type per table
//!              └ stats     axial statistics, intervals, regression (pure functions on slices)
//!                 └ forecast  first passage of the gap, its own record, short detection
//!                    └ results   the one struct that every output receives
//!                       └ compare   finished runs → groups → effect of the load
//!                          └ report    tables, figures, page
//! pipeline     calls the stages in order
//! synth        frames with known truth, and a run scored against it
//! cli          the commands
//! ```
//!
//! ```
//! use std::path::Path;
//! use veerlog::pipeline::{Choices, Quiet, analyse};
//!
//! let first_minutes = Choices { until_s: Some(300.0) };
//! let results = analyse(Path::new("synthetic-frames/still-1"), first_minutes, &Quiet)?;
//! assert!(results.filaments.iter().all(|filament| filament.first_time_s <= 300.0));
//! assert!(results.frames.iter().all(|frame| frame.time_s <= 300.0));
//! # Ok::<(), veerlog::Error>(())
//! ```
//!
//! Safety: a forecast is no interlock. A cell on test can vent, burn or shatter, and lithium reacts
//! with water; follow the lab's own rules, local codes and qualified people.

pub mod cli;
pub mod compare;
pub mod error;
pub mod forecast;
pub mod load;
pub mod measure;
pub mod pipeline;
pub mod report;
pub mod results;
pub mod run;
pub mod scene;
pub mod stats;
pub mod synth;
pub mod trace;

pub use error::Error;
