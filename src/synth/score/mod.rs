//! A run's output against its truth.
//!
//! ```text
//! read     truth/ and veerlog/ of a run → Recorded, Reported
//!  ├ lines     centre-lines of the last frame: precision, recall, offset, tips, directions
//!  ├ frames    depth, drift, alignment, uncertainty, metal before any
//!  └ forecast  the short's p10–p50–p90 at 0.3, 0.5 and 0.7 of the gap
//! table    figures of many runs: median and worst
//! ```

mod forecast;
mod frames;
mod lines;
mod read;
mod table;

use std::path::Path;

use serde::Serialize;

use super::SynthError;
pub use forecast::ForecastPoint;
pub use read::{Recorded, Reported};
pub use table::{FIGURES, Figure, Summary, Worst};

/// Figures of one run; `None` where the run gives no answer (no growth, no such column).
#[derive(Debug, Clone, Default, PartialEq, Serialize)]
pub struct RunScore {
    /// The run folder.
    pub run: String,
    /// Median of |reported − true depth| over usable frames from first growth on, px.
    pub depth_median_px: Option<f64>,
    /// 95th percentile of the same, px.
    pub depth_p95_px: Option<f64>,
    /// Share of the reported centre-line within 2 px of the true one, last frame.
    pub precision: Option<f64>,
    /// Share of the true centre-line within 2 px of the reported one, last frame.
    pub recall: Option<f64>,
    /// Root mean square distance of the reported centre-line (where within 2 px) from the true one, px.
    pub offset_rms_px: Option<f64>,
    /// Reported over true length, last usable frame.
    pub length_ratio: Option<f64>,
    /// F1 of free ends matched one to one within 6 px, last frame.
    pub tips_f1: Option<f64>,
    /// Median angle between a growth piece and the true local direction next to it, degrees.
    pub direction_median_deg: Option<f64>,
    /// Median of |reported − true| growth alignment over frames.
    pub alignment_frame: Option<f64>,
    /// |Reported − true| growth alignment of the whole run (length-weighted).
    pub alignment_run: Option<f64>,
    /// Root mean square error of the drift (length of the error vector), px.
    pub drift_rms_px: Option<f64>,
    /// Reported rooted filaments over true ones, last frame; absent where none grew.
    pub filament_ratio: Option<f64>,
    /// Reported filaments where none ever grew; absent where some did.
    pub false_filaments: Option<f64>,
    /// Usable frames that report metal before any exists.
    pub early_frames: Option<f64>,
    /// Share of frames whose depth lies within ± 2 `u_depth_um` of the truth.
    pub depth_covered: Option<f64>,
    /// Share of growth pieces whose direction lies within ± 2 `u_angle_deg` of the truth.
    pub angle_covered: Option<f64>,
    /// Frames whose usability is told wrongly.
    pub usable_wrong: Option<f64>,
    /// The forecast where the true depth first passes 0.3, 0.5 and 0.7 of the gap.
    pub forecasts: Vec<ForecastPoint>,
}

/// Scores the output of `run` (in `run/veerlog`, or `output`) against `run/truth`.
/// # Errors
/// [`SynthError::Unscorable`] or [`SynthError::Io`] naming the file that is missing or not as the contract has it.
pub fn score_run(run: &Path, output: Option<&Path>) -> Result<RunScore, SynthError> {
    let recorded = Recorded::read(run)?;
    let reported = Reported::read(output.unwrap_or(&run.join("veerlog")))?;
    Ok(score(run.display().to_string(), &recorded, &reported))
}

/// Scores what was reported against what was recorded.
#[must_use]
pub fn score(run: String, recorded: &Recorded, reported: &Reported) -> RunScore {
    let mut score = RunScore { run, ..RunScore::default() };
    frames::fill(&mut score, recorded, reported);
    lines::fill(&mut score, recorded, reported);
    score.forecasts = forecast::points(recorded, reported);
    score
}

/// The `q` quantile of finite values by linear interpolation between order statistics; `None` of none.
fn quantile(values: &[f64], q: f64) -> Option<f64> {
    let mut sorted: Vec<f64> = values.to_vec();
    sorted.sort_by(f64::total_cmp);
    let last = sorted.len().checked_sub(1)?;
    let at = q * last as f64;
    let (low, high) = (sorted[at.floor() as usize], sorted[at.ceil() as usize]);
    Some(low + (at - at.floor()) * (high - low))
}

/// Mean; `None` of none.
fn mean(values: impl IntoIterator<Item = f64>) -> Option<f64> {
    let (mut sum, mut n) = (0.0, 0.0);
    for value in values {
        sum += value;
        n += 1.0;
    }
    (n > 0.0).then(|| sum / n)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn quantiles_interpolate() {
        // Hyndman & Fan (1996) type 7, e.g. numpy's default: the median of 1 2 3 4 is 2.5, its 95th percentile 3.85.
        assert!((quantile(&[4.0, 1.0, 3.0, 2.0], 0.5).unwrap() - 2.5).abs() < 1e-12);
        assert!((quantile(&[4.0, 1.0, 3.0, 2.0], 0.95).unwrap() - 3.85).abs() < 1e-12);
        assert_eq!(quantile(&[], 0.5), None);
        assert_eq!(mean([]), None);
    }
}
