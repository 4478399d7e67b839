//! Depth against time, a line a run.

use super::{BELOW, LEFT, RIGHT, Shown, key, named};
use crate::report::axes::{Panel, Range, TimeUnit};
use crate::report::drawing::{Drawing, thin};
use crate::report::figures::Format;
use crate::report::palette::Ink;
use crate::run::manifest::Ended;

pub(super) fn draw(shown: Shown<'_>, format: Format) -> Option<Drawing> {
    let runs = shown.records;
    let deepest = runs.iter().flat_map(|r| &r.depths).map(|d| d.1).fold(0.0_f64, f64::max);
    let last = runs.iter().flat_map(|r| &r.depths).map(|d| d.0).fold(0.0_f64, f64::max);
    if deepest <= 0.0 || last <= 0.0 {
        return None;
    }
    let height = if format == Format::Narrow { 240.0 } else { 330.0 };
    let mut drawing = Drawing::new(format.width(), 0.0, "Depth of the deepest filament against time, a line a run");
    let named = named(shown, |_| true);
    let top = key(&mut drawing, 0.0, &named) + 34.0;
    let panel = Panel {
        left: LEFT,
        top,
        width: format.width() - LEFT - RIGHT,
        height,
        x: Range::new(0.0, last * 1.02),
        y: Range::new(0.0, deepest * 1.08),
    };
    drawing.height = top + height + BELOW;
    panel.draw_y(&mut drawing, "depth (µm)", Ink::Text);
    panel.draw_time(&mut drawing, TimeUnit::of(last));
    for (group, (look, _)) in shown.found.groups.iter().zip(&named) {
        for run in group.members.iter().map(|&i| &runs[i]) {
            let points: Vec<_> = run.depths.iter().map(|(t, d)| panel.at(*t, *d)).collect();
            drawing.stroke(thin(&points, panel.width as usize), look.ink, 1.8, look.dash, 0.9);
            if let Some(&[x, y]) = points.last() {
                if run.ended == Ended::Short {
                    drawing.disc([x, y], 4.0, look.ink, 1.0);
                } else {
                    drawing.line(vec![[x, y - 5.0], [x, y + 5.0]], look.ink, 2.0);
                }
            }
        }
    }
    Some(drawing)
}
