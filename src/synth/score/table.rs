//! Figures of many runs: median and worst of each, as text or JSON.
//! "Worst" is the value farthest from the best one a figure can have (0, or 1, or as large as can be).

use std::fmt::{self, Write as _};

use serde::Serialize;

use super::forecast::LEVELS;
use super::{RunScore, mean, quantile};

/// Which end of a figure is bad.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Worst {
    /// Large values (errors).
    Largest,
    /// Small values (shares found).
    Smallest,
    /// Values far from 1 (ratios).
    FarFromOne,
}

/// A figure of a run and how it is shown.
#[derive(Debug, Clone, Copy)]
pub struct Figure {
    /// Key in JSON.
    pub key: &'static str,
    /// Words in the table, with unit.
    pub label: &'static str,
    /// Which end is bad.
    pub worst: Worst,
    /// Its value.
    pub of: fn(&RunScore) -> Option<f64>,
}

macro_rules! figures {
    ($($key:ident, $worst:ident, $label:literal;)*) => {
        &[$(Figure { key: stringify!($key), label: $label, worst: Worst::$worst, of: |s| s.$key },)*]
    };
}

/// Every figure, in the order of the table.
pub static FIGURES: &[Figure] = figures! {
    depth_median_px, Largest, "depth error, median (px)";
    depth_p95_px, Largest, "depth error, 95th percentile (px)";
    precision, Smallest, "centre-line precision within 2 px";
    recall, Smallest, "centre-line recall within 2 px";
    offset_rms_px, Largest, "centre-line offset, RMS (px)";
    length_ratio, FarFromOne, "length, reported / true";
    tips_f1, Smallest, "tips, F1 within 6 px";
    direction_median_deg, Largest, "growth direction error, median (deg)";
    alignment_frame, Largest, "growth alignment error, frames";
    alignment_run, Largest, "growth alignment error, run";
    drift_rms_px, Largest, "drift error, RMS (px)";
    filament_ratio, FarFromOne, "rooted filaments, reported / true";
    false_filaments, Largest, "filaments where none grew";
    early_frames, Largest, "frames with metal before any exists";
    depth_covered, Smallest, "depth within 2 u (share of frames)";
    angle_covered, Smallest, "direction within 2 u (share of pieces)";
    usable_wrong, Largest, "frames wrongly used or set aside";
};

/// Median and worst of a figure.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Line {
    /// Key of the figure.
    pub figure: &'static str,
    /// Words, with unit.
    pub label: &'static str,
    /// Runs that have it.
    pub n: usize,
    /// Median over those.
    pub median: f64,
    /// Worst of those.
    pub worst: f64,
}

/// Judged forecasts of many runs at one depth fraction (or pooled).
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct ForecastLine {
    /// Depth fraction; `None` for all together.
    pub level: Option<f64>,
    /// Points at which contact was still to come.
    pub points: usize,
    /// Share of them with quantiles.
    pub given: Option<f64>,
    /// Median of |p50 error| in shares of the remaining time.
    pub error: Option<f64>,
    /// Median of the signed error.
    pub signed: Option<f64>,
    /// Share covered by p10 to p90.
    pub covered: Option<f64>,
    /// Median of the interval's width in shares of the remaining time.
    pub width: Option<f64>,
}

/// Figures of many runs.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Summary {
    /// Median and worst of each figure.
    pub figures: Vec<Line>,
    /// Forecasts by level, and pooled.
    pub forecasts: Vec<ForecastLine>,
    /// Each run's own figures.
    pub runs: Vec<RunScore>,
}

impl Summary {
    /// Of scored runs.
    #[must_use]
    pub fn of(runs: Vec<RunScore>) -> Self {
        let figures = FIGURES.iter().filter_map(|f| line(f, &runs)).collect();
        let levels = LEVELS.iter().map(|l| Some(*l)).chain([None]);
        let forecasts = levels.map(|level| forecast_line(level, &runs)).filter(|l| l.points > 0).collect();
        Self { figures, forecasts, runs }
    }
}

fn line(figure: &Figure, runs: &[RunScore]) -> Option<Line> {
    let values: Vec<f64> = runs.iter().filter_map(figure.of).collect();
    let badness = |v: &f64| match figure.worst {
        Worst::Largest => *v,
        Worst::Smallest => -v,
        Worst::FarFromOne => (v - 1.0).abs(),
    };
    let worst = values.iter().copied().max_by(|a, b| badness(a).total_cmp(&badness(b)))?;
    let median = quantile(&values, 0.5)?;
    Some(Line { figure: figure.key, label: figure.label, n: values.len(), median, worst })
}

fn forecast_line(level: Option<f64>, runs: &[RunScore]) -> ForecastLine {
    let chosen = |l: f64| level.is_none_or(|level| (l - level).abs() < 1e-9);
    let points: Vec<_> = runs.iter().flat_map(|r| &r.forecasts).filter(|p| chosen(p.level)).collect();
    let errors: Vec<f64> = points.iter().filter_map(|p| p.error).collect();
    let sizes: Vec<f64> = errors.iter().map(|e| e.abs()).collect();
    let widths: Vec<f64> = points.iter().filter_map(|p| p.width).collect();
    let share = |yes: bool| if yes { 1.0 } else { 0.0 };
    ForecastLine {
        level,
        points: points.len(),
        given: mean(points.iter().map(|p| share(p.error.is_some()))),
        error: quantile(&sizes, 0.5),
        signed: quantile(&errors, 0.5),
        covered: mean(points.iter().filter_map(|p| p.covered).map(share)),
        width: quantile(&widths, 0.5),
    }
}

impl fmt::Display for Summary {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        writeln!(f, "{:<40} {:>5} {:>10} {:>10}", "figure", "runs", "median", "worst")?;
        for line in &self.figures {
            writeln!(f, "{:<40} {:>5} {:>10.3} {:>10.3}", line.label, line.n, line.median, line.worst)?;
        }
        if self.forecasts.is_empty() {
            return Ok(());
        }
        let shown = |v: Option<f64>| v.map_or("-".to_owned(), |v| format!("{v:.2}"));
        let mut text = String::new();
        let heads = ["points", "given", "|error|", "error", "covered", "width"];
        let _ = write!(text, "\n{:<28}", "forecast at depth fraction");
        for head in heads {
            let _ = write!(text, " {head:>8}");
        }
        for line in &self.forecasts {
            let level = line.level.map_or("all".to_owned(), |l| format!("{l}"));
            let _ = write!(text, "\n{level:<28} {:>8}", line.points);
            for value in [line.given, line.error, line.signed, line.covered, line.width] {
                let _ = write!(text, " {:>8}", shown(value));
            }
        }
        writeln!(f, "{text}")
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn run(length_ratio: f64, recall: f64) -> RunScore {
        RunScore { length_ratio: Some(length_ratio), recall: Some(recall), ..RunScore::default() }
    }

    #[test]
    fn worst_is_the_bad_end() {
        let summary = Summary::of(vec![run(1.02, 0.9), run(0.8, 1.0), run(1.1, 0.95)]);
        let find = |key: &str| summary.figures.iter().find(|l| l.figure == key).cloned().unwrap();
        assert!((find("length_ratio").worst - 0.8).abs() < 1e-12 && (find("length_ratio").median - 1.02).abs() < 1e-12);
        assert!((find("recall").worst - 0.9).abs() < 1e-12);
        assert!(summary.to_string().contains("centre-line recall"));
    }
}
