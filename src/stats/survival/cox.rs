//! Proportional hazards with one covariate: Cox (1972, J. R. Stat. Soc. B 34, 187–220), ties by Efron (1977, J. Am. Stat.
//! Assoc. 72, 557–565) or Breslow (1974), variance robust to clusters by Lin & Wei (1989, J. Am. Stat. Assoc. 84, 1074–1078).
//! Limit: the robust variance needs about ten clusters; with fewer, permute.

use std::collections::BTreeMap;

use super::{Follow, event_times, falls_at};

/// A unit with its covariate and cluster.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Exposed {
    /// How long it was followed.
    pub follow: Follow,
    /// The covariate (a dose).
    pub x: f64,
    /// Cluster (specimen) for the robust variance.
    pub cluster: u32,
}

/// How events at one time share their risk set.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Ties {
    /// Efron (1977): each of d tied events leaves its share.
    Efron,
    /// Breslow (1974): all d see the whole risk set.
    Breslow,
}

/// A fitted log hazard ratio.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct CoxFit {
    /// Log hazard ratio for a unit of the covariate.
    pub log_ratio: f64,
    /// Standard error from the information.
    pub se: f64,
    /// Standard error robust to correlation within clusters.
    pub robust_se: f64,
    /// Events.
    pub events: usize,
    /// Clusters.
    pub clusters: usize,
}

/// Steps of Newton's method at most.
const MAX_STEPS: usize = 50;
/// A log ratio this many covariate ranges large means that the likelihood rises for ever.
const MONOTONE: f64 = 25.0;

/// Fits the log hazard ratio. `None` without events, without spread of the covariate in any risk set, or when the
/// likelihood rises for ever (the covariate orders the events completely): no finite ratio exists.
///
/// ```
/// use veerlog::stats::survival::{cox::{cox, Exposed, Ties}, Follow};
/// let unit = |time, x: f64, cluster| Exposed { follow: Follow { time, event: true }, x, cluster };
/// let units = [unit(1.0, 0.0, 1), unit(2.0, 1.0, 2), unit(3.0, 0.0, 3), unit(4.0, 0.0, 4), unit(5.0, 1.0, 5)];
/// assert!(cox(&units, Ties::Efron).unwrap().log_ratio < 0.0);
/// ```
#[must_use]
pub fn cox(units: &[Exposed], ties: Ties) -> Option<CoxFit> {
    let times = event_times(units.iter().map(|u| u.follow));
    let (low, high) = units.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |r, u| (r.0.min(u.x), r.1.max(u.x)));
    let range = high - low;
    if times.is_empty() || range.is_nan() || range <= 0.0 {
        return None;
    }
    // The covariate is centred: exp() then stays in range, and the ratio does not change.
    let centred: Vec<Exposed> = units.iter().map(|u| Exposed { x: u.x - 0.5 * (low + high), ..*u }).collect();
    let mut beta = 0.0;
    for _ in 0..MAX_STEPS {
        let (score, information) = derivatives(&centred, &times, ties, beta);
        if information <= 0.0 {
            return None;
        }
        // A step is held to one e-fold of hazard over the range of the covariate.
        let step = (score / information).clamp(-1.0 / range, 1.0 / range);
        beta += step;
        if (beta * range).abs() > MONOTONE {
            return None;
        }
        if step.abs() * range < 1e-12 {
            break;
        }
    }
    let (_, information) = derivatives(&centred, &times, ties, beta);
    let mut by_cluster: BTreeMap<u32, f64> = BTreeMap::new();
    for (unit, residual) in centred.iter().zip(score_residuals(&centred, &times, ties, beta)) {
        *by_cluster.entry(unit.cluster).or_default() += residual;
    }
    let meat: f64 = by_cluster.values().map(|r| r * r).sum();
    Some(CoxFit {
        log_ratio: beta,
        se: 1.0 / libm::sqrt(information),
        robust_se: libm::sqrt(meat) / information,
        events: units.iter().filter(|u| u.follow.event).count(),
        clusters: by_cluster.len(),
    })
}

/// Sums over a risk set as one of its tied events sees it.
#[derive(Clone, Copy)]
struct RiskSet {
    /// Share of the tied events already gone.
    gone: f64,
    total: f64,
    mean: f64,
    variance: f64,
}

/// The risk sets of the d events at `time`, in turn.
fn risk_sets(units: &[Exposed], time: f64, ties: Ties, beta: f64) -> Vec<RiskSet> {
    let moments = |keep: &dyn Fn(Follow) -> bool| {
        units.iter().filter(|u| keep(u.follow)).fold([0.0; 3], |m, u| {
            let risk = libm::exp(beta * u.x);
            [m[0] + risk, m[1] + risk * u.x, m[2] + risk * u.x * u.x]
        })
    };
    let all = moments(&|f| f.time >= time);
    let falling = moments(&|f| falls_at(f, time));
    let d = units.iter().filter(|u| falls_at(u.follow, time)).count();
    (0..d)
        .map(|k| {
            let gone = if ties == Ties::Efron { k as f64 / d as f64 } else { 0.0 };
            let [total, first, second]: [f64; 3] = std::array::from_fn(|i| all[i] - gone * falling[i]);
            let mean = first / total;
            RiskSet { gone, total, mean, variance: second / total - mean * mean }
        })
        .collect()
}

/// First derivative of the log partial likelihood and minus its second.
fn derivatives(units: &[Exposed], times: &[f64], ties: Ties, beta: f64) -> (f64, f64) {
    let (mut score, mut information) = (0.0, 0.0);
    for &time in times {
        score += units.iter().filter(|u| falls_at(u.follow, time)).map(|u| u.x).sum::<f64>();
        for set in risk_sets(units, time, ties, beta) {
            score -= set.mean;
            information += set.variance;
        }
    }
    (score, information)
}

/// Each unit's share of the score: its events less its expected events, times its distance from the risk set's mean.
fn score_residuals(units: &[Exposed], times: &[f64], ties: Ties, beta: f64) -> Vec<f64> {
    let mut residuals = vec![0.0; units.len()];
    for &time in times {
        let sets = risk_sets(units, time, ties, beta);
        let d = sets.len() as f64;
        for (unit, residual) in units.iter().zip(&mut residuals).filter(|(u, _)| u.follow.time >= time) {
            let falls = falls_at(unit.follow, time);
            for set in &sets {
                let distance = unit.x - set.mean;
                let exposed = if falls { 1.0 - set.gone } else { 1.0 };
                *residual -= exposed * libm::exp(beta * unit.x) / set.total * distance;
                if falls {
                    *residual += distance / d;
                }
            }
        }
    }
    residuals
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_relative_eq;

    fn units() -> Vec<Exposed> {
        (0..30_u32)
            .map(|i| Exposed {
                follow: Follow { time: f64::from((i * 11) % 17 + 1), event: i % 4 != 0 },
                x: f64::from((i * 7) % 5) * 10.0,
                cluster: i,
            })
            .collect()
    }

    #[test]
    fn copies_of_a_specimen_add_no_certainty() {
        let once = units();
        let twice: Vec<Exposed> = once.iter().chain(&once).copied().collect();
        let (a, b) = (cox(&once, Ties::Breslow).unwrap(), cox(&twice, Ties::Breslow).unwrap());
        assert_relative_eq!(a.log_ratio, b.log_ratio, epsilon = 1e-9);
        assert_relative_eq!(a.robust_se, b.robust_se, max_relative = 1e-9);
        assert_relative_eq!(a.se, b.se * 2.0_f64.sqrt(), max_relative = 1e-9);
    }

    #[test]
    fn residuals_add_up_to_the_score() {
        let all = units();
        let times = event_times(all.iter().map(|u| u.follow));
        for ties in [Ties::Efron, Ties::Breslow] {
            let (score, _) = derivatives(&all, &times, ties, 0.02);
            let sum: f64 = score_residuals(&all, &times, ties, 0.02).iter().sum();
            assert_relative_eq!(score, sum, epsilon = 1e-9);
        }
    }

    #[test]
    fn a_covariate_that_orders_all_events_has_no_finite_ratio() {
        let ordered: Vec<Exposed> = (0..8_u32)
            .map(|i| Exposed { follow: Follow { time: f64::from(i + 1), event: true }, x: -f64::from(i), cluster: i })
            .collect();
        assert_eq!(cox(&ordered, Ties::Efron), None);
        assert_eq!(cox(&[], Ties::Efron), None);
    }
}
