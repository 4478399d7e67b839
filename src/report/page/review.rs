//! What a review rejected, and the numbers with it beside those without it.

use serde::Serialize;

use crate::report::words::{bind, duration, figures, fixed, sentence, signed};
use crate::results::{Results, ReviewNumbers};

/// The review in ready strings.
#[derive(Serialize)]
pub(super) struct Shown {
    /// What was marked, why, and what became of it.
    marks: Vec<[String; 3]>,
    /// Name, with the review, without it.
    numbers: Vec<[String; 3]>,
}

/// `None` where nothing was reviewed.
pub(super) fn of(results: &Results) -> Option<Shown> {
    let review = results.summary.review.as_ref()?;
    let marks = review.marks.iter().map(|mark| {
        let became =
            mark.not_applied.as_ref().map_or_else(|| "left out".to_owned(), |why| format!("not applied: {why}"));
        [sentence(&mark.what()), mark.reason.clone(), became]
    });
    let row = |name: &str, say: fn(&ReviewNumbers) -> Option<String>| {
        let shown = |numbers| say(numbers).map_or_else(|| "none".to_owned(), |words| bind(&words));
        [name.to_owned(), shown(&review.with), shown(&review.without)]
    };
    Some(Shown {
        marks: marks.collect(),
        numbers: vec![
            row("Frames used", |n| Some(n.frames_used.to_string())),
            row("Filaments", |n| Some(n.filaments.to_string())),
            row("Depth", |n| n.depth_um.map(|depth| format!("{} µm", fixed(depth, 1)))),
            row("Rate", |n| n.rate_um_per_s.map(|rate| format!("{} µm/s", figures(rate, 3)))),
            row("Alignment of growth", |n| n.growth_alignment.map(|value| signed(value, 2))),
            row("Median of contact", |n| n.contact_p50_s.map(duration)),
            row("Chance by the horizon", |n| {
                n.chance_by_horizon.map(|chance| format!("{} %", fixed(100.0 * chance, 0)))
            }),
        ],
    })
}
