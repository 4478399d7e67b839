//! What the load did to direction, speed and branching: values of groups, differences, tests. The specimen is the unit.
//!
//! A run has one value; a specimen's value in a group is the mean of its runs there. Where two specimens or more, and at
//! least half of them, saw both loads, the difference is the mean of theirs within each (paired t); else it is the difference
//! of the specimens' means (Welch 1947, Biometrika 34, 28–35; one specimen against several takes the scatter of the several).
//! Tests by [`Arrangements`] of the same difference.
//! Limit: t intervals take specimens' means as near normal; with two or three they are wide, and should be.

use std::collections::BTreeMap;

use serde::Serialize;

use super::groups::{Contrast, Group};
use super::{RunRecord, Specimens};
use crate::stats::arrangements::{Arrangements, Tested};
use crate::stats::distributions::t_critical;
use crate::stats::order::{mean, variance};

/// What is compared.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Quantity {
    /// Mean cos 2γ to the plating edge over the length grown.
    AlongPlates,
    /// Mean cos 2Δ to the load axis; without a load there is none.
    ToLoad,
    /// Share of the growth within 15° of the expected axis.
    NearExpected,
    /// Share of the filaments turned aside.
    Turned,
    /// Rate of depth, µm/min.
    Rate,
    /// Ends of filaments on a millimetre of length.
    EndsPerMm,
}

/// All quantities, in the order of the page.
pub const QUANTITIES: [Quantity; 6] = [
    Quantity::AlongPlates,
    Quantity::ToLoad,
    Quantity::NearExpected,
    Quantity::Turned,
    Quantity::Rate,
    Quantity::EndsPerMm,
];

impl Quantity {
    /// In words.
    #[must_use]
    pub fn words(self) -> &'static str {
        match self {
            Self::AlongPlates => "alignment with the plates",
            Self::ToLoad => "alignment with the load axis",
            Self::NearExpected => "share of growth within 15° of the expected axis",
            Self::Turned => "share of filaments turned aside",
            Self::Rate => "depth rate",
            Self::EndsPerMm => "branching: ends on a millimetre of filament",
        }
    }

    /// Its unit.
    #[must_use]
    pub fn unit(self) -> &'static str {
        match self {
            Self::AlongPlates | Self::ToLoad | Self::NearExpected | Self::Turned => "1",
            Self::Rate => "µm/min",
            Self::EndsPerMm => "1/mm",
        }
    }

    /// The values that can be.
    fn bounds(self) -> [f64; 2] {
        match self {
            Self::AlongPlates | Self::ToLoad => [-1.0, 1.0],
            Self::NearExpected | Self::Turned => [0.0, 1.0],
            Self::Rate => [f64::NEG_INFINITY, f64::INFINITY],
            Self::EndsPerMm => [0.0, f64::INFINITY],
        }
    }

    /// The value of a run; `axis` is the expected axis for runs whose load makes none.
    #[must_use]
    pub fn of(self, run: &RunRecord, axis: Option<f64>) -> Option<f64> {
        match self {
            Self::AlongPlates => run.along_plates(),
            Self::ToLoad => run.to_load(),
            Self::NearExpected => run.near_expected(axis),
            Self::Turned => {
                let (tried, yes) = run.turned();
                (tried > 0).then(|| yes as f64 / tried as f64)
            }
            Self::Rate => run.rate_um_per_s.map(|rate| 60.0 * rate),
            Self::EndsPerMm => run.ends_per_mm(),
        }
    }
}

/// A value over specimens.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Mean {
    /// Mean over specimens, each as much as the other.
    pub value: f64,
    /// 95 % interval; absent for one specimen.
    pub ci95: Option<[f64; 2]>,
    /// Specimens with a value.
    pub specimens: usize,
    /// Runs with a value.
    pub runs: usize,
}

/// A difference of two groups.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Gap {
    /// Treated less control.
    pub value: f64,
    /// 95 % interval; absent where too few specimens saw either.
    pub ci95: Option<[f64; 2]>,
    /// Whether it is taken within specimens that saw both.
    pub within_specimens: bool,
    /// Specimens that it rests on.
    pub specimens: usize,
    /// Smallest difference that these specimens would show with 80 % power at 5 %.
    pub smallest_seen: Option<f64>,
    /// The permutation test; absent where nothing can change places.
    pub test: Option<Tested>,
    /// p adjusted over the primary contrasts (Holm); absent for the others.
    pub p_holm: Option<f64>,
}

/// What a quantity is in every group, and how the others differ from the control.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Effect {
    /// The quantity.
    pub quantity: Quantity,
    /// A value a group, in the order of the groups.
    pub groups: Vec<Option<Mean>>,
    /// The difference of each group from the control, in the order of the groups; absent for the control itself.
    pub differences: Vec<Option<Gap>>,
}

/// Confidence of the intervals, and of the test for which the power is given.
const CONFIDENCE: f64 = 0.95;
/// Power for which the smallest difference is given.
const POWER: f64 = 0.8;

/// All effects. `seed` is for tests with too many arrangements.
#[must_use]
pub fn effects(
    records: &[RunRecord],
    specimens: &Specimens,
    groups: &[Group],
    contrast: Option<Contrast>,
    seed: u64,
) -> Vec<Effect> {
    QUANTITIES
        .iter()
        .map(|&quantity| {
            let common = contrast.and_then(|c| expected_axis(records, &groups[c.treated]));
            let means = groups.iter().map(|g| {
                let axis = expected_axis(records, g).or(common);
                let units = units(specimens, g, |i| quantity.of(&records[i], axis));
                group_mean(&units, quantity.bounds())
            });
            let differences = (0..groups.len()).map(|treated| {
                let control = contrast?.control;
                let axis = expected_axis(records, &groups[treated]);
                let pair = [control, treated].map(|g| units(specimens, &groups[g], |i| quantity.of(&records[i], axis)));
                if control == treated { None } else { difference(&pair, quantity.bounds(), seed) }
            });
            Effect { quantity, groups: means.collect(), differences: differences.collect() }
        })
        .collect()
}

/// The axis that a group's load makes expected, from the plating edge; `None` where it moved or there is no load.
fn expected_axis(records: &[RunRecord], group: &Group) -> Option<f64> {
    let axes: Option<Vec<f64>> = group.members.iter().map(|&i| records[i].expected_axis()).collect();
    crate::stats::axial::axial_mean(&axes?)?.axis_deg
}

/// A run's specimen and value.
pub(super) type Unit = (usize, f64);

/// The runs of a group that have a value.
pub(super) fn units(specimens: &Specimens, group: &Group, value: impl Fn(usize) -> Option<f64>) -> Vec<Unit> {
    group.members.iter().filter_map(|&i| Some((specimens.of(i), value(i)?))).collect()
}

/// Mean of each specimen.
fn by_specimen(units: &[Unit]) -> BTreeMap<usize, f64> {
    let mut sums: BTreeMap<usize, (f64, f64)> = BTreeMap::new();
    for (specimen, value) in units {
        let sum = sums.entry(*specimen).or_default();
        *sum = (sum.0 + value, sum.1 + 1.0);
    }
    sums.into_iter().map(|(specimen, (sum, n))| (specimen, sum / n)).collect()
}

fn group_mean(units: &[Unit], [least, most]: [f64; 2]) -> Option<Mean> {
    let values: Vec<f64> = by_specimen(units).into_values().collect();
    let value = mean(&values)?;
    let n = values.len() as f64;
    let ci95 = variance(&values).filter(|_| values.len() > 1).map(|v| {
        let half = t_critical(CONFIDENCE, n - 1.0) * libm::sqrt(v / n);
        [(value - half).max(least), (value + half).min(most)]
    });
    Some(Mean { value, ci95, specimens: values.len(), runs: units.len() })
}

/// The difference of two groups (control, treated) with interval and test. `None` where one of them has no value.
pub(super) fn difference([control, treated]: &[Vec<Unit>; 2], [least, most]: [f64; 2], seed: u64) -> Option<Gap> {
    let pair = Pair::of(control, treated)?;
    let span = most - least;
    let interval = pair.spread().map(|(se, dof)| {
        let half = t_critical(CONFIDENCE, dof) * se;
        [(pair.value - half).max(-span), (pair.value + half).min(span)]
    });
    let smallest =
        pair.spread().map(|(se, dof)| (t_critical(CONFIDENCE, dof) + t_critical(2.0 * POWER - 1.0, dof)) * se);
    let all: Vec<Unit> = control.iter().chain(treated).copied().collect();
    let labels: Vec<usize> = (0..all.len()).map(|i| usize::from(i >= control.len())).collect();
    let own: Vec<usize> = all.iter().map(|(specimen, _)| *specimen).collect();
    let keep: Vec<usize> = if pair.within { both(&own, &labels) } else { (0..all.len()).collect() };
    let kept: Vec<Unit> = keep.iter().map(|&i| all[i]).collect();
    let [own, labels] = [&own, &labels].map(|list| keep.iter().map(|&i| list[i]).collect::<Vec<usize>>());
    let statistic = |labels: &[usize]| rearranged(&kept, labels, pair.within).map(f64::abs);
    let test = Arrangements::of(&own, &labels).test(seed, statistic);
    Some(Gap {
        value: pair.value,
        ci95: interval,
        within_specimens: pair.within,
        specimens: pair.specimens,
        smallest_seen: smallest.filter(|s| s.is_finite() && *s > 0.0),
        test,
        p_holm: None,
    })
}

/// The difference under other labels, as [`Pair`] takes it, without its bookkeeping: it is asked for thousands of times.
fn rearranged(units: &[Unit], labels: &[usize], within: bool) -> Option<f64> {
    let most = units.iter().map(|(specimen, _)| *specimen).max()?;
    let mut sums = vec![[(0.0, 0.0); 2]; most + 1];
    for ((specimen, value), label) in units.iter().zip(labels) {
        let sum = &mut sums[*specimen][*label];
        *sum = (sum.0 + value, sum.1 + 1.0);
    }
    let mean_of = |(sum, n): (f64, f64)| (n > 0.0).then(|| sum / n);
    let (mut totals, mut counts) = ([0.0; 2], [0.0; 2]);
    for pair in &sums {
        let means = pair.map(mean_of);
        if within && means.contains(&None) {
            continue;
        }
        for (label, mean) in means.iter().enumerate() {
            if let Some(mean) = mean {
                totals[label] += mean;
                counts[label] += 1.0;
            }
        }
    }
    Some(mean_of((totals[1], counts[1]))? - mean_of((totals[0], counts[0]))?)
}

/// Units of those specimens that carry both labels.
fn both(specimens: &[usize], labels: &[usize]) -> Vec<usize> {
    let has = |specimen: usize, label: usize| specimens.iter().zip(labels).any(|(s, l)| *s == specimen && *l == label);
    (0..specimens.len()).filter(|&i| has(specimens[i], 0) && has(specimens[i], 1)).collect()
}

/// A difference and the specimens' values it comes from.
struct Pair {
    value: f64,
    within: bool,
    specimens: usize,
    /// Differences within specimens, or the means of either group.
    samples: [Vec<f64>; 2],
}

impl Pair {
    fn of(control: &[Unit], treated: &[Unit]) -> Option<Self> {
        let [a, b] = [control, treated].map(by_specimen);
        let shared = a.keys().filter(|s| b.contains_key(s)).count();
        let within = shared >= 2 && 2 * shared >= a.len() + b.len() - shared;
        if within {
            let differences: Vec<f64> = a.iter().filter_map(|(s, v)| Some(b.get(s)? - v)).collect();
            let value = mean(&differences)?;
            return Some(Self { value, within, specimens: differences.len(), samples: [differences, Vec::new()] });
        }
        let specimens = a.keys().chain(b.keys()).collect::<std::collections::BTreeSet<_>>().len();
        let samples = [a, b].map(|m| m.into_values().collect::<Vec<f64>>());
        let value = mean(&samples[1])? - mean(&samples[0])?;
        Some(Self { value, within, specimens, samples })
    }

    /// Standard error and degrees of freedom. A specimen in both groups makes it too wide rather than too narrow.
    fn spread(&self) -> Option<(f64, f64)> {
        let [a, b] = &self.samples;
        let (n, m) = (a.len() as f64, b.len() as f64);
        if self.within {
            return variance(a).filter(|_| a.len() > 1).map(|v| (libm::sqrt(v / n), n - 1.0));
        }
        match (variance(a).filter(|_| a.len() > 1), variance(b).filter(|_| b.len() > 1)) {
            (Some(va), Some(vb)) => {
                let (p, q) = (va / n, vb / m);
                let dof =
                    if p + q > 0.0 { (p + q) * (p + q) / (p * p / (n - 1.0) + q * q / (m - 1.0)) } else { n + m - 2.0 };
                Some((libm::sqrt(p + q), dof))
            }
            (Some(v), None) => Some((libm::sqrt(v * (1.0 + 1.0 / n)), n - 1.0)),
            (None, Some(v)) => Some((libm::sqrt(v * (1.0 + 1.0 / m)), m - 1.0)),
            (None, None) => None,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    const FREE: [f64; 2] = [f64::NEG_INFINITY, f64::INFINITY];

    #[test]
    fn specimens_that_saw_both_are_paired() {
        let control = vec![(0, 1.0), (1, 5.0), (2, 9.0)];
        let treated = vec![(0, 3.0), (0, 3.0), (1, 8.0), (2, 10.0), (7, 99.0)];
        let gap = difference(&[control, treated], FREE, 1).unwrap();
        assert_eq!((gap.within_specimens, gap.specimens), (true, 3));
        assert_abs_diff_eq!(gap.value, 2.0, epsilon = 1e-12);
        // Paired t of 2, 3, 1: mean 2, standard error 1/√3, t(2) 4.302653 (table, common practice).
        assert_abs_diff_eq!(gap.ci95.unwrap()[0], 2.0 - 4.302_652_73 / 3.0_f64.sqrt(), epsilon = 1e-6);
        // 3 ways to place one control among three runs of specimen 0, 2 in each of the others.
        assert_eq!(gap.test.unwrap().arrangements, 12);
        assert!(gap.test.unwrap().smallest_p > 0.05);
    }

    #[test]
    fn two_that_saw_both_do_not_speak_for_many_that_saw_one() {
        let control: Vec<Unit> = (0..6).map(|i| (i, i as f64)).collect();
        let treated: Vec<Unit> = (4..10).map(|i| (i, 3.0 + i as f64)).collect();
        let gap = difference(&[control, treated], FREE, 1).unwrap();
        assert_eq!((gap.within_specimens, gap.specimens), (false, 10));
        // The two change labels within, the eight others as wholes: 2 · 2 · (8 choose 4).
        assert_eq!(gap.test.unwrap().arrangements, 280);
    }

    #[test]
    fn whole_specimens_are_compared_by_welch() {
        let control = vec![(0, 1.0), (0, 3.0), (1, 4.0), (2, 6.0)];
        let treated = vec![(3, 10.0), (4, 12.0), (5, 17.0)];
        let gap = difference(&[control, treated], FREE, 1).unwrap();
        assert_abs_diff_eq!(gap.value, 9.0, epsilon = 1e-12);
        // Means 2, 4, 6 and 10, 12, 17: variances 4 and 13, Welch's degrees of freedom 3.1189.
        let se = (17.0_f64 / 3.0).sqrt();
        let dof = (17.0_f64 / 3.0).powi(2) / ((4.0_f64 / 3.0).powi(2) / 2.0 + (13.0_f64 / 3.0).powi(2) / 2.0);
        assert_abs_diff_eq!(gap.ci95.unwrap()[1], 9.0 + t_critical(0.95, dof) * se, epsilon = 1e-9);
        assert_abs_diff_eq!(gap.test.unwrap().p, 0.1, epsilon = 1e-12);
    }

    #[test]
    fn the_statistic_tested_is_the_difference_shown() {
        let units: Vec<Unit> = (0..14).map(|i| (i / 3, ((i * 37) % 11) as f64)).collect();
        for (labels, within) in
            [([0, 1, 1, 0, 0, 1, 1, 0, 1, 0, 1, 0, 1, 0], true), ([0, 0, 0, 1, 1, 1, 0, 0, 0, 1, 1, 1, 1, 1], false)]
        {
            let part = |g| units.iter().zip(labels).filter(|(_, l)| *l == g).map(|(u, _)| *u).collect::<Vec<Unit>>();
            let pair = Pair::of(&part(0), &part(1)).unwrap();
            assert_eq!(pair.within, within);
            assert_abs_diff_eq!(pair.value, rearranged(&units, &labels, within).unwrap(), epsilon = 1e-12);
        }
    }

    #[test]
    fn one_specimen_each_is_not_enough() {
        let gap = difference(&[vec![(0, 1.0), (0, 1.1)], vec![(1, 3.0)]], FREE, 1).unwrap();
        assert_eq!((gap.ci95, gap.smallest_seen), (None, None));
        assert_abs_diff_eq!(gap.test.unwrap().smallest_p, 1.0, epsilon = 1e-12);
        assert!(difference(&[vec![], vec![(1, 3.0)]], FREE, 1).is_none());
    }

    #[test]
    fn shares_stay_in_their_bounds() {
        let gap = difference(&[vec![(0, 0.1), (1, 0.9)], vec![(2, 0.5), (3, 1.0)]], [0.0, 1.0], 1).unwrap();
        let [low, high] = gap.ci95.unwrap();
        assert!(low >= -1.0 && high <= 1.0);
    }

    /// Power of a t test: the difference found is told from 0 in about 80 of 100 draws.
    #[test]
    fn the_smallest_difference_is_seen_in_four_of_five() {
        use rand::RngExt;
        let normal = |rng: &mut rand_chacha::ChaCha8Rng| (0..12).map(|_| rng.random::<f64>()).sum::<f64>() - 6.0;
        // Paired, 6 specimens, differences of standard deviation 1: (t.975 + t.8)/√6 with 5 degrees of freedom.
        let effect = (t_critical(0.95, 5.0) + t_critical(0.6, 5.0)) / 6.0_f64.sqrt();
        let seen = (0..1000).filter(|&i| {
            let mut rng = crate::stats::bootstrap::stream(5, i);
            let d: Vec<f64> = (0..6).map(|_| effect + normal(&mut rng)).collect();
            let gap = Pair { value: mean(&d).unwrap(), within: true, specimens: 6, samples: [d, vec![]] };
            let (se, dof) = gap.spread().unwrap();
            gap.value.abs() > t_critical(0.95, dof) * se
        });
        let count = seen.count();
        assert!((740..=860).contains(&count), "{count} of 1000");
    }
}
