//! Kaplan–Meier curves by group with intervals, ticks where runs ended without a short, and the numbers still followed.

use super::{LEFT, Look, RIGHT, Shown, key, named};
use crate::compare::endings::{Clock, Endings, GroupEnds};
use crate::report::axes::{Panel, Range, SMALL, TimeUnit};
use crate::report::drawing::{Anchor, Drawing, Point};
use crate::report::figures::Format;
use crate::report::palette::Ink;

pub(super) fn time(shown: Shown<'_>, format: Format) -> Option<Drawing> {
    draw(shown, shown.found.time.as_ref()?, format)
}

pub(super) fn charge(shown: Shown<'_>, format: Format) -> Option<Drawing> {
    draw(shown, shown.found.charge.as_ref()?, format)
}

/// Height of a row of the numbers at risk.
const ROW: f64 = 17.0;

fn draw(shown: Shown<'_>, ends: &Endings, format: Format) -> Option<Drawing> {
    let last = ends.groups.iter().flat_map(|g| &g.ends).copied().fold(0.0, f64::max);
    if last <= 0.0 {
        return None;
    }
    let title = match ends.clock {
        Clock::Time => "Share of the runs without a short against time",
        Clock::Charge => "Share of the runs without a short against charge",
    };
    let mut drawing = Drawing::new(format.width(), 0.0, title);
    let followed = |g: usize| ends.groups[g].runs > 0;
    let names = named(shown, followed);
    let top = key(&mut drawing, 0.0, &names) + 34.0;
    let height = if format == Format::Narrow { 210.0 } else { 270.0 };
    let x = Range::new(0.0, last * 1.03);
    let panel = Panel { left: LEFT, top, width: format.width() - LEFT - RIGHT, height, x, y: Range::new(0.0, 1.0) };
    panel.draw_y(&mut drawing, "share without a short", Ink::Text);
    let (ticks, unit) = match ends.clock {
        Clock::Time => {
            let unit = TimeUnit::of(last);
            panel.draw_time(&mut drawing, unit);
            let scaled = Range::new(0.0, x.high / unit.seconds);
            (scaled.ticks(if format == Format::Narrow { 4 } else { 8 }), unit.seconds)
        }
        Clock::Charge => {
            panel.draw_x(&mut drawing, "charge (mAh/cm²)");
            (x.ticks(if format == Format::Narrow { 4 } else { 8 }), 1.0)
        }
    };
    let looks: Vec<(usize, Look)> = shown.looks().into_iter().enumerate().filter(|(g, _)| followed(*g)).collect();
    for (g, look) in &looks {
        curve(&mut drawing, &panel, &ends.groups[*g], *look);
    }
    let below = panel.bottom() + 56.0;
    drawing.bold([0.0, below], "runs still followed", SMALL, Ink::Quiet, Anchor::Start);
    for (row, (g, look)) in looks.iter().enumerate() {
        let y = below + ROW * (row + 1) as f64;
        drawing.stroke(vec![[0.0, y - 4.0], [16.0, y - 4.0]], look.ink, 2.6, look.dash, 1.0);
        for tick in &ticks {
            let number = ends.groups[*g].at_risk(tick * unit).to_string();
            drawing.text([panel.across(tick * unit), y], number, SMALL, look.ink, Anchor::Middle);
        }
    }
    drawing.height = below + ROW * looks.len() as f64 + 10.0;
    Some(drawing)
}

fn curve(drawing: &mut Drawing, panel: &Panel, ends: &GroupEnds, look: Look) {
    let last = ends.ends.last().copied().unwrap_or(0.0);
    let steps = |of: &dyn Fn(usize) -> f64| {
        let (mut points, mut level) = (vec![panel.at(0.0, 1.0)], 1.0);
        for (i, point) in ends.curve.iter().enumerate() {
            points.push(panel.at(point.at, level));
            level = of(i);
            points.push(panel.at(point.at, level));
        }
        points.push(panel.at(last, level));
        points
    };
    let limit = |i: usize, end: usize| ends.curve[i].ci95.map_or(ends.curve[i].without, |ci| ci[end]);
    let band: Vec<Point> =
        steps(&|i| limit(i, 0)).into_iter().chain(steps(&|i| limit(i, 1)).into_iter().rev()).collect();
    drawing.area(band, look.ink, 0.10);
    drawing.stroke(steps(&|i| ends.curve[i].without), look.ink, 2.2, look.dash, 1.0);
    for end in &ends.censored {
        let level = ends.curve.iter().take_while(|p| p.at <= *end).last().map_or(1.0, |p| p.without);
        let [x, y] = panel.at(*end, level);
        drawing.line(vec![[x, y - 5.0], [x, y + 5.0]], look.ink, 1.8);
    }
}
