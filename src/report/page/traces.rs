//! The traced centre-lines of the player as SVG: cut into stretches, each with the time step at which it appears and a
//! class for each way of colouring, so that a change of time or colour is a change of one attribute.

use std::fmt::Write;

use super::player::corners;
use crate::measure::geometry::{acute_deg, local_directions};
use crate::report::figures::arrival::{ArrivalScale, COLOURS, colour};
use crate::report::palette::{KINDS, angle, kind};
use crate::results::Results;
use crate::trace::TracePath;

/// Bins of the angle to the load, of 10° each.
const ANGLES: usize = 9;

/// Steps of time at which stretches may appear, at most: few enough that a long run is painted as fast as a short one.
const STEPS: usize = 150;

/// The times at which the player stands: every usable frame.
pub(super) struct Clock<'a> {
    /// Index over all files of each usable frame, rising.
    pub(super) used: Vec<usize>,
    results: &'a Results,
}

impl<'a> Clock<'a> {
    pub(super) fn of(results: &'a Results) -> Self {
        Self { used: results.frames.iter().filter(|row| row.usable).map(|row| row.frame).collect(), results }
    }

    /// Ordinal of the usable frame from which something that arrived at `frame` is shown.
    fn shown_from(&self, frame: usize) -> usize {
        let ordinal = self.used.partition_point(|&used| used < frame);
        let step = self.used.len().div_ceil(STEPS).max(1);
        (ordinal.div_ceil(step) * step).min(self.used.len().saturating_sub(1))
    }

    /// Bin of the angle to the load in force when a point arrived.
    fn bin(&self, arrival: usize, direction_deg: f64) -> Option<usize> {
        let axis = self.results.frames.get(arrival)?.load_direction_deg?;
        let acute = acute_deg(direction_deg, axis);
        Some(((acute / 90.0 * ANGLES as f64) as usize).min(ANGLES - 1))
    }
}

/// A group a filament: first all dark casings, then the colours, so that no casing covers a colour; last a broad line
/// without colour that takes the click.
pub(super) fn draw(results: &Results, clock: &Clock) -> String {
    let arrivals = ArrivalScale::of(results);
    let mut out = String::new();
    for filament in &results.trace.filaments {
        let number = filament.filament;
        let paths: Vec<&TracePath> = results.trace.paths.iter().filter(|path| path.filament == number).collect();
        let stretches: Vec<Stretch> = paths.iter().flat_map(|path| stretches(&arrivals, clock, path)).collect();
        let class = (number as usize).wrapping_sub(1) % KINDS;
        let _infallible =
            write!(out, "<g class=\"filament k{class}\" data-filament=\"{number}\"><title>filament {number}</title>");
        for Stretch { from, points, .. } in &stretches {
            let _infallible = write!(out, "<polyline class=\"casing\" data-from=\"{from}\" points=\"{points}\"/>");
        }
        for Stretch { from, points, look } in &stretches {
            let _infallible = write!(out, "<polyline class=\"{look}\" data-from=\"{from}\" points=\"{points}\"/>");
        }
        for path in paths {
            let points: Vec<[f64; 2]> =
                path.points.iter().step_by(8).chain(path.points.last()).map(|p| [p.x, p.y]).collect();
            let _infallible = write!(out, "<polyline class=\"hit\" points=\"{}\"/>", corners(&points));
        }
        out.push_str("</g>\n");
    }
    out
}

/// Neighbouring points of a path that appear together and look alike.
struct Stretch {
    from: usize,
    points: String,
    look: String,
}

/// Stretches overlap by one point, so that no gap shows.
fn stretches(arrivals: &ArrivalScale, clock: &Clock, path: &TracePath) -> Vec<Stretch> {
    let directions = local_directions(&path.points);
    let looks: Vec<(usize, u8, Option<usize>)> = path
        .points
        .iter()
        .zip(&directions)
        .map(|(point, &direction)| {
            (clock.shown_from(point.arrival), arrivals.step(point.arrival), clock.bin(point.arrival, direction))
        })
        .collect();
    let mut all = Vec::new();
    let mut from = 0;
    for i in 1..path.points.len() {
        if i + 1 == path.points.len() || looks[i] != looks[i + 1] {
            let (shown, step, bin) = looks[i];
            let points: Vec<[f64; 2]> = path.points[from..=i].iter().map(|p| [p.x, p.y]).collect();
            let bin = bin.map_or_else(|| "gx".to_owned(), |bin| format!("g{bin}"));
            all.push(Stretch { from: shown, points: corners(&points), look: format!("a{step} {bin}") });
            from = i;
        }
    }
    all
}

/// The rules that give the classes their colours.
pub(super) fn colours() -> String {
    let mut out = String::new();
    for step in 0..COLOURS {
        let _infallible = write!(out, ".by-arrival .a{step}{{stroke:{}}}", colour(step).light().hex());
    }
    for bin in 0..ANGLES {
        let middle = (bin as f64 + 0.5) / ANGLES as f64;
        let _infallible = write!(out, ".by-angle .g{bin}{{stroke:{}}}", angle(middle).hex());
    }
    for i in 0..KINDS {
        let _infallible = write!(out, ".by-filament .k{i}{{--kind:{}}}", kind(i).hex());
    }
    let ramp: Vec<String> = (0..=8).map(|i| angle(f64::from(i) / 8.0).hex()).collect();
    let _infallible = write!(out, ":root{{--angles:linear-gradient(to right,{})}}", ramp.join(","));
    out
}

/// Where each filament stood at round times: a short stroke across it, named at the deepest.
pub(super) fn isochrones(results: &Results, clock: &Clock) -> String {
    let arrivals = ArrivalScale::of(results);
    let mut out = String::new();
    for mark in arrivals.isochrones() {
        let (from, stroke) = (clock.shown_from(mark.arrival), corners(&mark.stroke));
        let _infallible = write!(
            out,
            "<g data-from=\"{from}\"><polyline class=\"casing\" points=\"{stroke}\"/><polyline points=\"{stroke}\"/>"
        );
        if let Some(words) = mark.words {
            let size = crate::report::words::fixed(mark.size, 1);
            let [x, y] = mark.beside;
            let _infallible = write!(out, "<text x=\"{x:.1}\" y=\"{y:.1}\" font-size=\"{size}\">{words}</text>");
        }
        out.push_str("</g>");
    }
    out
}
