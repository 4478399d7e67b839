//! Rose of growth directions about the load axis: length-weighted, axial, areas in proportion.

use super::Format;
use crate::report::axes::{NORMAL, SMALL};
use crate::report::drawing::{Anchor, Drawing, Point};
use crate::report::palette::Ink;
use crate::report::words::{counted, signed};
use crate::results::Results;

/// Petals over the half circle: 15° each, wider than the uncertainty of a piece's direction.
const PETALS: usize = 12;

/// Rings that may be drawn, in per cent of the length.
const RINGS: [f64; 7] = [2.0, 5.0, 10.0, 20.0, 40.0, 60.0, 100.0];

pub(super) fn draw(results: &Results, format: Format) -> Option<Drawing> {
    let about_load = results.growth.iter().any(|piece| piece.load_direction_deg.is_some());
    let shares = shares(results, about_load)?;
    let width = format.width().min(460.0);
    let radius = width / 2.0 - 52.0;
    let centre = [width / 2.0, radius + 64.0];
    let mut drawing = Drawing::new(width, 2.0 * radius + 150.0, "Directions of growth, by length");
    let heading = if about_load { "angle to the load axis (°)" } else { "direction in the picture (°)" };
    drawing.bold([0.0, 14.0], heading, NORMAL, Ink::Metal, Anchor::Start);
    let largest = shares.iter().copied().fold(0.0, f64::max);
    let reach = |share: f64| radius * (share / largest).min(1.0).sqrt();
    rings(&mut drawing, centre, radius, largest, reach);
    for (i, share) in shares.iter().enumerate().filter(|(_, share)| **share > 0.0) {
        for turn in [0.0, 180.0] {
            drawing.area(petal(centre, reach(*share), i, turn, about_load), Ink::Metal, 0.72);
        }
    }
    ring_names(&mut drawing, centre, &shares, about_load, reach);
    spokes(&mut drawing, centre, radius, about_load);
    if about_load {
        axis(&mut drawing, centre, radius, results);
    }
    drawing.text([width / 2.0, 2.0 * radius + 138.0], below(results, about_load), NORMAL, Ink::Text, Anchor::Middle);
    Some(drawing)
}

/// Share of the length in each petal; `None` without a piece.
fn shares(results: &Results, about_load: bool) -> Option<[f64; PETALS]> {
    let mut sums = [0.0; PETALS];
    for piece in &results.growth {
        let zero = if about_load { piece.load_direction_deg } else { Some(0.0) };
        if let Some(zero) = zero {
            let half = 90.0 / PETALS as f64;
            let turned = (piece.angle_deg - zero + half).rem_euclid(180.0);
            sums[((turned / 180.0 * PETALS as f64) as usize).min(PETALS - 1)] += piece.length_um;
        }
    }
    let total: f64 = sums.iter().sum();
    (total > 0.0).then(|| sums.map(|sum| sum / total))
}

/// A direction on the drawing: the load axis stands upright, picture directions lie as in the picture.
fn towards(centre: Point, radius: f64, degrees: f64, about_load: bool) -> Point {
    let a = (degrees + if about_load { 90.0 } else { 0.0 }).to_radians();
    [centre[0] + radius * a.cos(), centre[1] - radius * a.sin()]
}

/// A petal is centred on its direction, so that growth exactly along the axis stands in one petal.
fn petal(centre: Point, radius: f64, i: usize, turn: f64, about_load: bool) -> Vec<Point> {
    let step = 180.0 / PETALS as f64;
    let from = step * (i as f64 - 0.5) + turn + 0.5;
    let rim = (0..=8).map(|k| towards(centre, radius, from + f64::from(k) / 8.0 * (step - 1.0), about_load));
    std::iter::once(centre).chain(rim).collect()
}

fn circle(centre: Point, radius: f64) -> Vec<Point> {
    (0..=72).map(|k| towards(centre, radius, f64::from(k) * 5.0, true)).collect()
}

/// The shares whose rings are drawn: round ones, apart from rim and centre.
fn round_shares(largest: f64) -> impl Iterator<Item = f64> {
    RINGS.into_iter().map(|percent| percent / 100.0).filter(move |s| (0.15..0.85).contains(&(s / largest)))
}

/// Rings of equal share, and the ring of growth even in all directions.
fn rings(drawing: &mut Drawing, centre: Point, radius: f64, largest: f64, reach: impl Fn(f64) -> f64) {
    drawing.line(circle(centre, radius), Ink::Grid, 1.0);
    for share in round_shares(largest) {
        drawing.line(circle(centre, reach(share)), Ink::Grid, 1.0);
    }
    drawing.dashed(circle(centre, reach(1.0 / PETALS as f64)), Ink::Quiet, 1.2);
}

/// The shares of the rings, written where the rose is emptiest.
fn ring_names(
    drawing: &mut Drawing,
    centre: Point,
    shares: &[f64; PETALS],
    about_load: bool,
    reach: impl Fn(f64) -> f64,
) {
    let emptiest = (1..PETALS).filter(|i| *i != PETALS / 2).min_by(|a, b| shares[*a].total_cmp(&shares[*b]));
    let degrees = emptiest.unwrap_or(1) as f64 * 180.0 / PETALS as f64;
    let largest = shares.iter().copied().fold(0.0, f64::max);
    for share in round_shares(largest).filter(|share| *share > shares[emptiest.unwrap_or(1)]) {
        let at = towards(centre, reach(share), degrees, about_load);
        let words = format!("{:.0} %", share * 100.0);
        drawing.text([at[0], at[1] + 4.0], words, SMALL - 1.0, Ink::Quiet, Anchor::Middle);
    }
}

fn spokes(drawing: &mut Drawing, centre: Point, radius: f64, about_load: bool) {
    for degrees in [0.0, 30.0, 60.0, 90.0, 120.0, 150.0] {
        for turn in [0.0, 180.0] {
            let shown = if about_load { 90.0 - (degrees - 90.0_f64).abs() } else { degrees };
            let ends = [radius, radius + 6.0].map(|r| towards(centre, r, degrees + turn, about_load));
            drawing.line(ends.to_vec(), Ink::Quiet, 1.0);
            if !about_load || degrees > 0.0 {
                let at = towards(centre, radius + 18.0, degrees + turn, about_load);
                drawing.text([at[0], at[1] + 4.0], format!("{shown:.0}"), SMALL, Ink::Quiet, Anchor::Middle);
            }
        }
    }
}

/// The load axis with its arrows: inwards where it presses, outwards where it pulls.
fn axis(drawing: &mut Drawing, centre: Point, radius: f64, results: &Results) {
    let [x, y] = centre;
    let median = results.summary.load.stress_mpa.map(|stress| stress.median);
    for side in [-1.0, 1.0] {
        let (inner, outer) = (y + side * (radius + 8.0), y + side * (radius + 34.0));
        drawing.line(vec![[x, inner], [x, outer]], Ink::Load, 2.4);
        let (tip, tail) = if median.is_some_and(|m| m < 0.0) { (outer, inner) } else { (inner, outer) };
        if median.is_some_and(|m| m.abs() > 0.0) {
            let back = tip + (tail - tip) * 0.4;
            drawing.line(vec![[x - 6.0, back], [x, tip], [x + 6.0, back]], Ink::Load, 2.4);
        }
    }
    drawing.bold([x + 14.0, y - radius - 24.0], "load axis", SMALL, Ink::Load, Anchor::Start);
}

fn below(results: &Results, about_load: bool) -> String {
    let growth = &results.summary.alignment.growth;
    let pieces = counted(results.growth.len(), "piece", "pieces");
    match (growth.value, growth.ci95) {
        _ if !about_load => format!("{pieces}; no load axis was logged"),
        (Some(value), Some([low, high])) => {
            format!("alignment {} (95 %: {} to {})", signed(value, 2), signed(low, 2), signed(high, 2))
        }
        (Some(value), None) => format!("alignment {}, too few for an interval", signed(value, 2)),
        (None, _) => pieces,
    }
}
