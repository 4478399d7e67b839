//! A reader's review honoured: frames set aside, and pixels in which nothing is looked for. A rejected filament is
//! found in the run as traced without the review, and what lies under its ink is then not looked at: what others leave
//! there is kept, and forecasts are issued as if it had never been seen.

use ndarray::Array2;

use super::Input;
use crate::results::{Results, ReviewMark, ReviewNumbers, ReviewSummary};
use crate::run::Review;
use crate::trace::{Trace, TracePoint, disc};

/// How far from the place named a filament may start, px: a tenth of what the eye tells apart on a page (common practice).
const NEAR_PX: f64 = 12.0;
/// Room about a rejected filament's ink, px: its shoulders must not be traced in its stead.
const ROOM_PX: f64 = 4.0;
/// Room about the ink of the others that stays in sight, px.
const KEPT_PX: f64 = 1.0;

/// What the review takes out of a run.
#[derive(Debug, Clone, Default)]
pub(super) struct Marks {
    frames: Vec<(usize, String)>,
    hidden: Option<Array2<bool>>,
}

impl Marks {
    /// The marks of a review on a run traced without it, and each of them with what became of it.
    pub(super) fn of(review: &Review, input: &Input, trace: &Trace) -> (Self, Vec<ReviewMark>) {
        let shape = (input.sequence.height as usize, input.sequence.width as usize);
        let mut hidden = Array2::from_elem(shape, false);
        let (mut frames, mut dropped, mut marks) = (Vec::new(), Vec::new(), Vec::new());
        for rejection in &review.reject {
            let mut mark = ReviewMark {
                frame: rejection.frame,
                filament: rejection.filament,
                root_px: rejection.root_px,
                region_px: rejection.region_px,
                reason: rejection.reason.clone(),
                not_applied: None,
            };
            if let Some(frame) = rejection.frame {
                frames.push((frame, format!("rejected by review: {}", rejection.reason)));
            }
            if let Some(filament) = rejection.filament {
                match found(trace, filament, rejection.root_px) {
                    Ok(number) => dropped.push(number),
                    Err(why) => mark.not_applied = Some(why),
                }
            }
            if let Some(corners) = rejection.region_px {
                hide(&mut hidden, corners);
            }
            marks.push(mark);
        }
        let ink = |rejected: bool| -> Vec<TracePoint> {
            let paths = trace.paths.iter().filter(|path| dropped.contains(&path.filament) == rejected);
            paths.flat_map(|path| path.points.iter().copied()).collect()
        };
        let (rejected, kept) = (ink(true), ink(false));
        let mut corridor = Array2::from_elem(shape, false);
        paint(&mut corridor, &rejected, ROOM_PX, true);
        paint(&mut corridor, &kept, KEPT_PX, false);
        hidden.zip_mut_with(&corridor, |hidden, &also| *hidden |= also);
        let any = hidden.iter().any(|hidden| *hidden);
        (Self { frames, hidden: any.then_some(hidden) }, marks)
    }

    /// Why a frame is set aside; `None` where it is not.
    pub(super) fn frame(&self, frame: usize) -> Option<&str> {
        self.frames.iter().find(|(marked, _)| *marked == frame).map(|(_, reason)| reason.as_str())
    }

    /// Takes out of a corrected frame what is not to be looked at.
    pub(super) fn hide(&self, residual: &mut Array2<f32>) {
        if let Some(hidden) = &self.hidden {
            residual.zip_mut_with(hidden, |value, &hidden| *value = if hidden { f32::NAN } else { *value });
        }
    }
}

fn paint(plane: &mut Array2<bool>, points: &[TracePoint], room: f64, value: bool) {
    for point in points {
        for pixel in disc([point.x, point.y], 0.5 * point.width + room, plane.dim()) {
            plane[pixel] = value;
        }
    }
}

/// Hides the pixels whose centres lie between two corners.
fn hide(plane: &mut Array2<bool>, [[ax, ay], [bx, by]]: [[f64; 2]; 2]) {
    let within = |v: usize, a: f64, b: f64| (a.min(b)..=a.max(b)).contains(&(v as f64));
    for ((row, column), hidden) in plane.indexed_iter_mut() {
        *hidden |= within(column, ax, bx) && within(row, ay, by);
    }
}

/// The number of the filament that is meant: the one that starts nearest to the place named, else the one so numbered.
fn found(trace: &Trace, filament: u32, root_px: Option<[f64; 2]>) -> Result<u32, String> {
    let Some([x, y]) = root_px else {
        let known = trace.filaments.iter().any(|known| known.filament == filament);
        return if known { Ok(filament) } else { Err(format!("no filament {filament} is traced without the review")) };
    };
    let distance = |root: [f64; 2]| (root[0] - x).hypot(root[1] - y);
    let near = trace.filaments.iter().filter(|known| distance(known.root_px) <= NEAR_PX);
    near.min_by(|a, b| distance(a.root_px).total_cmp(&distance(b.root_px)))
        .map(|known| known.filament)
        .ok_or_else(|| format!("no filament starts within {NEAR_PX} px of {x}, {y}"))
}

/// The numbers that stand side by side.
pub(super) fn numbers(results: &Results) -> ReviewNumbers {
    let summary = &results.summary;
    ReviewNumbers {
        frames_used: summary.frames.usable,
        filaments: results.filaments.len(),
        depth_um: summary.depth.final_um,
        rate_um_per_s: summary.depth.rate_um_per_s,
        growth_alignment: summary.alignment.growth.value,
        contact_p50_s: summary.forecast.as_ref().and_then(|forecast| forecast.p50_s),
        chance_by_horizon: summary.forecast.as_ref().and_then(|forecast| forecast.chance_by_horizon),
    }
}

/// Writes the review into the results, with both sets of numbers and a warning that leads all others.
pub(super) fn tell(results: &mut Results, without: &Results, marks: Vec<ReviewMark>) {
    let review = ReviewSummary { with: numbers(results), without: numbers(without), marks };
    let mut warnings = vec![said(&review)];
    for mark in &review.marks {
        if let Some(why) = &mark.not_applied {
            warnings.push(format!("the review's mark on {} changed nothing: {why}", mark.what()));
        }
    }
    results.summary.warnings.splice(0..0, warnings);
    results.summary.review = Some(review);
}

fn said(review: &ReviewSummary) -> String {
    let honoured = review.marks.iter().filter(|mark| mark.not_applied.is_none()).count();
    let marks = if honoured == 1 { "1 mark".to_owned() } else { format!("{honoured} marks") };
    let um = |depth: Option<f64>| depth.map_or_else(|| "none".to_owned(), |depth| format!("{depth:.1} µm"));
    let (with, without) = (&review.with, &review.without);
    format!(
        "{marks} of review.toml honoured: depth {}, {} filaments; without the review {}, {} filaments",
        um(with.depth_um),
        with.filaments,
        um(without.depth_um),
        without.filaments
    )
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::trace::{Root, TracedFilament};

    fn trace() -> Trace {
        let filament = |filament, x| TracedFilament { filament, root: Root::Plating, root_px: [x, 5.0], bridged: None };
        Trace { filaments: vec![filament(1, 10.0), filament(2, 30.0)], ..Trace::default() }
    }

    #[test]
    fn a_filament_is_found_by_its_place_before_its_number() {
        assert_eq!(found(&trace(), 2, None), Ok(2));
        assert_eq!(found(&trace(), 2, Some([12.0, 5.0])), Ok(1));
        assert!(found(&trace(), 7, None).is_err());
        assert!(found(&trace(), 1, Some([90.0, 5.0])).is_err());
    }

    #[test]
    fn a_region_takes_its_corners_in_any_order() {
        let mut plane = Array2::from_elem((4, 5), false);
        hide(&mut plane, [[3.2, 2.0], [1.0, 0.5]]);
        let hidden: Vec<(usize, usize)> =
            plane.indexed_iter().filter(|(_, hidden)| **hidden).map(|(at, _)| at).collect();
        assert_eq!(hidden, [(1, 1), (1, 2), (1, 3), (2, 1), (2, 2), (2, 3)]);
    }
}
