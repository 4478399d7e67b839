//! When metal arrived, on the colours of the arrival ramp: one scale for overlay, player and strip; and where each
//! filament stood at round times.

use super::run_time;
use crate::measure::geometry::local_directions;
use crate::report::axes::{Range, TimeUnit};
use crate::report::palette::Ink;
use crate::report::words::trimmed;
use crate::results::Results;
use crate::trace::TracePath;

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
        colour(self.step(frame))
    }

    /// Its step on the ramp, from 0 to `COLOURS - 1`.
    pub(in crate::report) fn step(&self, frame: usize) -> u8 {
        let at = self.results.frames.get(frame).map_or(self.time.low, |row| row.time_s);
        let share = (at - self.time.low) / (self.time.high - self.time.low);
        (share.clamp(0.0, 1.0) * f64::from(COLOURS - 1)).round() as u8
    }

    /// Where each filament stood at round times, earliest first; the deepest of each time carries its name.
    pub(in crate::report) fn isochrones(&self) -> Vec<Isochrone> {
        /// Round times at most.
        const TIMES: usize = 8;
        let unit = self.unit.seconds;
        let scaled = Range { low: self.time.low / unit, high: self.time.high / unit };
        let mut all = Vec::new();
        for time in scaled.ticks(TIMES).into_iter().filter(|time| *time > scaled.low && *time < scaled.high) {
            let from = all.len();
            all.extend(self.results.trace.paths.iter().filter_map(|path| self.crossing(path, time * unit)));
            let depth = |mark: &Isochrone| self.depth(mark.at);
            let deepest = all[from..].iter_mut().max_by(|a, b| depth(a).total_cmp(&depth(b)));
            // A name that has no room beside its stroke is left out.
            if let Some(mark) = deepest.filter(|mark| mark.beside[0] < (1.0 - NAME_ROOM) * self.width()) {
                mark.words = Some(format!("{} {}", trimmed(time, 4), self.unit.name));
            }
        }
        all
    }

    /// The stroke across a path where it stood at a time; `None` where it was not under way then.
    fn crossing(&self, path: &TracePath, time_s: f64) -> Option<Isochrone> {
        let width = self.width();
        let at_s = |arrival: usize| self.results.frames.get(arrival).map_or(f64::INFINITY, |row| row.time_s);
        let reached = path.points.partition_point(|point| at_s(point.arrival) <= time_s);
        if reached == 0 || reached == path.points.len() {
            return None;
        }
        let point = path.points.get(reached - 1)?;
        let direction = local_directions(&path.points).get(reached - 1)?.to_radians();
        let half = HALF_STROKE * width + 0.5 * point.width;
        let (across_x, across_y) = (half * libm::sin(direction), half * libm::cos(direction));
        Some(Isochrone {
            at: [point.x, point.y],
            stroke: [[point.x - across_x, point.y - across_y], [point.x + across_x, point.y + across_y]],
            beside: [point.x + across_x.abs() + 0.006 * width, point.y + 0.006 * width],
            arrival: point.arrival,
            size: LETTER_SIZE * width,
            words: None,
        })
    }

    /// Width of the frame, px.
    fn width(&self) -> f64 {
        f64::from(self.results.facts.frame_size[0].max(1))
    }

    /// Distance from the plating edge, px, for comparing.
    fn depth(&self, p: [f64; 2]) -> f64 {
        let edge = &self.results.facts.plating_edge;
        crate::trace::edges::Polyline::new(edge.clone()).map_or(0.0, |edge| edge.nearest(p).distance)
    }
}

/// Half the length of a stroke beyond the line's own half width, and the height of its name, in widths of the picture.
const HALF_STROKE: f64 = 0.009;
const LETTER_SIZE: f64 = 0.019;

/// Room that a name takes, in widths of the picture.
const NAME_ROOM: f64 = 0.1;

/// Where a filament stood at a round time, px.
pub(in crate::report) struct Isochrone {
    /// On its centre-line.
    pub(in crate::report) at: [f64; 2],
    /// Across it.
    pub(in crate::report) stroke: [[f64; 2]; 2],
    /// The frame of that point.
    pub(in crate::report) arrival: usize,
    /// Where its name stands.
    pub(in crate::report) beside: [f64; 2],
    /// Height of the name.
    pub(in crate::report) size: f64,
    /// The time in words, at the deepest of each time.
    pub(in crate::report) words: Option<String>,
}

/// The colour of a step from 0 to `COLOURS - 1`.
pub(in crate::report) fn colour(step: u8) -> Ink {
    Ink::Arrival((f64::from(step) * 255.0 / f64::from(COLOURS - 1)) as u8)
}
