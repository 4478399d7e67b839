//! Speed of the tips against stress and against current density; what did not vary in the run takes no panel.

use super::{ABOVE, BELOW, Format, LEFT, RIGHT};
use crate::report::axes::{Panel, Range};
use crate::report::drawing::Drawing;
use crate::report::palette::Ink;
use crate::results::{ChargeRow, Results};
use crate::stats::order::quantile;

/// Span of stress from which it counts as varied, MPa: the least step of the load.
const STRESS_SPAN_MPA: f64 = 30.0;
/// Span of current from which it counts as varied, as a share of the largest.
const CURRENT_SPAN: f64 = 0.2;
/// Classes of the quantity for which a median is drawn.
const CLASSES: usize = 8;
/// Fewest frames of a class that has a median drawn.
const FEWEST: usize = 4;

/// Frames as points of the quantity and the speed.
type Points = Vec<[f64; 2]>;

pub(super) fn draw(results: &Results, format: Format) -> Option<Drawing> {
    let sides: Vec<(&str, Ink, Points)> =
        [against_stress(results), against_current(results)].into_iter().flatten().collect();
    let speeds = Range::around(sides.iter().flat_map(|(_, _, points)| points).map(|p| p[1]).chain([0.0]))?;
    if sides.is_empty() {
        return None;
    }
    let height = if format.is_narrow() { 170.0 } else { 200.0 };
    let pitch = ABOVE + height + BELOW;
    let mut drawing =
        Drawing::new(format.width(), pitch * sides.len() as f64, "Speed of the tips against stress and current");
    for (i, (heading, ink, points)) in sides.iter().enumerate() {
        let panel = Panel {
            left: LEFT,
            top: ABOVE + pitch * i as f64,
            width: format.width() - LEFT - RIGHT,
            height,
            x: roomy(points),
            y: speeds,
        };
        panel.draw_y(&mut drawing, "tip speed (µm/s)", Ink::Metal);
        panel.draw_x(&mut drawing, heading);
        for [x, y] in points {
            drawing.disc(panel.at(*x, *y), 2.6, *ink, 0.4);
        }
        medians(&mut drawing, &panel, points);
    }
    Some(drawing)
}

fn points(rows: &[ChargeRow], of: fn(&ChargeRow) -> Option<f64>) -> Points {
    rows.iter().filter_map(|row| Some([of(row)?, row.tip_speed_um_per_s?])).collect()
}

/// Largest less smallest, and the largest size.
fn span(points: &Points) -> (f64, f64) {
    let (low, high) = points.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), p| (l.min(p[0]), h.max(p[0])));
    (high - low, low.abs().max(high.abs()))
}

fn against_stress(results: &Results) -> Option<(&'static str, Ink, Points)> {
    let points = points(&results.charge, |row| row.stress_mpa);
    (span(&points).0 >= STRESS_SPAN_MPA).then_some(("stress (MPa), compression positive", Ink::Load, points))
}

fn against_current(results: &Results) -> Option<(&'static str, Ink, Points)> {
    let per_area = points(&results.charge, |row| row.current_ma_per_cm2);
    let (heading, points) = if per_area.is_empty() {
        ("current (mA), plating positive", points(&results.charge, |row| row.current_ma))
    } else {
        ("current density (mA/cm²), plating positive", per_area)
    };
    let (span, largest) = span(&points);
    (largest > 0.0 && span >= CURRENT_SPAN * largest).then_some((heading, Ink::Current, points))
}

/// The scale of the quantity, with room for dots at its ends.
fn roomy(points: &Points) -> Range {
    /// Room on each side, as a share of the span.
    const ROOM: f64 = 0.06;
    let (low, high) = points.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), p| (l.min(p[0]), h.max(p[0])));
    let room = ROOM * (high - low);
    Range::new(low - room, high + room)
}

/// Median and quartiles of the speed in each class of the quantity.
fn medians(drawing: &mut Drawing, panel: &Panel, points: &Points) {
    let width = (panel.x.high - panel.x.low) / CLASSES as f64;
    let class = |p: &[f64; 2]| (((p[0] - panel.x.low) / width) as usize).min(CLASSES - 1);
    for k in 0..CLASSES {
        let own: Vec<&[f64; 2]> = points.iter().filter(|p| class(p) == k).collect();
        let speeds: Vec<f64> = own.iter().map(|p| p[1]).collect();
        let middle = own.iter().map(|p| p[0]).sum::<f64>() / own.len().max(1) as f64;
        let quartiles = [0.25, 0.5, 0.75].map(|share| quantile(&speeds, share));
        if let ([Some(low), Some(median), Some(high)], true) = (quartiles, own.len() >= FEWEST) {
            drawing.line(vec![panel.at(middle, low), panel.at(middle, high)], Ink::Text, 1.6);
            let [x, y] = panel.at(middle, median);
            drawing.line(vec![[x - 9.0, y], [x + 9.0, y]], Ink::Text, 3.0);
        }
    }
}
