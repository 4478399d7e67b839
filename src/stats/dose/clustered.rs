//! Limits of a dose when trials of one specimen share a fate.
//!
//! Method: the profile of the deviance, its rise stretched by how much wider specimens scatter than independent trials
//! would (Rotnitzky & Jewell 1990, Biometrika 77, 485–497), at each dose by the ratio of the two variances of the line there;
//! Student's t with specimens − 1 degrees of freedom in place of the normal. The wide variance is the jackknife over specimens
//! in one step (Bell & McCaffrey 2002, Survey Methodology 28, 169–181, their JK), which holds for unequal specimens.
//! Limit: with fewer than three specimens, or when one alone holds the slope, nothing is given.

use super::{DoseFit, Trials, score};
use crate::stats::distributions::t_critical;

/// Fewest clusters from which limits are given.
pub const MIN_CLUSTERS: usize = 3;

/// A line with a covariance that allows for clusters.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Clustered {
    /// The line.
    pub fit: DoseFit,
    /// Variances of intercept and slope and their covariance over clusters, in the order aa, ab, bb.
    pub covariance: [f64; 3],
    /// Clusters.
    pub clusters: usize,
}

/// A part of the information (aa, ab, bb) and of the score (a, b).
#[derive(Debug, Clone, Copy, Default)]
struct Part {
    score: [f64; 2],
    information: [f64; 3],
}

impl DoseFit {
    /// The line with its covariance over clusters; `clusters` names the cluster of each of the `trials` it was fitted to.
    /// `None` under [`MIN_CLUSTERS`], or when without one of them no slope is left.
    #[must_use]
    pub fn clustered(&self, trials: &[Trials], clusters: &[u32]) -> Option<Clustered> {
        let mut names: Vec<u32> = clusters.to_vec();
        names.sort_unstable();
        names.dedup();
        if names.len() < MIN_CLUSTERS {
            return None;
        }
        let part = |name: u32| {
            let own: Vec<Trials> = trials.iter().zip(clusters).filter(|(_, c)| **c == name).map(|(t, _)| *t).collect();
            let [u, v, aa, ab, bb] = score(&own, self.link, |x| self.intercept + self.slope * x);
            Part { score: [u, v], information: [aa, ab, bb] }
        };
        let parts: Vec<Part> = names.into_iter().map(part).collect();
        let whole = parts.iter().fold([0.0; 3], |sum, p| std::array::from_fn(|i| sum[i] + p.information[i]));
        let g = parts.len() as f64;
        let mut covariance = [0.0; 3];
        for part in &parts {
            let rest: [f64; 3] = std::array::from_fn(|i| whole[i] - part.information[i]);
            let [a, b] = solve(rest, part.score)?;
            for (sum, add) in covariance.iter_mut().zip([a * a, a * b, b * b]) {
                *sum += (g - 1.0) / g * add;
            }
        }
        Some(Clustered { fit: *self, covariance, clusters: parts.len() })
    }
}

/// Solves a symmetric system of two rows; `None` when it is singular to rounding.
fn solve([aa, ab, bb]: [f64; 3], [u, v]: [f64; 2]) -> Option<[f64; 2]> {
    let det = aa * bb - ab * ab;
    (det > 1e-9 * aa * bb).then(|| [(bb * u - ab * v) / det, (aa * v - ab * u) / det])
}

impl Clustered {
    /// Student's t for the limits.
    fn t(&self, confidence: f64) -> f64 {
        t_critical(confidence, self.clusters as f64 - 1.0)
    }

    /// Variance of η at `dose` over clusters, by that of independent trials; at least `floor`.
    #[must_use]
    pub fn stretch(&self, dose: f64, floor: f64) -> f64 {
        let at = |[aa, ab, bb]: [f64; 3]| aa + 2.0 * dose * ab + dose * dose * bb;
        (at(self.covariance) / at(self.fit.covariance)).max(floor)
    }

    /// Standard error over clusters of the dose at which the fitted share is `share`.
    #[must_use]
    pub fn se_dose(&self, share: f64) -> f64 {
        DoseFit { covariance: self.covariance, ..self.fit }.se_dose(share)
    }

    /// Limits of that dose. `floor` is the least stretch: 1 for counts, which cannot scatter less than independent trials do;
    /// 0 for shares whose number of trials is only a weight. An end that does not exist is `None`.
    #[must_use]
    pub fn limits(&self, trials: &[Trials], share: f64, confidence: f64, floor: f64) -> [Option<f64>; 2] {
        let t = self.t(confidence);
        self.fit.profile_to(trials, share, |x| t * t * self.stretch(x, floor))
    }

    /// Whether the slope is told from none at this confidence, clusters allowed for.
    #[must_use]
    pub fn slope_is_shown(&self, confidence: f64, floor: f64) -> bool {
        let variance = self.covariance[2].max(floor * self.fit.covariance[2]);
        self.fit.slope.abs() > self.t(confidence) * libm::sqrt(variance)
    }

    /// Half the width of the plain limits (t times the standard error): quick, for planning. Infinite where the slope is not
    /// told from none.
    #[must_use]
    pub fn plain_half_width(&self, share: f64, confidence: f64, floor: f64) -> f64 {
        if !self.slope_is_shown(confidence, floor) {
            return f64::INFINITY;
        }
        let stretch = self.stretch(self.fit.dose_for(share), floor);
        self.t(confidence) * self.fit.se_dose(share) * libm::sqrt(stretch)
    }
}

#[cfg(test)]
mod tests {
    use super::super::{Link, fit};
    use super::*;
    use approx::assert_relative_eq;

    fn trials() -> (Vec<Trials>, Vec<u32>) {
        let yes = [[0.0, 2.0, 5.0, 6.0], [1.0, 1.0, 3.0, 6.0], [0.0, 3.0, 5.0, 5.0], [1.0, 2.0, 4.0, 6.0]];
        let one = |c: usize, d: usize| Trials { dose: 60.0 * d as f64, tried: 6.0, yes: yes[c][d] };
        (0..16).map(|i| (one(i / 4, i % 4), (i / 4) as u32)).unzip()
    }

    /// The jackknife with full refits, the slow obvious version of the one-step covariance.
    #[test]
    fn one_step_is_near_the_full_jackknife() {
        let (trials, clusters) = trials();
        let line = fit(&trials, Link::Logit).unwrap();
        let found = line.clustered(&trials, &clusters).unwrap();
        let without = |c: u32| {
            let rest: Vec<Trials> = trials.iter().zip(&clusters).filter(|(_, k)| **k != c).map(|(t, _)| *t).collect();
            fit(&rest, Link::Logit).unwrap().dose_for(0.5) - line.dose_for(0.5)
        };
        let jackknife: f64 = (0..4).map(|c| 0.75 * without(c) * without(c)).sum();
        assert_relative_eq!(found.se_dose(0.5), jackknife.sqrt(), max_relative = 0.15);
    }

    #[test]
    fn specimens_that_differ_widen_the_limits() {
        let (trials, clusters) = trials();
        let width = |trials: &[Trials]| {
            let line = fit(trials, Link::Logit).unwrap();
            let [low, high] = line.clustered(trials, &clusters).unwrap().limits(trials, 0.5, 0.95, 1.0);
            high.unwrap() - low.unwrap()
        };
        let mut apart = trials.clone();
        for (t, c) in apart.iter_mut().zip(&clusters) {
            t.yes = if c % 2 == 0 { (t.yes + 2.0).min(6.0) } else { (t.yes - 2.0).max(0.0) };
        }
        assert!(width(&apart) > 1.5 * width(&trials), "{} {}", width(&apart), width(&trials));
    }

    #[test]
    fn too_few_or_one_that_holds_the_slope() {
        let (trials, clusters) = trials();
        let line = fit(&trials, Link::Logit).unwrap();
        let two: Vec<u32> = clusters.iter().map(|c| c / 2).collect();
        assert_eq!(line.clustered(&trials, &two), None);
        // All but cluster 0 at one dose: without it there is no slope.
        let flat: Vec<Trials> =
            trials.iter().zip(&clusters).map(|(t, c)| if *c > 0 { Trials { dose: 60.0, ..*t } } else { *t }).collect();
        assert_eq!(fit(&flat, Link::Logit).unwrap().clustered(&flat, &clusters), None);
    }
}
