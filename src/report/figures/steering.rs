//! Direction of new growth against time, over the load's axis and its size: did growth turn when the load did?

use super::key::{self, Mark};
use super::{Format, load, run_time, stack};
use crate::measure::{FrameRow, GrowthRow};
use crate::report::axes::{NORMAL, Panel, Range, SMALL};
use crate::report::drawing::{Anchor, Drawing};
use crate::report::palette::Ink;
use crate::results::{Results, TurnRow, TurnVerdict};

/// Spacing of the lines of equal direction, degrees.
const TICK_DEG: f64 = 45.0;
/// Frames over which the mean direction is drawn, on each side.
const SIDE_FRAMES: usize = 1;
/// A line breaks where the direction jumps by more, degrees: it has no way between.
const BREAK_DEG: f64 = 30.0;
/// Steps that are named; with more the names would cover one another.
const NAMED: [usize; 2] = [6, 3];

pub(super) fn draw(results: &Results, format: Format) -> Option<Drawing> {
    results.growth.first()?;
    let (time, unit) = run_time(results);
    let known = load::samples(results);
    let loads = known.as_ref().map_or(Range { low: 0.0, high: 1.0 }, |(_, samples)| load::range(samples));
    let low = seam(results);
    let directions = Range { low, high: low + 180.0 };
    let heights = if format.is_narrow() { [230.0, 110.0] } else { [300.0, 125.0] };
    let ([above, below], total) = stack(format, time, [(heights[0], directions), (heights[1], loads)]);
    let mut drawing = Drawing::new(format.width(), total, "Direction of new growth and the load, against time");
    let dial = Dial { panel: above };
    dial.draw_scale(&mut drawing);
    dial.steps(&mut drawing, results, NAMED[usize::from(format.is_narrow())]);
    dial.load_axis(&mut drawing, results);
    dial.growth(&mut drawing, results);
    let names = if format.is_narrow() { ["new", "mean", "load"] } else { ["new growth", "its mean", "load axis"] };
    let axis_known = results.frames.iter().any(|row| row.load_direction_deg.is_some());
    let entries = [
        (Mark::Disc, Ink::Metal, names[0]),
        (Mark::Line, Ink::Metal, names[1]),
        (Mark::Band(0.55), Ink::Load, names[2]),
    ];
    key::row(&mut drawing, &above, &entries[..if axis_known { 3 } else { 2 }]);
    load::draw(&mut drawing, &below, known.as_ref());
    for turn in shown(results, &below) {
        mark(&mut drawing, &below, turn.time_s);
    }
    below.draw_time(&mut drawing, unit);
    Some(drawing)
}

/// Where half a turn is cut open: the direction farthest from growth and from the load axis, each counting as much.
fn seam(results: &Results) -> f64 {
    /// Directions tried, degrees apart.
    const STEP_DEG: f64 = 15.0;
    let length: f64 = results.growth.iter().map(|row| row.length_um).sum();
    let frames = results.frames.len().max(1) as f64;
    let near = |angle: f64, low: f64| {
        let off = (angle - low).rem_euclid(180.0);
        let off = off.min(180.0 - off) / 90.0;
        (1.0 - off) * (1.0 - off)
    };
    let crowd = |low: f64| {
        let growth: f64 = results.growth.iter().map(|row| row.length_um * near(row.angle_deg, low)).sum();
        let load: f64 =
            results.frames.iter().filter_map(|row| row.load_direction_deg).map(|axis| near(axis, low)).sum();
        growth / length + load / frames
    };
    let tried = (-6..6).map(|i| STEP_DEG * f64::from(i)).map(|low| (low, crowd(low)));
    tried.fold((0.0, f64::INFINITY), |best, next| if next.1 < best.1 { next } else { best }).0
}

/// The steps that lie in the time shown.
fn shown<'a>(results: &'a Results, panel: &Panel) -> impl Iterator<Item = &'a TurnRow> {
    let time = panel.x;
    results.turns.iter().filter(move |turn| (time.low..=time.high).contains(&turn.time_s))
}

/// A dashed line where the load stepped.
fn mark(drawing: &mut Drawing, panel: &Panel, time_s: f64) {
    let x = panel.across(time_s);
    drawing.dashed(vec![[x, panel.top], [x, panel.bottom()]], Ink::Text, 1.2);
}

/// Length-weighted axial mean of directions and lengths; `None` where they cancel or there is none.
fn mean_axis(pieces: impl Iterator<Item = (f64, f64)>) -> Option<f64> {
    crate::stats::axial::weighted_axial_mean(pieces)?.axis_deg
}

/// A panel of directions: half a turn from bottom to top, both ends the same direction.
struct Dial {
    panel: Panel,
}

impl Dial {
    /// The direction as a value of the panel.
    fn fold(&self, degrees: f64) -> f64 {
        self.panel.y.low + (degrees - self.panel.y.low).rem_euclid(180.0)
    }

    fn draw_scale(&self, drawing: &mut Drawing) {
        let panel = &self.panel;
        drawing.bold([0.0, panel.top - 16.0], "direction in the picture (°)", NORMAL, Ink::Metal, Anchor::Start);
        let first = (panel.y.low / TICK_DEG).ceil();
        for i in 0..=4 {
            let value = (first + f64::from(i)) * TICK_DEG;
            if value <= panel.y.high {
                let y = panel.up(value);
                drawing.line(vec![[panel.left, y], [panel.right(), y]], Ink::Grid, 1.0);
                let label = format!("{:.0}", value.rem_euclid(180.0));
                drawing.text([panel.left - 7.0, y + 4.0], label, SMALL, Ink::Quiet, Anchor::End);
            }
        }
    }

    /// The load axis as a broad line, held from frame to frame; where it pulls, the axis across it as a dashed one.
    fn load_axis(&self, drawing: &mut Drawing, results: &Results) {
        let held = |axis: fn(&FrameRow) -> Option<f64>| {
            let ends = |pair: &[FrameRow]| {
                let at = axis(&pair[0]).map(|axis| self.fold(axis));
                [(pair[0].time_s, at), (pair[1].time_s, at)]
            };
            results.frames.windows(2).flat_map(ends).collect::<Vec<_>>()
        };
        let points = |run: Vec<(f64, f64)>| {
            let points: Vec<_> = run.into_iter().map(|(t, v)| self.panel.at(t, v)).collect();
            crate::report::drawing::thin(&points, self.panel.width as usize)
        };
        for run in unbroken(&held(|row| row.load_direction_deg)) {
            drawing.stroke(points(run), Ink::Load, 7.0, 0.0, 0.55);
        }
        for run in unbroken(&held(across)) {
            drawing.stroke(points(run), Ink::Load, 2.6, 4.0, 1.0);
        }
    }

    /// Pieces as discs, as large as they are long, and their mean over neighbouring frames.
    fn growth(&self, drawing: &mut Drawing, results: &Results) {
        let time = self.panel.x;
        let seen: Vec<&GrowthRow> =
            results.growth.iter().filter(|row| (time.low..=time.high).contains(&row.time_s)).collect();
        let longest = seen.iter().map(|row| row.length_um).fold(0.0, f64::max);
        for row in &seen {
            let radius = 1.4 + 2.2 * (row.length_um / longest).sqrt();
            drawing.disc(self.panel.at(row.time_s, self.fold(row.angle_deg)), radius, Ink::Metal, 0.32);
        }
        let frames: Vec<_> = seen.chunk_by(|a, b| a.frame == b.frame).collect();
        let means: Vec<(f64, Option<f64>)> = (0..frames.len())
            .map(|i| {
                let near = i.saturating_sub(SIDE_FRAMES)..=(i + SIDE_FRAMES).min(frames.len() - 1);
                let pieces = frames[near].iter().flat_map(|rows| rows.iter().map(|row| (row.angle_deg, row.length_um)));
                (frames[i][0].time_s, mean_axis(pieces).map(|axis| self.fold(axis)))
            })
            .collect();
        for run in unbroken(&means) {
            self.panel.line(drawing, run.into_iter().map(|(t, v)| (t, Some(v))), Ink::Metal, 2.4);
        }
    }

    /// Where the load stepped, what growth did, and when it turned.
    fn steps(&self, drawing: &mut Drawing, results: &Results, named: usize) {
        for (i, turn) in shown(results, &self.panel).enumerate() {
            if let (Some(low), Some(high)) = (turn.lag_low_s, turn.lag_high_s) {
                self.turned(drawing, turn.time_s + low, turn.time_s + high);
            }
            mark(drawing, &self.panel, turn.time_s);
            if results.turns.len() <= named {
                self.name(drawing, turn, i);
            }
        }
    }

    /// The interval in which growth turned.
    fn turned(&self, drawing: &mut Drawing, from_s: f64, to_s: f64) {
        let panel = &self.panel;
        let [left, right] = [from_s, to_s].map(|t| panel.across(t).min(panel.right()));
        let corners = vec![[left, panel.top], [right, panel.top], [right, panel.bottom()], [left, panel.bottom()]];
        drawing.area(corners, Ink::Metal, 0.13);
    }

    fn name(&self, drawing: &mut Drawing, turn: &TurnRow, row: usize) {
        let words = match turn.verdict {
            TurnVerdict::Turned => "turned",
            TurnVerdict::DidNothing => "did nothing",
            TurnVerdict::TooFew => "too few to say",
            TurnVerdict::TakenOff => "load off",
        };
        let x = self.panel.across(turn.time_s);
        let room = self.panel.right() - x > words.chars().count() as f64 * SMALL * key::BOLD + 8.0;
        let (shift, anchor) = if room { (5.0, Anchor::Start) } else { (-5.0, Anchor::End) };
        let y = self.panel.top + 12.0 + 13.0 * (row % 2) as f64;
        drawing.bold([x + shift, y], words, SMALL, Ink::Text, anchor);
    }
}

/// The axis along which growth is expected under a pull: across the load axis.
fn across(row: &FrameRow) -> Option<f64> {
    row.stress_mpa.filter(|stress| *stress < 0.0)?;
    row.load_direction_deg.map(|axis| axis + 90.0)
}

/// Stretches without a missing value or a jump.
fn unbroken(samples: &[(f64, Option<f64>)]) -> Vec<Vec<(f64, f64)>> {
    let mut runs: Vec<Vec<(f64, f64)>> = vec![Vec::new()];
    for (time, value) in samples {
        let Some(value) = value else {
            runs.push(Vec::new());
            continue;
        };
        match runs.last_mut() {
            Some(run) if run.last().is_none_or(|(_, last)| (value - last).abs() <= BREAK_DEG) => {
                run.push((*time, *value))
            }
            _ => runs.push(vec![(*time, *value)]),
        }
    }
    runs.retain(|run| !run.is_empty());
    runs
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_jump_or_a_gap_breaks_a_line() {
        let runs =
            unbroken(&[(0.0, Some(10.0)), (1.0, Some(12.0)), (2.0, Some(100.0)), (3.0, None), (4.0, Some(101.0))]);
        assert_eq!(runs.iter().map(Vec::len).collect::<Vec<_>>(), [2, 1, 1]);
        assert!(unbroken(&[]).is_empty());
    }
}
