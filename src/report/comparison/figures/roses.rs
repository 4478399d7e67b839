//! Roses of growth directions about the plates, a half circle a group: length-weighted, axial, areas in proportion.

use super::{Look, Shown};
use crate::compare::RunRecord;
use crate::report::axes::SMALL;
use crate::report::drawing::{Anchor, Drawing, Point};
use crate::report::figures::Format;
use crate::report::palette::Ink;
use crate::report::words::{counted, signed};

/// Petals over half a turn: 15° each.
const PETALS: usize = 12;
/// Space between roses.
const BETWEEN: f64 = 26.0;
/// Space above a rose, for its name.
const NAME: f64 = 44.0;
/// Space below it.
const FOOT: f64 = 46.0;

pub(super) fn draw(shown: Shown<'_>, format: Format) -> Option<Drawing> {
    let groups: Vec<(usize, [f64; PETALS])> =
        (0..shown.found.groups.len()).filter_map(|g| Some((g, shares(shown, g)?))).collect();
    if groups.is_empty() {
        return None;
    }
    let across = if format == Format::Narrow { 1 } else { groups.len().min(3) };
    let width = (format.width() - BETWEEN * (across as f64 - 1.0)) / across as f64;
    let radius = (0.5 * width - 26.0).min(120.0);
    let cell = NAME + radius + FOOT;
    let rows = groups.len().div_ceil(across);
    let mut drawing =
        Drawing::new(format.width(), cell * rows as f64, "Directions of growth about the plates, by group");
    // One scale for all: a share has the same area everywhere.
    let largest = groups.iter().flat_map(|(_, shares)| shares).copied().fold(0.0, f64::max);
    let looks = shown.looks();
    for (i, (g, shares)) in groups.iter().enumerate() {
        let left = (width + BETWEEN) * (i % across) as f64;
        let centre = [left + 0.5 * width, cell * (i / across) as f64 + NAME + radius];
        rose(&mut drawing, centre, radius, shares, largest, looks[*g]);
        name(&mut drawing, shown, *g, centre, radius, width);
    }
    Some(drawing)
}

/// Share of the length of a group in each petal, centred on its direction; every specimen counts as its length.
fn shares(shown: Shown<'_>, group: usize) -> Option<[f64; PETALS]> {
    let runs = shown.found.groups[group].members.iter().map(|&i| &shown.records[i]);
    let mut sums = [0.0; PETALS];
    for piece in runs.flat_map(|r: &RunRecord| &r.filaments).flat_map(|f| &f.pieces) {
        let turned = (piece.to_edge_deg + 90.0 / PETALS as f64).rem_euclid(180.0);
        sums[((turned / 180.0 * PETALS as f64) as usize).min(PETALS - 1)] += piece.length_um;
    }
    let total: f64 = sums.iter().sum();
    (total > 0.0).then(|| sums.map(|sum| sum / total))
}

fn towards(centre: Point, radius: f64, degrees: f64) -> Point {
    let a = degrees.to_radians();
    [centre[0] + radius * a.cos(), centre[1] - radius * a.sin()]
}

/// The upper half turn, from level to level; petal 0 is split between its two ends.
fn rose(drawing: &mut Drawing, centre: Point, radius: f64, shares: &[f64; PETALS], largest: f64, look: Look) {
    let arc = |r: f64| (0..=36).map(|k| towards(centre, r, f64::from(k) * 5.0)).collect::<Vec<Point>>();
    drawing.line(arc(radius), Ink::Grid, 1.0);
    let step = 180.0 / PETALS as f64;
    let reach = |share: f64| radius * (share / largest).sqrt();
    for (i, share) in shares.iter().enumerate().filter(|(_, share)| **share > 0.0) {
        let middle = step * i as f64;
        let halves: &[[f64; 2]] = if i == 0 {
            &[[0.0, 0.5 * step], [180.0 - 0.5 * step, 180.0]]
        } else {
            &[[middle - 0.5 * step, middle + 0.5 * step]]
        };
        for [from, to] in halves {
            let rim =
                (0..=6).map(|k| towards(centre, reach(*share), from + 0.4 + (to - from - 0.8) * f64::from(k) / 6.0));
            drawing.area(std::iter::once(centre).chain(rim).collect(), look.ink, 0.75);
        }
    }
    drawing.dashed(arc(reach(1.0 / PETALS as f64)), Ink::Quiet, 1.1);
    drawing.line(vec![[centre[0] - radius - 8.0, centre[1]], [centre[0] + radius + 8.0, centre[1]]], Ink::Text, 2.4);
}

fn name(drawing: &mut Drawing, shown: Shown<'_>, g: usize, centre: Point, radius: f64, width: f64) {
    let group = &shown.found.groups[g];
    let fits = (width / (SMALL * 0.6)) as usize;
    let name: String = if group.name.chars().count() > fits {
        group.name.chars().take(fits.saturating_sub(1)).chain(['…']).collect()
    } else {
        group.name.clone()
    };
    drawing.bold([centre[0], centre[1] - radius - 12.0], name, SMALL + 1.0, Ink::Text, Anchor::Middle);
    let along = shown.found.effects.iter().find(|e| e.quantity == crate::compare::effects::Quantity::AlongPlates);
    let value =
        along.and_then(|e| e.groups[g]).map_or_else(String::new, |m| format!("alignment {}, ", signed(m.value, 2)));
    let words = format!("{value}{}", counted(group.specimens, "specimen", "specimens"));
    drawing.text([centre[0], centre[1] + 18.0], words, SMALL, Ink::Quiet, Anchor::Middle);
}
