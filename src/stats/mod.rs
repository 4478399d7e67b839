//! Statistics: pure functions on slices, no images, runs or tables.
//!
//! - Axes: [`angles`], [`axial`] means and intervals, [`concentration`], tests of [`uniformity`]; with the filament as the
//!   sampling unit: [`filaments`] on [`clusters`].
//! - The load within a run: [`turns`]; what mechanics predicts: [`kink`].
//! - Lines and trends: [`regress`], [`theil_sen`], [`trend`], [`isotonic`]; forecasts judged: [`scoring`].
//! - Between runs: [`survival`], [`dose`], exact tests by [`arrangements`].
//! - Shared: [`bootstrap`], [`distributions`], [`linear`], [`order`]. Whether all this keeps its word: [`calibration`].

pub mod angles;
pub mod arrangements;
pub mod axial;
pub mod bootstrap;
pub mod calibration;
pub mod clusters;
pub mod concentration;
pub mod distributions;
pub mod dose;
pub mod filaments;
pub mod isotonic;
pub mod kink;
pub mod linear;
pub mod order;
pub mod regress;
pub mod scoring;
pub mod survival;
pub mod theil_sen;
pub mod trend;
pub mod turns;
pub mod uniformity;
