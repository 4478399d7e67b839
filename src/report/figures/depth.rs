//! Depth against time, with the forecast fan and the marks of a short.

use super::key::{self, Mark};
use super::{Format, run_time, stack};
use crate::measure::{ForecastRow, FrameRow};
use crate::report::axes::{NORMAL, Panel, Range, SMALL, TimeUnit};
use crate::report::drawing::{Anchor, Drawing, clip_right, thin};
use crate::report::palette::Ink;
use crate::report::words::{duration, trimmed};
use crate::results::{Results, ShortEvidence};

/// How far beyond the record the plot may reach, in lengths of the record; the tables are never cut.
const REACH: f64 = 1.5;

pub(super) fn draw(results: &Results, format: Format) -> Option<Drawing> {
    let deepest = results.frames.iter().filter_map(|row| row.depth_um).reduce(f64::max)?;
    let upper = |row: &FrameRow| Some(row.depth_um? + 2.0 * row.u_depth_um.unwrap_or(0.0));
    let highest = results.frames.iter().filter_map(upper).fold(deepest, f64::max);
    let target = target(results).unwrap_or(deepest);
    let (record, _) = run_time(results);
    let time = Range::new(0.0, right_end(results, record.high));
    let height = if format.is_narrow() { 250.0 } else { 330.0 };
    let depths = Range { low: 0.0, high: target.max(highest).max(1.0) * 1.1 };
    let ([panel], total) = stack(format, time, [(height, depths)]);
    let mut drawing = Drawing::new(format.width(), total, "Depth of the deepest filament against time, with forecast");
    panel.draw_y(&mut drawing, "depth (µm)", Ink::Metal);
    panel.draw_time(&mut drawing, TimeUnit::of(time.high));
    far_edge(&mut drawing, &panel, target, results.facts.gap_um.is_some());
    if let Some(forecast) = &results.summary.forecast {
        fan(&mut drawing, &panel, forecast, results, target);
    }
    measured(&mut drawing, &panel, &results.frames);
    short(&mut drawing, &panel, results);
    name_marks(&mut drawing, &panel, results, format);
    Some(drawing)
}

/// Depth at which contact comes: what the deepest point has left added to its depth, else the gap.
fn target(results: &Results) -> Option<f64> {
    let last = results.frames.iter().rev().find(|row| row.depth_um.is_some())?;
    match (last.depth_um, last.depth_fraction) {
        (Some(depth), Some(fraction)) if fraction > 0.05 => Some(depth / fraction),
        _ => results.facts.gap_um,
    }
}

fn right_end(results: &Results, record_s: f64) -> f64 {
    let wanted = results.summary.forecast.as_ref().and_then(|f| f.p90_s).map(|p90| p90 * 1.04);
    wanted.unwrap_or(record_s).min(record_s * (1.0 + REACH)).max(record_s * 1.02)
}

fn far_edge(drawing: &mut Drawing, panel: &Panel, target: f64, known: bool) {
    if known {
        let y = panel.up(target);
        drawing.line(vec![[panel.left, y], [panel.right(), y]], Ink::Text, 1.6);
        let words = format!("far edge, {} µm", trimmed(target, 4));
        drawing.text([panel.left + 6.0, y - 6.0], words, SMALL, Ink::Text, Anchor::Start);
    }
}

/// From the depth at issue to the quantiles of contact.
fn fan(drawing: &mut Drawing, panel: &Panel, forecast: &ForecastRow, results: &Results, target: f64) {
    let Some(depth) = results.frames.get(forecast.frame).and_then(|row| row.depth_um) else {
        return;
    };
    let from = panel.at(forecast.issued_at_s, depth);
    let up = |t: f64| panel.at(t, target);
    for (low, high, opacity) in [(forecast.p10_s, forecast.p90_s, 0.16), (forecast.p25_s, forecast.p75_s, 0.26)] {
        if let (Some(low), Some(high)) = (low, high) {
            drawing.area(clip_right(&[from, up(low), up(high)], panel.right()), Ink::Forecast, opacity);
        }
    }
    if let Some(median) = forecast.p50_s {
        let seen = clip_right(&[from, up(median), from], panel.right());
        drawing.dashed(seen.into_iter().take(2).collect(), Ink::Forecast, 2.0);
        let at = up(median);
        if at[0] <= panel.right() {
            drawing.disc(at, 4.5, Ink::Forecast, 1.0);
            let words = duration(median);
            let anchor = if at[0] > panel.right() - 70.0 { Anchor::End } else { Anchor::Middle };
            drawing.bold([at[0], at[1] - 9.0], words, SMALL, Ink::Forecast, anchor);
        }
    }
}

/// What was measured: twice the standard uncertainty as a band, depth, and what is still visible.
fn measured(drawing: &mut Drawing, panel: &Panel, frames: &[FrameRow]) {
    let edge = |sign: f64| {
        let points: Vec<_> = frames
            .iter()
            .filter_map(|r| Some(panel.at(r.time_s, (r.depth_um? + sign * 2.0 * r.u_depth_um?).max(0.0))))
            .collect();
        thin(&points, panel.width as usize)
    };
    let band = edge(1.0).into_iter().chain(edge(-1.0).into_iter().rev()).collect();
    drawing.area(band, Ink::Metal, 0.22);
    if stripped(frames) {
        let visible = frames.iter().filter(|r| r.usable).map(|r| (r.time_s, r.front_depth_um));
        panel.line(drawing, visible, Ink::Metal, 1.0);
    }
    panel.line(drawing, frames.iter().filter(|r| r.usable).map(|r| (r.time_s, r.depth_um)), Ink::Metal, 2.4);
}

/// Whether what is visible ever fell behind what had grown, by more than a thousandth.
fn stripped(frames: &[FrameRow]) -> bool {
    frames.iter().any(|r| matches!((r.depth_um, r.front_depth_um), (Some(d), Some(f)) if f < d * 0.999))
}

fn short(drawing: &mut Drawing, panel: &Panel, results: &Results) {
    let short = &results.summary.short;
    let (true, Some(time)) = (short.observed, short.time_s) else {
        return;
    };
    let x = panel.across(time);
    let words = match short.evidence {
        Some(ShortEvidence::Electrical) => "short (cell log)",
        Some(ShortEvidence::Bridging) => "far edge touched",
        None => "short",
    };
    drawing.dashed(vec![[x, panel.top], [x, panel.bottom()]], Ink::Text, 1.6);
    let room = words.chars().count() as f64 * NORMAL * key::BOLD + 14.0;
    let to_the_right = panel.right() - x > room;
    let (anchor, shift) = if to_the_right { (Anchor::Start, 7.0) } else { (Anchor::End, -7.0) };
    drawing.bold([x + shift, panel.bottom() - 12.0], words, NORMAL, Ink::Text, anchor);
}

fn name_marks(drawing: &mut Drawing, panel: &Panel, results: &Results, format: Format) {
    let mut entries = Vec::new();
    if stripped(&results.frames) && !format.is_narrow() {
        entries.push((Mark::Line, Ink::Metal, "thin: still visible"));
    }
    if results.summary.forecast.is_some() {
        entries.push((Mark::Band(0.2), Ink::Forecast, "80 %"));
        entries.push((Mark::Band(0.42), Ink::Forecast, "50 %"));
        entries.push((Mark::Dashed, Ink::Forecast, if format.is_narrow() { "median" } else { "median of contact" }));
    }
    key::row(drawing, panel, &entries);
}
