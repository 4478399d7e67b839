//! The share still without event against time: Kaplan & Meier (1958, J. Am. Stat. Assoc. 53, 457–481), Greenwood's
//! variance, intervals on the log-minus-log scale (Kalbfleisch & Prentice 1980), median, restricted mean.
//! Limit: the interval is for independent units; several runs of a specimen need a jackknife over specimens.

use super::{Follow, event_times, falls_at};
use crate::stats::distributions::normal_quantile;

/// The curve just after one event time.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Step {
    /// The event time.
    pub time: f64,
    /// Units still followed just before it.
    pub at_risk: usize,
    /// Events at it.
    pub events: usize,
    /// Share without event from here on.
    pub survival: f64,
    /// Greenwood's Σ d/(n(n − d)); infinite once all are gone.
    pub greenwood: f64,
}

impl Step {
    /// Standard error of the share, Greenwood. 0 once all are gone.
    #[must_use]
    pub fn se(&self) -> f64 {
        if self.survival > 0.0 { self.survival * libm::sqrt(self.greenwood) } else { 0.0 }
    }

    /// Interval of the share on the log-minus-log scale; `None` where the share is 0 or 1.
    #[must_use]
    pub fn interval(&self, confidence: f64) -> Option<[f64; 2]> {
        if self.survival <= 0.0 || self.survival >= 1.0 {
            return None;
        }
        let z = normal_quantile(0.5 + 0.5 * confidence);
        let half = z * libm::sqrt(self.greenwood) / libm::log(self.survival).abs();
        let end = |shift: f64| libm::pow(self.survival, libm::exp(shift));
        Some([end(half), end(-half)])
    }
}

/// A Kaplan–Meier curve.
#[derive(Debug, Clone, PartialEq)]
pub struct Curve {
    /// In order of time.
    pub steps: Vec<Step>,
}

/// A share within rounding of one half is one half.
const HALF: f64 = 0.5 + 1e-12;

impl Curve {
    /// The curve of `follows`, in any order.
    ///
    /// ```
    /// use veerlog::stats::survival::{kaplan_meier::Curve, Follow};
    /// let runs = [(3.0, true), (5.0, false), (8.0, true)].map(|(time, event)| Follow { time, event });
    /// let curve = Curve::of(&runs);
    /// assert!((curve.survival_at(4.0) - 2.0 / 3.0).abs() < 1e-12);
    /// assert_eq!(curve.median(), Some(8.0));
    /// ```
    #[must_use]
    pub fn of(follows: &[Follow]) -> Self {
        let (mut survival, mut greenwood) = (1.0, 0.0);
        let steps = event_times(follows.iter().copied())
            .into_iter()
            .map(|time| {
                let at_risk = follows.iter().filter(|f| f.time >= time).count();
                let events = follows.iter().filter(|f| falls_at(**f, time)).count();
                let (n, d) = (at_risk as f64, events as f64);
                survival *= 1.0 - d / n;
                greenwood += if events < at_risk { d / (n * (n - d)) } else { f64::INFINITY };
                Step { time, at_risk, events, survival, greenwood }
            })
            .collect();
        Self { steps }
    }

    /// Share without event at `time` (events at `time` counted); 1 before the first event.
    #[must_use]
    pub fn survival_at(&self, time: f64) -> f64 {
        self.step_at(time).map_or(1.0, |s| s.survival)
    }

    /// The last step at or before `time`; `None` before the first event.
    #[must_use]
    pub fn step_at(&self, time: f64) -> Option<&Step> {
        self.steps[..self.steps.partition_point(|s| s.time <= time)].last()
    }

    /// First time at which at most half are without event; `None` when it never comes.
    #[must_use]
    pub fn median(&self) -> Option<f64> {
        self.steps.iter().find(|s| s.survival <= HALF).map(|s| s.time)
    }

    /// Interval of the median: where the curve's lower and upper limits first reach one half (Brookmeyer & Crowley 1982,
    /// Biometrics 38, 29–41). An end that is never reached is `None`.
    #[must_use]
    pub fn median_interval(&self, confidence: f64) -> [Option<f64>; 2] {
        let reached = |end: usize| {
            let limit = |s: &Step| s.interval(confidence).map_or(s.survival, |i| i[end]);
            self.steps.iter().find(|s| limit(s) <= HALF).map(|s| s.time)
        };
        [reached(0), reached(1)]
    }

    /// Restricted mean: area under the curve from 0 to `until`.
    #[must_use]
    pub fn restricted_mean(&self, until: f64) -> f64 {
        let (mut area, mut from, mut level) = (0.0, 0.0, 1.0);
        for step in self.steps.iter().take_while(|s| s.time < until) {
            area += level * (step.time - from);
            (from, level) = (step.time, step.survival);
        }
        area + level * (until - from)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    #[test]
    fn nobody_followed_and_nothing_happened() {
        let empty = Curve::of(&[]);
        assert_eq!((empty.median(), empty.median_interval(0.95)), (None, [None, None]));
        assert_abs_diff_eq!(empty.restricted_mean(5.0), 5.0);
        assert!(Curve::of(&[Follow { time: 3.0, event: false }]).steps.is_empty());
    }

    #[test]
    fn all_gone_is_zero_without_an_interval() {
        let curve = Curve::of(&[Follow { time: 2.0, event: true }, Follow { time: 2.0, event: true }]);
        let last = curve.steps[0];
        assert_abs_diff_eq!(last.survival, 0.0);
        assert_eq!(last.interval(0.95), None);
        assert_abs_diff_eq!(last.se(), 0.0);
        assert_abs_diff_eq!(curve.restricted_mean(10.0), 2.0);
    }
}
