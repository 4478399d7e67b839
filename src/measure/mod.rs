//! Traces and load to rows: one row type per table.
//!
//! Field names are the column names of the tables. `None` is an absent value; it is never written as 0.

mod build;
mod charge;
pub mod course;
pub mod geometry;
mod rows;
mod uncertainty;

pub use build::{Measured, Scale, Stretch, UsedFrame, measure};
pub use charge::{C_PER_MAH, FARADAY_C_PER_MOL, METALS, Metal};
pub use rows::{FilamentRow, ForecastRow, FrameRow, GrowthRow, PathRow};
pub use uncertainty::tip_px as tip_uncertainty_px;
