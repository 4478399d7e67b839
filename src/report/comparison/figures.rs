//! The figures of a comparison: depth by group, curves of the time to short with numbers at risk, dose–response, roses side by
//! side. A group keeps its colour and, where colours come again, a dash; the control is grey. A figure that has nothing to show is `None`.

use crate::compare::{Comparison, RunRecord};
use crate::report::axes::SMALL;
use crate::report::drawing::{Anchor, Drawing};
use crate::report::figures::Format;
use crate::report::palette::Ink;

mod depth;
mod dose;
mod roses;
mod survival;

/// A comparison and the runs it is made from.
#[derive(Clone, Copy)]
pub struct Shown<'a> {
    /// What was found.
    pub found: &'a Comparison,
    /// The runs; a group's members number them.
    pub records: &'a [RunRecord],
}

/// A figure.
pub struct Figure {
    /// File name without extension.
    pub name: &'static str,
    /// Heading.
    pub title: &'static str,
    /// How to read it.
    pub caption: &'static str,
    /// Draws it.
    pub draw: fn(Shown<'_>, Format) -> Option<Drawing>,
}

/// All figures, in the order of the page.
pub static FIGURES: [Figure; 6] = [
    Figure {
        name: "depth",
        title: "How deep, run by run",
        caption: "Depth of the deepest filament against time, a line a run, coloured by group; a dot ends a run that shorted, a bar one \
                  that did not. Runs of one specimen are not independent.",
        draw: depth::draw,
    },
    Figure {
        name: "roses",
        title: "Which way it grew",
        caption: "Directions of growth about the plates, which lie level here: a level petal runs along the plates, an upright one straight \
                  across to the far electrode. The area of a petal is its share of the length grown in the group; the dashed ring is growth even in all directions.",
        draw: roses::draw,
    },
    Figure {
        name: "dose-response",
        title: "Turned aside against dose",
        caption: "A disc a run, as large as it has filaments long enough to tell; the line is the curve fitted. The upright band is the 95 % \
                  interval of the dose at which half turn aside, specimens allowed for.",
        draw: dose::turned,
    },
    Figure {
        name: "dose-alignment",
        title: "Alignment with the plates against dose",
        caption: "Mean cos 2γ of each run's growth to the plating edge: +1 along the plates, −1 straight across. The upright band is the 95 % \
                  interval of the dose at which growth runs as much along as across.",
        draw: dose::along,
    },
    Figure {
        name: "time-to-short",
        title: "Time without a short",
        caption: "Share of the runs without a short (Kaplan–Meier) with its 95 % interval; a tick is a run that ended without one. Below: \
                  runs still followed.",
        draw: survival::time,
    },
    Figure {
        name: "charge-to-short",
        title: "Charge without a short",
        caption: "The same against the charge passed over the electrode area.",
        draw: survival::charge,
    },
];

/// Space left of a panel.
const LEFT: f64 = 52.0;
/// Space right of it.
const RIGHT: f64 = 14.0;
/// Space below it, for its scale.
const BELOW: f64 = 46.0;

/// How a group is drawn.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Look {
    ink: Ink,
    /// Length of dash and gap; 0 is a full line.
    dash: f64,
}

/// Inks of groups other than the control.
const INKS: [Ink; 5] = [Ink::Metal, Ink::Forecast, Ink::Load, Ink::Voltage, Ink::Current];

impl Shown<'_> {
    /// Looks of the groups, in their order.
    fn looks(&self) -> Vec<Look> {
        let control = self.found.contrast.as_ref().map(|c| c[0].as_str());
        let mut others = 0;
        let look = |name: &str| {
            if Some(name) == control {
                return Look { ink: Ink::Quiet, dash: 0.0 };
            }
            others += 1;
            let round = (others - 1) / INKS.len();
            Look { ink: INKS[(others - 1) % INKS.len()], dash: if round == 0 { 0.0 } else { 3.0 + 4.0 * round as f64 } }
        };
        self.found.groups.iter().map(|g| g.name.as_str()).map(look).collect()
    }
}

/// Width of a letter over the height of the type, on the safe side.
const LETTER: f64 = 0.56;

/// Draws the names of the groups in rows from `top` and gives the height they take.
fn key(drawing: &mut Drawing, top: f64, entries: &[(Look, String)]) -> f64 {
    const ROW: f64 = 19.0;
    let (mut x, mut y) = (0.0, top + 10.0);
    for (look, words) in entries {
        let width = words.chars().count() as f64 * SMALL * LETTER + 40.0;
        if x > 0.0 && x + width > drawing.width {
            (x, y) = (0.0, y + ROW);
        }
        drawing.stroke(vec![[x, y - 4.0], [x + 18.0, y - 4.0]], look.ink, 2.6, look.dash, 1.0);
        drawing.text([x + 24.0, y], words.clone(), SMALL, Ink::Text, Anchor::Start);
        x += width;
    }
    y - top + 8.0
}

/// The groups with a run that `keep`s, with their looks.
fn named(shown: Shown<'_>, keep: impl Fn(usize) -> bool) -> Vec<(Look, String)> {
    let groups = shown.looks().into_iter().zip(&shown.found.groups).enumerate();
    groups.filter(|(g, _)| keep(*g)).map(|(_, (look, group))| (look, group.name.clone())).collect()
}
