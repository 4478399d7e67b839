//! Traces and load to rows: one row type per table.
//!
//! Field names are the column names of the tables. `None` is an absent value; it is never written as 0.

mod rows;

pub use rows::{FilamentRow, ForecastRow, FrameRow, GrowthRow, PathRow};
