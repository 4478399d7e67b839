//! The load against time: stress where it is known, else force, and the load axis as small strokes.

use crate::measure::FrameRow;
use crate::report::axes::{NORMAL, Panel, Range};
use crate::report::drawing::{Anchor, Drawing};
use crate::report::palette::Ink;
use crate::results::Results;

/// A sampled quantity: times and values.
pub(super) type Samples = Vec<(f64, Option<f64>)>;

/// What is known of the load: its heading and samples; `None` where no load was logged.
pub(super) fn samples(results: &Results) -> Option<(&'static str, Samples)> {
    let log = &results.load;
    logged(&log.time_s, &log.stress_mpa)
        .or_else(|| measured(results, |row| row.stress_mpa))
        .map(|samples| ("stress (MPa)", samples))
        .or_else(|| {
            let force = logged(&log.time_s, &log.force_n).or_else(|| measured(results, |row| row.load_n));
            force.map(|samples| ("force (N)", samples))
        })
}

/// The log's own samples, if it has any value.
fn logged(time_s: &[f64], values: &[Option<f64>]) -> Option<Samples> {
    values.iter().any(Option::is_some).then(|| time_s.iter().copied().zip(values.iter().copied()).collect())
}

/// The value at each frame, if there is any.
fn measured(results: &Results, value: fn(&FrameRow) -> Option<f64>) -> Option<Samples> {
    let samples: Samples = results.frames.iter().map(|row| (row.time_s, value(row))).collect();
    samples.iter().any(|(_, value)| value.is_some()).then_some(samples)
}

/// Room above the highest load for the strokes, as a share of the scale.
const HEADROOM: f64 = 0.34;

/// The scale of the load, zero included, with headroom.
pub(super) fn range(samples: &[(f64, Option<f64>)]) -> Range {
    let values = samples.iter().filter_map(|(_, value)| *value).chain([0.0]);
    let tight = Range::around(values).unwrap_or(Range { low: 0.0, high: 1.0 });
    Range { high: tight.high + HEADROOM * (tight.high - tight.low), ..tight }
}

/// The load in `panel`, or a line that says that there is none.
pub(super) fn draw(drawing: &mut Drawing, panel: &Panel, known: Option<&(&'static str, Samples)>) {
    match known {
        Some((heading, samples)) => {
            panel.draw_y(drawing, heading, Ink::Load);
            let before_end = samples.iter().copied().filter(|(t, _)| *t <= panel.x.high);
            panel.steps(drawing, before_end, Ink::Load, 2.0);
        }
        None => {
            let middle = [panel.left + panel.width / 2.0, panel.top + panel.height / 2.0];
            drawing.text(middle, "neither force nor stress was logged", NORMAL, Ink::Quiet, Anchor::Middle);
        }
    }
}

/// The load axis as it lay in the picture, at even times, along the top of `panel`.
pub(super) fn strokes(drawing: &mut Drawing, panel: &Panel, results: &Results) {
    /// Half the length of a stroke, and the space from one to the next.
    const HALF: f64 = 7.0;
    const PITCH: f64 = 40.0;
    let count = (panel.width / PITCH).floor().max(1.0) as usize;
    let pitch = panel.width / count as f64;
    for i in 0..count {
        let x = panel.left + pitch * (i as f64 + 0.5);
        let time = panel.x.low + (x - panel.left) / panel.width * (panel.x.high - panel.x.low);
        let row = results.frames.iter().take_while(|row| row.time_s <= time).last();
        if let Some(angle) = row.and_then(|row| row.load_direction_deg) {
            let (dx, dy) = (HALF * angle.to_radians().cos(), -HALF * angle.to_radians().sin());
            let y = panel.top + 8.0;
            drawing.line(vec![[x - dx, y - dy], [x + dx, y + dy]], Ink::Load, 2.4);
        }
    }
}
