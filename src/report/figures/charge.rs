//! Depth against the charge passed, and the visible track's volume beside the metal that the charge deposits.

use super::key::{self, Mark};
use super::{ABOVE, BELOW, Format, LEFT, RIGHT};
use crate::report::axes::{Panel, Range};
use crate::report::drawing::Drawing;
use crate::report::palette::Ink;
use crate::results::{ChargeRow, Results};

/// µm³ in the unit of the volumes.
const MILLION: f64 = 1e6;

pub(super) fn draw(results: &Results, format: Format) -> Option<Drawing> {
    let rows = &results.charge;
    let per_area = rows.iter().any(|row| row.charge_mah_per_cm2.is_some());
    let charge = |row: &ChargeRow| if per_area { row.charge_mah_per_cm2 } else { row.charge_mah };
    let heading = if per_area { "net charge (mAh/cm²)" } else { "net charge (mAh)" };
    rows.iter().find(|row| row.depth_um.is_some() && charge(row).is_some())?;
    let x = Range::around(rows.iter().filter_map(charge).chain([0.0]))?;
    let depths = Range::around(rows.iter().filter_map(|row| row.depth_um).chain([0.0]))?;
    let volumes =
        Range::around(rows.iter().flat_map(|row| [row.visible_um3, row.faraday_um3]).flatten().map(|v| v / MILLION));
    let both = rows.iter().any(|row| row.visible_um3.is_some()) && rows.iter().any(|row| row.faraday_um3.is_some());
    let height = if format.is_narrow() { 150.0 } else { 190.0 };
    let panel = |i: usize, y: Range| Panel {
        left: LEFT,
        top: ABOVE + i as f64 * (height + ABOVE),
        width: format.width() - LEFT - RIGHT,
        height,
        x,
        y,
    };
    let count = 1 + usize::from(both);
    let total = count as f64 * (ABOVE + height) + BELOW;
    let mut drawing = Drawing::new(format.width(), total, "Depth and volume against charge");
    let above = panel(0, depths);
    above.draw_y(&mut drawing, "depth (µm)", Ink::Metal);
    let curve = |of: fn(&ChargeRow) -> Option<f64>| rows.iter().map(move |row| Some([charge(row)?, of(row)?]));
    trail(&mut drawing, &above, curve(|row| row.front_depth_um), Ink::Metal, 1.0);
    trail(&mut drawing, &above, curve(|row| row.depth_um), Ink::Metal, 2.4);
    let mut last = above;
    if let (true, Some(volumes)) = (both, volumes) {
        let below = panel(1, volumes);
        below.draw_y(&mut drawing, "volume (10⁶ µm³)", Ink::Text);
        trail(&mut drawing, &below, curve(|row| row.visible_um3.map(|v| v / MILLION)), Ink::Metal, 2.0);
        trail(&mut drawing, &below, curve(|row| row.faraday_um3.map(|v| v / MILLION)), Ink::Current, 2.0);
        let names =
            if format.is_narrow() { ["track", "metal"] } else { ["visible track, at most", "metal of the charge"] };
        key::row(&mut drawing, &below, &[(Mark::Line, Ink::Metal, names[0]), (Mark::Line, Ink::Current, names[1])]);
        last = below;
    }
    last.draw_x(&mut drawing, heading);
    Some(drawing)
}

/// A line in order of time, broken where a value is missing; the charge may go back on itself.
fn trail(drawing: &mut Drawing, panel: &Panel, points: impl Iterator<Item = Option<[f64; 2]>>, ink: Ink, width: f64) {
    let all: Vec<_> = points.collect();
    for run in all.split(Option::is_none) {
        let run = run.iter().flatten().map(|[x, y]| panel.at(*x, *y)).collect();
        drawing.line(run, ink, width);
    }
}
