//! The forecast's own record: how its quantiles of contact moved as the run went on.

use super::key::{self, Mark};
use super::{Format, run_time, stack};
use crate::measure::ForecastRow;
use crate::report::axes::{Panel, Range, SMALL, TimeUnit};
use crate::report::drawing::{Anchor, Drawing};
use crate::report::palette::Ink;
use crate::results::Results;

/// How late a contact the plot shows, in lengths of the record; the tables are never cut.
const REACH: f64 = 3.0;

pub(super) fn draw(results: &Results, format: Format) -> Option<Drawing> {
    let rows: Vec<&ForecastRow> = results.forecasts.iter().filter(|row| row.p50_s.is_some()).collect();
    if rows.len() < 2 {
        return None;
    }
    let (time, unit) = run_time(results);
    let latest = rows.iter().filter_map(|row| row.p90_s.or(row.p50_s)).fold(time.high, f64::max);
    let contact = Range::new(0.0, (latest * 1.04).min(time.high * REACH) / unit.seconds);
    let height = if format.is_narrow() { 230.0 } else { 280.0 };
    let ([panel], total) = stack(format, time, [(height, contact)]);
    let mut drawing = Drawing::new(format.width(), total, "Forecast time of contact against the time of issue");
    panel.draw_y(&mut drawing, &format!("contact at ({})", unit.name), Ink::Forecast);
    panel.draw_time(&mut drawing, unit);
    band(&mut drawing, &panel, unit, &rows, |row| Some((row.p10_s?, row.p90_s?)), 0.16);
    band(&mut drawing, &panel, unit, &rows, |row| Some((row.p25_s?, row.p75_s?)), 0.26);
    let inside = |t: f64| Some(t / unit.seconds).filter(|y| *y <= panel.y.high);
    panel.line(&mut drawing, rows.iter().map(|r| (r.issued_at_s, r.p50_s.and_then(inside))), Ink::Forecast, 2.4);
    references(&mut drawing, &panel, unit, results);
    let entries = [
        (Mark::Band(0.2), Ink::Forecast, "80 %"),
        (Mark::Band(0.42), Ink::Forecast, "50 %"),
        (Mark::Line, Ink::Forecast, "median"),
    ];
    key::row(&mut drawing, &panel, &entries);
    Some(drawing)
}

/// The area between two quantiles, cut at the top of the panel; broken where a forecast is absent.
fn band(
    drawing: &mut Drawing,
    panel: &Panel,
    unit: TimeUnit,
    rows: &[&ForecastRow],
    quantiles: fn(&ForecastRow) -> Option<(f64, f64)>,
    opacity: f64,
) {
    let place = |row: &ForecastRow, t: f64| panel.at(row.issued_at_s, (t / unit.seconds).min(panel.y.high));
    for run in rows.split(|row| quantiles(row).is_none()) {
        let both = || run.iter().filter_map(|row| Some((row, quantiles(row)?)));
        let low = both().map(|(row, (low, _))| place(row, low));
        let high = both().rev().map(|(row, (_, high))| place(row, high));
        drawing.area(low.chain(high).collect(), Ink::Forecast, opacity);
    }
}

/// "Now", below which nothing can be forecast, and the contact that came.
fn references(drawing: &mut Drawing, panel: &Panel, unit: TimeUnit, results: &Results) {
    let end = panel.x.high.min(panel.y.high * unit.seconds);
    drawing.line(vec![panel.at(0.0, 0.0), panel.at(end, end / unit.seconds)], Ink::Quiet, 1.2);
    let half = 0.42 * end;
    let at = panel.at(half, half / unit.seconds);
    drawing.text([at[0] + 10.0, at[1] + 14.0], "now", SMALL, Ink::Quiet, Anchor::Start);
    if let (true, Some(time)) = (results.summary.short.observed, results.summary.short.time_s) {
        let y = panel.up(time / unit.seconds);
        drawing.dashed(vec![[panel.left, y], [panel.right(), y]], Ink::Text, 1.6);
        drawing.bold([panel.left + 6.0, y + 15.0], "short observed", SMALL, Ink::Text, Anchor::Start);
    }
}
