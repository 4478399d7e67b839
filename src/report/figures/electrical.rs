//! Voltage, current and load against time, on one time axis.

use super::{Format, load, run_time, stack};
use crate::report::axes::{Panel, Range};
use crate::report::drawing::Drawing;
use crate::report::palette::Ink;
use crate::results::Results;

pub(super) fn draw(results: &Results, format: Format) -> Option<Drawing> {
    let cell = &results.cell;
    let samples = |values: &[Option<f64>]| -> load::Samples {
        cell.time_s
            .iter()
            .copied()
            .zip(values.iter().copied())
            .collect()
    };
    let (voltage, current) = (samples(&cell.voltage_v), samples(&cell.current_ma));
    let spread = |s: &load::Samples| Range::around(s.iter().filter_map(|(_, value)| *value));
    let (volts, currents) = (spread(&voltage), spread(&current));
    volts.or(currents)?;
    let known = load::samples(results);
    let loads = known.as_ref().map(|(_, samples)| load::range(samples));
    let none = Range {
        low: 0.0,
        high: 1.0,
    };
    let (time, unit) = run_time(results);
    let height = if format.is_narrow() { 90.0 } else { 105.0 };
    let ranges = [
        volts.unwrap_or(none),
        currents.unwrap_or(none),
        loads.unwrap_or(none),
    ];
    let ([upper, middle, lower], total) = stack(format, [height; 3], time, ranges);
    let mut drawing = Drawing::new(
        format.width(),
        total,
        "Voltage, current and load against time",
    );
    trace(&mut drawing, &upper, "voltage (V)", &voltage, Ink::Voltage);
    trace(
        &mut drawing,
        &middle,
        "current (mA)",
        &current,
        Ink::Current,
    );
    load::draw(&mut drawing, &lower, known.as_ref());
    load::strokes(&mut drawing, &lower, results);
    lower.draw_time(&mut drawing, unit);
    short(&mut drawing, results, [&upper, &middle, &lower]);
    Some(drawing)
}

fn trace(drawing: &mut Drawing, panel: &Panel, heading: &str, samples: &load::Samples, ink: Ink) {
    panel.draw_y(drawing, heading, ink);
    let inside = samples
        .iter()
        .copied()
        .filter(|(t, _)| (panel.x.low..=panel.x.high).contains(t));
    panel.line(drawing, inside, ink, 1.8);
}

fn short(drawing: &mut Drawing, results: &Results, panels: [&Panel; 3]) {
    if let (true, Some(time)) = (results.summary.short.observed, results.summary.short.time_s) {
        for panel in panels {
            let x = panel.across(time);
            drawing.dashed(vec![[x, panel.top], [x, panel.bottom()]], Ink::Text, 1.4);
        }
    }
}
