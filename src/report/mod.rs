//! Tables, figures, overlay and page. Formats a finished [`Results`](crate::results::Results) and computes nothing.
//!
//! ```text
//! schema     every column of every table, once      palette    the colours, once
//! tables     schema + rows → CSV, Parquet           drawing    shapes of a figure → svg, raster
//! records    traces.ndjson, summary.json            axes       panels, scales, ticks
//! words      numbers and times for the eye          figures/   one file a figure
//! verdict    the run in four sentences              page       report.html
//! effect     what load and charge did, in words     outline    words as curves
//! paper      figures at column widths, with data    animation  growth.gif
//! stale      hidden folders beside it, swept
//! write      the output folder, swapped in whole
//! comparison/  runs under different loads: verdict, figures, tables, page
//! ```

pub mod animation;
pub mod axes;
pub mod comparison;
pub mod drawing;
pub mod effect;
pub mod figures;
pub mod outline;
pub mod page;
pub mod palette;
pub mod paper;
pub mod raster;
pub mod records;
pub mod schema;
pub mod stale;
pub mod svg;
pub mod tables;
pub mod verdict;
pub mod words;
pub mod write;

pub(crate) mod data_uri;
mod error;
#[cfg(test)]
mod example;

pub use error::Error;
pub use write::{Save, write};
