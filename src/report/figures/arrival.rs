//! When metal arrived, on the colours of the arrival ramp: one scale for overlay, player and strip.

use super::run_time;
use crate::report::axes::{Range, TimeUnit};
use crate::report::palette::Ink;
use crate::results::Results;

/// Colours told apart on the ramp: more than an eye can.
pub(in crate::report) const COLOURS: u8 = 32;

/// From the first arrival to the end of the run.
pub(in crate::report) struct ArrivalScale<'a> {
    results: &'a Results,
    /// First arrival and end of the run, s.
    pub(in crate::report) time: Range,
    /// The unit the run is read in.
    pub(in crate::report) unit: TimeUnit,
}

impl<'a> ArrivalScale<'a> {
    /// Of a run; from its start when nothing arrived.
    pub(in crate::report) fn of(results: &'a Results) -> Self {
        let (run, unit) = run_time(results);
        let frames = results.trace.paths.iter().flat_map(|path| &path.points).map(|point| point.arrival);
        let first = frames.min().and_then(|frame| results.frames.get(frame)).map_or(0.0, |row| row.time_s);
        Self { results, time: Range::new(first.min(run.high), run.high), unit }
    }

    /// Colour of what arrived at a frame.
    pub(in crate::report) fn ink(&self, frame: usize) -> Ink {
        let at = self.results.frames.get(frame).map_or(self.time.low, |row| row.time_s);
        let share = (at - self.time.low) / (self.time.high - self.time.low);
        colour((share.clamp(0.0, 1.0) * f64::from(COLOURS - 1)).round() as u8)
    }
}

/// The colour of a step from 0 to `COLOURS - 1`.
pub(in crate::report) fn colour(step: u8) -> Ink {
    Ink::Arrival((f64::from(step) * 255.0 / f64::from(COLOURS - 1)) as u8)
}
