//! Do groups differ in time to event? The log-rank test and its weighted kin, for any number of groups, stratified.
//! Sources: Mantel (1966, Cancer Chemother. Rep. 50, 163–170); weights of Gehan & Breslow, Tarone & Ware, Peto & Peto in
//! Klein & Moeschberger (2003), Survival Analysis, section 7.3; strata add observed, expected and variance (7.5).
//! Limit: the chi-squared law needs some events in each group; with a few specimens permute instead.

use std::collections::BTreeSet;

use super::{Follow, event_times, falls_at};
use crate::stats::distributions::chi_squared_tail;
use crate::stats::linear::quadratic_form_of_inverse;

/// A unit with its group and stratum.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Member {
    /// How long it was followed.
    pub follow: Follow,
    /// Group, 0 to k − 1.
    pub group: usize,
    /// Stratum (specimen); all equal without strata.
    pub stratum: u32,
}

/// What an event time counts for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Weight {
    /// 1: the log-rank test.
    Equal,
    /// Units at risk: Gehan–Breslow.
    AtRisk,
    /// Its square root: Tarone–Ware.
    RootAtRisk,
    /// Share still without event just before: Peto–Peto.
    Survival,
}

/// Result of a log-rank test.
#[derive(Debug, Clone, PartialEq)]
pub struct LogRank {
    /// Events seen in each group (weighted).
    pub observed: Vec<f64>,
    /// Events expected in each group without a difference (weighted).
    pub expected: Vec<f64>,
    /// Chi-squared statistic.
    pub chi_squared: f64,
    /// Its degrees of freedom: groups − 1.
    pub dof: usize,
    /// p by the chi-squared law.
    pub p: f64,
}

/// Log-rank test over `groups` groups. `None` under two groups, or when no event time saw two of them at risk.
///
/// ```
/// use veerlog::stats::survival::{logrank::{logrank, Member, Weight}, Follow};
/// let units: Vec<Member> = [(1.0, 0), (2.0, 0), (3.0, 0), (7.0, 1), (8.0, 1), (9.0, 1)]
///     .map(|(time, group)| Member { follow: Follow { time, event: true }, group, stratum: 0 })
///     .to_vec();
/// assert!(logrank(&units, 2, Weight::Equal).unwrap().p < 0.05);
/// ```
#[must_use]
pub fn logrank(members: &[Member], groups: usize, weight: Weight) -> Option<LogRank> {
    if groups < 2 {
        return None;
    }
    let mut sums =
        Sums { observed: vec![0.0; groups], expected: vec![0.0; groups], covariance: vec![vec![0.0; groups]; groups] };
    let strata: BTreeSet<u32> = members.iter().map(|m| m.stratum).collect();
    for stratum in strata {
        let own: Vec<Member> = members.iter().copied().filter(|m| m.stratum == stratum).collect();
        sums.add_stratum(&own, weight);
    }
    // One group is determined by the others: leave the last out.
    let dof = groups - 1;
    let excess: Vec<f64> = (0..dof).map(|g| sums.observed[g] - sums.expected[g]).collect();
    let covariance: Vec<Vec<f64>> = sums.covariance[..dof].iter().map(|row| row[..dof].to_vec()).collect();
    let chi_squared = quadratic_form_of_inverse(&covariance, &excess)?;
    let p = chi_squared_tail(chi_squared, dof as f64);
    Some(LogRank { observed: sums.observed, expected: sums.expected, chi_squared, dof, p })
}

struct Sums {
    observed: Vec<f64>,
    expected: Vec<f64>,
    covariance: Vec<Vec<f64>>,
}

impl Sums {
    fn add_stratum(&mut self, members: &[Member], weight: Weight) {
        let groups = self.observed.len();
        let mut survival = 1.0;
        for time in event_times(members.iter().map(|m| m.follow)) {
            let count = |g: usize, keep: &dyn Fn(Follow) -> bool| {
                members.iter().filter(|m| m.group == g && keep(m.follow)).count() as f64
            };
            let at_risk: Vec<f64> = (0..groups).map(|g| count(g, &|f| f.time >= time)).collect();
            let events: Vec<f64> = (0..groups).map(|g| count(g, &|f| falls_at(f, time))).collect();
            let (n, d) = (at_risk.iter().sum::<f64>(), events.iter().sum::<f64>());
            let w = match weight {
                Weight::Equal => 1.0,
                Weight::AtRisk => n,
                Weight::RootAtRisk => libm::sqrt(n),
                Weight::Survival => survival,
            };
            survival *= 1.0 - d / n;
            // Hypergeometric variance of d events among n at risk; none when all at risk fall at once.
            let scatter = if n > 1.0 { w * w * d * (n - d) / (n - 1.0) } else { 0.0 };
            for g in 0..groups {
                self.observed[g] += w * events[g];
                self.expected[g] += w * d * at_risk[g] / n;
                for h in 0..groups {
                    let same = if g == h { 1.0 } else { 0.0 };
                    self.covariance[g][h] += scatter * at_risk[g] / n * (same - at_risk[h] / n);
                }
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    fn member(time: f64, group: usize, stratum: u32) -> Member {
        Member { follow: Follow { time, event: true }, group, stratum }
    }

    #[test]
    fn groups_that_never_meet_cannot_be_compared() {
        assert_eq!(logrank(&[], 2, Weight::Equal), None);
        assert_eq!(logrank(&[member(1.0, 0, 0)], 1, Weight::Equal), None);
        // Each stratum holds one group: nothing to compare within.
        let apart: Vec<Member> = (1..5).map(|i| member(f64::from(i), (i % 2) as usize, (i % 2) as u32)).collect();
        assert_eq!(logrank(&apart, 2, Weight::Equal), None);
    }

    #[test]
    fn order_of_groups_does_not_matter_with_three() {
        let units: Vec<Member> =
            (0..24_u32).map(|i| member(f64::from((i * 7) % 24), (i % 3) as usize, i % 2)).collect();
        let turned: Vec<Member> = units.iter().map(|m| Member { group: (m.group + 1) % 3, ..*m }).collect();
        let (a, b) = (logrank(&units, 3, Weight::Equal).unwrap(), logrank(&turned, 3, Weight::Equal).unwrap());
        assert_abs_diff_eq!(a.chi_squared, b.chi_squared, epsilon = 1e-9);
        assert_eq!(a.dof, 2);
    }
}
