//! Names of marks in a row above a panel, from the right, so that no label covers data.

use crate::report::axes::{Panel, SMALL};
use crate::report::drawing::{Anchor, Drawing};
use crate::report::palette::Ink;

/// Width of a letter over the height of the type, on the safe side for sentences (from the typeface).
pub(super) const LETTER: f64 = 0.54;

/// The same for heavy type.
pub(super) const BOLD: f64 = 0.6;

/// How a thing is drawn.
#[derive(Debug, Clone, Copy)]
pub(super) enum Mark {
    /// A line.
    Line,
    /// A dashed line.
    Dashed,
    /// A filled area of this opacity.
    Band(f64),
    /// A disc.
    Disc,
}

/// Draws the entries in one row that ends at the panel's right side, at the height of its heading.
pub(super) fn row(drawing: &mut Drawing, panel: &Panel, entries: &[(Mark, Ink, &str)]) {
    let width = |words: &str| words.chars().count() as f64 * SMALL * LETTER;
    let total: f64 = entries.iter().map(|(_, _, words)| width(words) + 38.0).sum();
    let mut x = panel.right() - total + 14.0;
    for (mark, ink, words) in entries {
        draw(drawing, *mark, *ink, x, panel.top - 20.0);
        drawing.text([x + 24.0, panel.top - 16.0], *words, SMALL, Ink::Quiet, Anchor::Start);
        x += width(words) + 38.0;
    }
}

fn draw(drawing: &mut Drawing, mark: Mark, ink: Ink, x: f64, y: f64) {
    match mark {
        Mark::Line => drawing.line(vec![[x, y], [x + 18.0, y]], ink, 2.0),
        Mark::Dashed => drawing.dashed(vec![[x, y], [x + 18.0, y]], ink, 1.5),
        Mark::Band(opacity) => {
            let corners = vec![[x, y - 5.0], [x + 18.0, y - 5.0], [x + 18.0, y + 5.0], [x, y + 5.0]];
            drawing.area(corners, ink, opacity);
        }
        Mark::Disc => drawing.disc([x + 12.0, y], 3.0, ink, 0.75),
    }
}
