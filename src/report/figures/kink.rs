//! Turns of growth beside those that fracture mechanics predicts, by angle to the load axis. The prediction is a model.

use super::key::{self, Mark};
use super::{ABOVE, BELOW, Format, LEFT, RIGHT};
use crate::report::axes::{Panel, Range, SMALL};
use crate::report::drawing::{Anchor, Drawing};
use crate::report::palette::Ink;
use crate::results::{KinkBin, Results};

/// Room below the lowest value for the numbers of turns, as a share of the scale.
const FOOT: f64 = 0.1;

pub(super) fn draw(results: &Results, format: Format) -> Option<Drawing> {
    let model = results.summary.kink_model.as_ref()?;
    let ends = |bin: &KinkBin| bin.measured_ci95.unwrap_or([bin.measured_deg; 2]);
    let values = model.bins.iter().flat_map(|bin| [bin.predicted_deg, ends(bin)[0], ends(bin)[1]]);
    let tight = Range::around(values.chain([0.0]))?;
    let y = Range { low: tight.low - FOOT * (tight.high - tight.low), ..tight };
    let height = if format.is_narrow() { 220.0 } else { 260.0 };
    let panel = Panel {
        left: LEFT,
        top: ABOVE,
        width: format.width() - LEFT - RIGHT,
        height,
        x: Range { low: 0.0, high: 90.0 },
        y,
    };
    let mut drawing =
        Drawing::new(format.width(), ABOVE + height + BELOW, "Turns of growth, measured and by the model");
    let heading = if format.is_narrow() { "turn to load axis (°)" } else { "turn toward the load axis, a piece (°)" };
    panel.draw_y(&mut drawing, heading, Ink::Metal);
    panel.draw_x_at(&mut drawing, "angle of growth to the load axis (°)", &[0.0, 15.0, 30.0, 45.0, 60.0, 75.0, 90.0]);
    drawing.line(vec![panel.at(0.0, 0.0), panel.at(90.0, 0.0)], Ink::Quiet, 1.4);
    let middle = |bin: &KinkBin| 0.5 * (bin.from_deg + bin.to_deg);
    let predicted = model.bins.iter().map(|bin| panel.at(middle(bin), bin.predicted_deg)).collect();
    drawing.dashed(predicted, Ink::Load, 2.2);
    for bin in &model.bins {
        drawing.disc(panel.at(middle(bin), bin.predicted_deg), 2.6, Ink::Load, 1.0);
        measured(&mut drawing, &panel, bin, middle(bin));
    }
    key::row(&mut drawing, &panel, &[(Mark::Disc, Ink::Metal, "measured"), (Mark::Dashed, Ink::Load, "model")]);
    Some(drawing)
}

/// The mean turn with its interval, and on how many turns it rests.
fn measured(drawing: &mut Drawing, panel: &Panel, bin: &KinkBin, x: f64) {
    if let Some([low, high]) = bin.measured_ci95 {
        drawing.line(vec![panel.at(x, low), panel.at(x, high)], Ink::Metal, 1.8);
    }
    let opacity = if bin.measured_ci95.is_some() { 1.0 } else { 0.5 };
    drawing.disc(panel.at(x, bin.measured_deg), 4.2, Ink::Metal, opacity);
    let words = format!("n {}", bin.pieces);
    drawing.text([panel.across(x), panel.bottom() - 6.0], words, SMALL - 1.0, Ink::Quiet, Anchor::Middle);
}
