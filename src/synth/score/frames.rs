//! Frame by frame: depth, drift, growth alignment, uncertainty, metal before any exists.
//! Depth counts from the first frame in which there is any; a depth not reported then counts as 0.

use super::read::{Recorded, Reported, ReportedFrame};
use super::{RunScore, mean, quantile};
use crate::synth::truth::FrameTruth;

/// Fills in the figures that compare rows of the same frame.
pub(super) fn fill(score: &mut RunScore, recorded: &Recorded, reported: &Reported) {
    let both: Vec<(&FrameTruth, &ReportedFrame)> = recorded
        .frames
        .iter()
        .filter_map(|t| Some((t, reported.frames.iter().find(|r| r.frame == t.frame)?)))
        .collect();
    let usable: Vec<_> = both.iter().copied().filter(|(t, r)| t.usable && r.usable).collect();
    score.usable_wrong = Some(both.iter().filter(|(t, r)| t.usable != r.usable).count() as f64);
    depth(score, &usable, recorded.um_per_px);
    drift(score, &usable);
    alignment(score, recorded, reported, &usable);
    counts(score, recorded, reported, &usable);
}

fn depth(score: &mut RunScore, usable: &[(&FrameTruth, &ReportedFrame)], um_per_px: f64) {
    let grown = || usable.iter().filter(|(t, _)| t.depth_um > 0.0);
    let error = |t: &FrameTruth, r: &ReportedFrame| (r.depth_um.unwrap_or(0.0) - t.depth_um).abs();
    let errors: Vec<f64> = grown().map(|(t, r)| error(t, r) / um_per_px).collect();
    score.depth_median_px = quantile(&errors, 0.5);
    score.depth_p95_px = quantile(&errors, 0.95);
    let covered = grown().filter_map(|(t, r)| Some(if error(t, r) <= 2.0 * r.u_depth_um? { 1.0 } else { 0.0 }));
    score.depth_covered = mean(covered);
}

fn drift(score: &mut RunScore, usable: &[(&FrameTruth, &ReportedFrame)]) {
    let squares = usable.iter().filter_map(|(t, r)| {
        let ([x, y], tx, ty) = (r.drift?, t.drift_x_px?, t.drift_y_px?);
        Some((x - tx) * (x - tx) + (y - ty) * (y - ty))
    });
    score.drift_rms_px = mean(squares).map(f64::sqrt);
}

fn alignment(score: &mut RunScore, recorded: &Recorded, reported: &Reported, usable: &[(&FrameTruth, &ReportedFrame)]) {
    let errors: Vec<f64> =
        usable.iter().filter_map(|(t, r)| Some((r.growth_alignment? - t.growth_alignment?).abs())).collect();
    score.alignment_frame = quantile(&errors, 0.5);
    let truth = recorded.frames.iter().filter(|t| t.usable).map(|t| (Some(t.length_um), t.growth_alignment));
    let output = reported.frames.iter().filter(|r| r.usable).map(|r| (r.length_um, r.growth_alignment));
    score.alignment_run = whole_run(truth).zip(whole_run(output)).map(|(a, b)| (a - b).abs());
}

/// Mean of frames' growth alignment weighted by the length that each frame added.
fn whole_run(frames: impl Iterator<Item = (Option<f64>, Option<f64>)>) -> Option<f64> {
    let (mut last, mut sum, mut total) = (0.0, 0.0, 0.0);
    for (length, alignment) in frames {
        let length = length.unwrap_or(last);
        if let Some(alignment) = alignment {
            sum += (length - last).max(0.0) * alignment;
            total += (length - last).max(0.0);
        }
        last = length;
    }
    (total > 0.0).then(|| sum / total)
}

fn counts(score: &mut RunScore, recorded: &Recorded, reported: &Reported, usable: &[(&FrameTruth, &ReportedFrame)]) {
    let first = recorded.first_s();
    let early = usable.iter().filter(|(t, r)| t.time_s < first && r.filaments + r.unrooted > 0).count();
    score.early_frames = Some(early as f64);
    if first.is_infinite() {
        score.false_filaments = Some(reported.roots.len() as f64);
        return;
    }
    let mut filaments: Vec<u32> = recorded.paths.iter().map(|p| p.filament).collect();
    filaments.sort_unstable();
    filaments.dedup();
    let rooted = reported.roots.iter().filter(|r| *r == "plating").count();
    score.filament_ratio = Some(rooted as f64 / filaments.len() as f64);
}

#[cfg(test)]
mod tests {
    use super::super::super::truth::ShortTruth;
    use super::*;

    fn truth(frame: usize, depth_um: f64) -> FrameTruth {
        FrameTruth {
            frame,
            time_s: frame as f64,
            drift_x_px: Some(0.0),
            drift_y_px: Some(0.0),
            depth_um,
            depth_fraction: 0.0,
            front_depth_um: depth_um,
            tips: 0,
            length_um: depth_um,
            growth_alignment: Some(0.5),
            usable: true,
        }
    }

    fn report(frame: usize, depth_um: f64, drift: [f64; 2]) -> ReportedFrame {
        ReportedFrame {
            frame,
            usable: true,
            drift: Some(drift),
            depth_um: Some(depth_um),
            u_depth_um: Some(1.0),
            length_um: Some(depth_um),
            growth_alignment: Some(0.4),
            ..ReportedFrame::default()
        }
    }

    #[test]
    fn depth_drift_and_alignment_by_hand() {
        let recorded = Recorded {
            frames: vec![truth(0, 0.0), truth(1, 10.0), truth(2, 20.0)],
            paths: vec![],
            short: ShortTruth { time_s: None, filament: None },
            um_per_px: 2.0,
        };
        let frames = vec![report(0, 0.0, [0.3, 0.4]), report(1, 11.0, [0.0, 0.0]), report(2, 26.0, [0.0, 0.0])];
        let reported = Reported { frames, ..Reported::default() };
        let mut score = RunScore::default();
        fill(&mut score, &recorded, &reported);
        assert!((score.depth_median_px.unwrap() - 1.75).abs() < 1e-12, "errors are 0.5 and 3 px");
        assert!((score.depth_covered.unwrap() - 0.5).abs() < 1e-12);
        assert!((score.drift_rms_px.unwrap() - (0.25_f64 / 3.0).sqrt()).abs() < 1e-12);
        assert!((score.alignment_run.unwrap() - 0.1).abs() < 1e-12);
        assert_eq!(score.false_filaments, Some(0.0));
    }
}
