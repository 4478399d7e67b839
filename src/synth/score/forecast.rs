//! The forecast of the short where the true depth first passes 0.3, 0.5 and 0.7 of the gap.
//! Only runs in which contact comes are scored. Errors are shares of the time then remaining.

use serde::Serialize;

use super::read::{Recorded, Reported};

/// Depth fractions at which forecasts are judged.
pub(super) const LEVELS: [f64; 3] = [0.3, 0.5, 0.7];

/// One judged forecast.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct ForecastPoint {
    /// Depth fraction at which it was issued.
    pub level: f64,
    /// Frame that issued it.
    pub frame: usize,
    /// (p50 − contact) / (contact − issued); `None` where no quantiles were given.
    pub error: Option<f64>,
    /// Whether contact lay within p10 to p90.
    pub covered: Option<bool>,
    /// (p90 − p10) / (contact − issued).
    pub width: Option<f64>,
}

/// The judged forecasts of a run: at most one a level, none without contact.
pub(super) fn points(recorded: &Recorded, reported: &Reported) -> Vec<ForecastPoint> {
    let Some(contact) = recorded.short.time_s else {
        return Vec::new();
    };
    let at = |&level: &f64| {
        let truth = recorded.frames.iter().find(|f| f.usable && f.depth_fraction >= level && f.time_s < contact)?;
        let row = reported.forecasts.iter().find(|r| r.frame == truth.frame);
        let quantiles = row.and_then(|r| r.p10_p50_p90);
        let remaining = contact - truth.time_s;
        Some(ForecastPoint {
            level,
            frame: truth.frame,
            error: quantiles.map(|[_, p50, _]| (p50 - contact) / remaining),
            covered: quantiles.map(|[p10, _, p90]| p10 <= contact && contact <= p90),
            width: quantiles.map(|[p10, _, p90]| (p90 - p10) / remaining),
        })
    };
    LEVELS.iter().filter_map(at).collect()
}

#[cfg(test)]
mod tests {
    use super::super::super::truth::{FrameTruth, ShortTruth};
    use super::super::read::ReportedForecast;
    use super::*;

    #[test]
    fn errors_are_shares_of_what_remains() {
        let frame = |k: usize| FrameTruth {
            frame: k,
            time_s: 10.0 * k as f64,
            drift_x_px: None,
            drift_y_px: None,
            depth_um: 0.0,
            depth_fraction: 0.1 * k as f64,
            front_depth_um: 0.0,
            tips: 0,
            length_um: 0.0,
            growth_alignment: None,
            usable: true,
        };
        let recorded = Recorded {
            frames: (0..10).map(frame).collect(),
            paths: vec![],
            short: ShortTruth { time_s: Some(100.0), filament: Some(1) },
            um_per_px: 1.0,
        };
        let row = |frame, q| ReportedForecast { frame, issued_at_s: 10.0 * frame as f64, p10_p50_p90: q };
        let reported = Reported {
            forecasts: vec![row(4, Some([80.0, 94.0, 98.0])), row(5, Some([90.0, 110.0, 120.0]))],
            ..Reported::default()
        };
        let points = points(&recorded, &reported);
        // Fractions 0.3 (as 0.1·3 = 0.30000000000000004), 0.5 and 0.7000000000000001 are first reached at frames 3, 5 and 7.
        assert_eq!(points.iter().map(|p| p.frame).collect::<Vec<_>>(), [3, 5, 7]);
        assert_eq!((points[0].error, points[2].covered), (None, None));
        assert!((points[1].error.unwrap() - 0.2).abs() < 1e-12);
        assert_eq!(points[1].covered, Some(true));
        assert!((points[1].width.unwrap() - 0.6).abs() < 1e-12);
    }
}
