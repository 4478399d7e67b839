//! The crossing strip: the gap from plating to far edge, filled as far as metal has come, each depth in
//! the colour of the time at which it was reached.

use serde::Serialize;

use crate::report::figures::arrival::ArrivalScale;
use crate::report::palette::Ink;
use crate::report::words::{fixed, trimmed, with_uncertainty};
use crate::results::Results;

/// The strip in ready strings.
#[derive(Serialize)]
pub(super) struct Strip {
    /// CSS gradient of the filled part.
    gradient: String,
    /// Filled share of the gap, per cent.
    percent: String,
    /// Depth in words.
    depth: String,
    /// Gap in words.
    gap: String,
    /// For those who cannot see it.
    label: String,
}

/// `None` where depth or gap are not known.
pub(super) fn of(results: &Results) -> Option<Strip> {
    let summary = &results.summary;
    let (depth, gap) = (summary.depth.final_um?, summary.gap_um?);
    let fraction = summary.depth.final_fraction.unwrap_or(0.0).clamp(0.0, 1.0);
    let percent = fixed(fraction * 100.0, 1);
    let depth_words = format!("{} µm", with_uncertainty(depth, summary.depth.u_final_um));
    Some(Strip {
        gradient: gradient(results, depth),
        label: format!("Deepest filament {depth_words} from the plating edge, {percent} % of its way to the far edge."),
        percent,
        depth: depth_words,
        gap: format!("{} µm", trimmed(gap, 4)),
    })
}

/// Hard stops, one a colour: where the depth stood when that colour's time began and ended.
fn gradient(results: &Results, depth: f64) -> String {
    let arrivals = ArrivalScale::of(results);
    let mut bands: Vec<(Ink, f64, f64)> = Vec::new();
    let mut reached = 0.0;
    for row in &results.frames {
        if let Some(now) = row.depth_um.filter(|now| *now > reached) {
            let ink = arrivals.ink(row.frame);
            match bands.last_mut() {
                Some((last, _, to)) if *last == ink => *to = now,
                _ => bands.push((ink, reached, now)),
            }
            reached = now;
        }
    }
    let stop = |(ink, from, to): (Ink, f64, f64)| {
        let colour = ink.light().hex();
        format!("{colour} {:.2}% {:.2}%", 100.0 * from / depth, 100.0 * to / depth)
    };
    let stops: Vec<String> = bands.into_iter().map(stop).collect();
    if stops.is_empty() { "none".into() } else { format!("linear-gradient(to right,{})", stops.join(",")) }
}
