//! Response against dose: runs, the curve, the dose for half with its interval, and the user's reference band.

use super::{BELOW, LEFT, RIGHT, Shown, key, named};
use crate::compare::threshold::{DoseResponse, Response};
use crate::report::axes::{Panel, Range, SMALL};
use crate::report::drawing::{Anchor, Drawing, Point};
use crate::report::figures::Format;
use crate::report::palette::Ink;

pub(super) fn turned(shown: Shown<'_>, format: Format) -> Option<Drawing> {
    draw(shown, &shown.found.turned, format)
}

pub(super) fn along(shown: Shown<'_>, format: Format) -> Option<Drawing> {
    draw(shown, &shown.found.along_plates, format)
}

fn draw(shown: Shown<'_>, response: &DoseResponse, format: Format) -> Option<Drawing> {
    let [low, high] = response.tested_mpa.filter(|[low, high]| high > low)?;
    let reference = shown.found.reference_mpa.as_ref();
    let room = 0.06 * (high - low);
    let far = reference.map_or(high, |r| high.max(r.mpa[1].min(high + 0.5 * (high - low))));
    let (heading, y, level): (_, _, fn(f64) -> f64) = match response.response {
        Response::Turned => ("share of the filaments turned aside", Range::new(-0.04, 1.04), |share| share),
        Response::AlongPlates => ("alignment with the plates", Range::new(-1.08, 1.08), |share| 2.0 * share - 1.0),
    };
    let mut drawing = Drawing::new(format.width(), 0.0, format!("{heading} against dose"));
    let dosed: Vec<usize> = response.runs.iter().map(|s| s.group).collect();
    let top = key(&mut drawing, 0.0, &named(shown, |g| dosed.contains(&g))) + 36.0;
    let height = if format == Format::Narrow { 240.0 } else { 300.0 };
    let x = Range::new(low - room, far + room);
    let panel = Panel { left: LEFT, top, width: format.width() - LEFT - RIGHT, height, x, y };
    drawing.height = top + height + BELOW;
    if let Some(reference) = reference {
        upright(&mut drawing, &panel, reference.mpa, Ink::Load, 0.13);
        let at = panel.across(reference.mpa[0].max(x.low));
        drawing.text([at + 4.0, top + 12.0], reference.source.clone(), SMALL, Ink::Load, Anchor::Start);
    }
    if response.half_mpa.is_some() {
        let ends = [response.ci95[0].unwrap_or(x.low), response.ci95[1].unwrap_or(x.high)];
        upright(&mut drawing, &panel, ends, Ink::Text, 0.10);
    }
    panel.draw_y(&mut drawing, heading, Ink::Text);
    panel.draw_x(&mut drawing, "dose (MPa)");
    if let Some(half) = response.half_mpa.filter(|h| (x.low..=x.high).contains(h)) {
        let at = panel.across(half);
        drawing.dashed(vec![[at, panel.top], [at, panel.bottom()]], Ink::Text, 1.4);
    }
    let line: Vec<Point> = response.line.iter().map(|[dose, share]| panel.at(*dose, level(*share))).collect();
    drawing.line(line, Ink::Text, 1.8);
    let looks = shown.looks();
    let most = response.runs.iter().map(|s| s.filaments).fold(1.0, f64::max);
    for run in &response.runs {
        let radius = 2.5 + 4.5 * (run.filaments / most).sqrt();
        drawing.disc(panel.at(run.dose_mpa, level(run.share)), radius, looks[run.group].ink, 0.55);
    }
    Some(drawing)
}

/// A band from dose to dose over the panel's height, as far as it lies on it.
fn upright(drawing: &mut Drawing, panel: &Panel, ends: [f64; 2], ink: Ink, opacity: f64) {
    let [a, b] = ends.map(|dose| panel.across(dose.clamp(panel.x.low, panel.x.high)));
    if b > a {
        drawing.area(vec![[a, panel.top], [b, panel.top], [b, panel.bottom()], [a, panel.bottom()]], ink, opacity);
    }
}
