//! Alignment against time over the load, on one time axis.

use super::key::{self, Mark};
use super::{Format, load, run_time, stack};
use crate::report::axes::{Panel, Range, SMALL};
use crate::report::drawing::{Anchor, Drawing};
use crate::report::palette::Ink;
use crate::results::Results;

pub(super) fn draw(results: &Results, format: Format) -> Option<Drawing> {
    results.frames.iter().find(|row| row.alignment.is_some() || row.growth_alignment.is_some())?;
    let (time, unit) = run_time(results);
    let known = load::samples(results);
    let loads = known.as_ref().map_or(Range { low: 0.0, high: 1.0 }, |(_, samples)| load::range(samples));
    let heights = if format.is_narrow() { [180.0, 100.0] } else { [220.0, 110.0] };
    let scale = Range { low: -1.1, high: 1.1 };
    let ([above, below], total) = stack(format, time, [(heights[0], scale), (heights[1], loads)]);
    let mut drawing = Drawing::new(format.width(), total, "Alignment with the load axis and the load, against time");
    above.draw_y(&mut drawing, "alignment (1)", Ink::Metal);
    ends(&mut drawing, &above);
    measured(&mut drawing, &above, results);
    let names = if format.is_narrow() { ["all", "new"] } else { ["all that was traced", "new in the frame"] };
    key::row(&mut drawing, &above, &[(Mark::Line, Ink::Metal, names[0]), (Mark::Disc, Ink::Metal, names[1])]);
    load::draw(&mut drawing, &below, known.as_ref());
    load::strokes(&mut drawing, &below, results);
    below.draw_time(&mut drawing, unit);
    Some(drawing)
}

/// What the two ends of the scale mean, and the middle.
fn ends(drawing: &mut Drawing, panel: &Panel) {
    drawing.line(vec![panel.at(panel.x.low, 0.0), panel.at(panel.x.high, 0.0)], Ink::Quiet, 1.0);
    for (value, words, shift) in [(1.0, "along the load axis", 14.0), (-1.0, "across it", -6.0)] {
        drawing.text([panel.left + 6.0, panel.up(value) + shift], words, SMALL, Ink::Quiet, Anchor::Start);
    }
}

fn measured(drawing: &mut Drawing, panel: &Panel, results: &Results) {
    let usable = || results.frames.iter().filter(|row| row.usable);
    for row in usable() {
        if let Some(value) = row.growth_alignment {
            drawing.disc(panel.at(row.time_s, value), 2.6, Ink::Metal, 0.45);
        }
    }
    panel.line(drawing, usable().map(|row| (row.time_s, row.alignment)), Ink::Metal, 2.4);
}
