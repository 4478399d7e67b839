//! Voltage, current and load against time, on one time axis; what was not logged takes no panel.

use super::{ABOVE, BELOW, Format, LEFT, RIGHT, load, run_time};
use crate::report::axes::{Panel, Range};
use crate::report::drawing::Drawing;
use crate::report::palette::Ink;
use crate::results::Results;

pub(super) fn draw(results: &Results, format: Format) -> Option<Drawing> {
    let mut logged = cell(results);
    if logged.is_empty() {
        return None;
    }
    let (time, unit) = run_time(results);
    let height = if format.is_narrow() { 90.0 } else { 105.0 };
    let known = load::samples(results);
    let rows = logged.len() + usize::from(known.is_some());
    let total = rows as f64 * (height + ABOVE) + BELOW;
    let mut drawing = Drawing::new(format.width(), total, "Voltage, current and load against time");
    let panel = |row: usize, y: Range| Panel {
        left: LEFT,
        top: ABOVE + row as f64 * (height + ABOVE),
        width: format.width() - LEFT - RIGHT,
        height,
        x: time,
        y,
    };
    let mut last = None;
    for (row, (heading, samples, ink, range)) in logged.drain(..).enumerate() {
        let panel = panel(row, range);
        panel.draw_y(&mut drawing, heading, ink);
        let inside = samples.into_iter().filter(|(t, _)| (time.low..=time.high).contains(t));
        panel.line(&mut drawing, inside, ink, 1.8);
        short(&mut drawing, results, &panel);
        last = Some(panel);
    }
    if let Some((_, samples)) = &known {
        let panel = panel(rows - 1, load::range(samples));
        load::draw(&mut drawing, &panel, known.as_ref());
        load::strokes(&mut drawing, &panel, results);
        short(&mut drawing, results, &panel);
        last = Some(panel);
    }
    last?.draw_time(&mut drawing, unit);
    Some(drawing)
}

/// What the cell log holds: heading, samples, colour and scale of each.
fn cell(results: &Results) -> Vec<(&'static str, load::Samples, Ink, Range)> {
    let log = &results.cell;
    [("voltage (V)", &log.voltage_v, Ink::Voltage), ("current (mA)", &log.current_ma, Ink::Current)]
        .into_iter()
        .filter_map(|(heading, values, ink)| {
            values.iter().find(|value| value.is_some())?;
            // A steady current has no span of its own: it is read from zero.
            let zero = (ink == Ink::Current).then_some(0.0);
            let range = Range::around(values.iter().flatten().copied().chain(zero))?;
            Some((heading, log.time_s.iter().copied().zip(values.iter().copied()).collect(), ink, range))
        })
        .collect()
}

fn short(drawing: &mut Drawing, results: &Results, panel: &Panel) {
    if let (true, Some(time)) = (results.summary.short.observed, results.summary.short.time_s) {
        let x = panel.across(time);
        drawing.dashed(vec![[x, panel.top], [x, panel.bottom()]], Ink::Text, 1.4);
    }
}
