//! Traces and load to rows: one row type per table.
//!
//! Field names are the column names of the tables. `None` is an absent value; it is never written as 0.

mod build;
pub mod course;
pub mod geometry;
mod rows;
mod uncertainty;

pub use build::{Measured, Scale, UsedFrame, measure};
pub use rows::{FilamentRow, ForecastRow, FrameRow, GrowthRow, PathRow};
