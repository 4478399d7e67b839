//! All the ways in which labels could have fallen on units that are nested in specimens: the exact test of no effect.
//!
//! Method: permutation tests (Fisher 1935, The Design of Experiments; Pitman 1937). Labels change places within a specimen
//! that saw several of them; specimens that saw one label change places whole. Under no effect every arrangement was as
//! likely, whatever the specimens' own levels. All are gone through when they are at most [`ALL`], else [`DRAWN`] are drawn
//! and the one seen is counted in (p = (1 + hits)/(1 + draws), Davison & Hinkley 1997, section 4.3).
//! Limit: with few specimens the smallest p that can come out is large; it is given beside p.

use std::collections::{BTreeMap, BTreeSet};

use rand::seq::SliceRandom;
use rayon::prelude::*;
use serde::Serialize;

use super::bootstrap::stream;

/// Most arrangements that are all gone through.
pub const ALL: u64 = 20_000;
/// Arrangements drawn where there are more.
pub const DRAWN: u64 = 19_999;
/// Statistics this near, as a share of the largest, are equal: sums in another order differ by rounding.
const EQUAL: f64 = 1e-9;

/// Where labels change places: each target (one unit, or all units of a specimen) takes one label.
#[derive(Debug, Clone, PartialEq, Eq)]
struct Block {
    targets: Vec<Vec<usize>>,
    labels: Vec<usize>,
}

/// The arrangements of a set of labels over nested units.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Arrangements {
    observed: Vec<usize>,
    blocks: Vec<Block>,
}

/// What a permutation test found.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Tested {
    /// Share of the arrangements whose statistic is at least as far out as the one seen.
    pub p: f64,
    /// The smallest p that these units could have given: the share of the furthest arrangement.
    pub smallest_p: f64,
    /// Arrangements gone through, or drawn with the one seen.
    pub arrangements: u64,
    /// Whether these were all.
    pub all: bool,
}

impl Arrangements {
    /// The arrangements of `labels` over units of `specimens` (as long as each other).
    ///
    /// ```
    /// use veerlog::stats::arrangements::Arrangements;
    /// // Three specimens that saw both loads: each may change them about.
    /// let crossed = Arrangements::of(&[0, 0, 1, 1, 2, 2], &[0, 1, 0, 1, 0, 1]);
    /// assert_eq!(crossed.count(), Some(8));
    /// // Two specimens of each load: the specimens change places.
    /// let nested = Arrangements::of(&[0, 0, 1, 2, 3], &[0, 0, 0, 1, 1]);
    /// assert_eq!(nested.count(), Some(6));
    /// ```
    #[must_use]
    pub fn of(specimens: &[usize], labels: &[usize]) -> Self {
        let mut by_specimen: BTreeMap<usize, Vec<usize>> = BTreeMap::new();
        for (unit, specimen) in specimens.iter().enumerate() {
            by_specimen.entry(*specimen).or_default().push(unit);
        }
        let mut blocks = Vec::new();
        let mut whole = Block { targets: Vec::new(), labels: Vec::new() };
        for units in by_specimen.into_values() {
            let own: Vec<usize> = units.iter().map(|&u| labels[u]).collect();
            if own.windows(2).all(|pair| pair[0] == pair[1]) {
                whole.labels.push(own[0]);
                whole.targets.push(units);
            } else {
                blocks.push(Block { targets: units.into_iter().map(|u| vec![u]).collect(), labels: own });
            }
        }
        blocks.push(whole);
        blocks.retain(|block| block.labels.iter().collect::<BTreeSet<_>>().len() > 1);
        for block in &mut blocks {
            block.labels.sort_unstable();
        }
        Self { observed: labels.to_vec(), blocks }
    }

    /// How many there are, the one seen among them; `None` beyond 2⁶³.
    #[must_use]
    pub fn count(&self) -> Option<u64> {
        let mut all: u64 = 1;
        for block in &self.blocks {
            // Multinomial coefficient, one label more at a time: times the labels placed, over those of its kind; always whole.
            let (mut placed, mut run) = (0_u64, 0_u64);
            for (i, label) in block.labels.iter().enumerate() {
                run = if i > 0 && block.labels[i - 1] == *label { run + 1 } else { 1 };
                placed += 1;
                let product = u128::from(all) * u128::from(placed) / u128::from(run);
                all = u64::try_from(product).ok().filter(|n| *n < 1 << 63)?;
            }
        }
        Some(all)
    }

    /// Tests `statistic`, larger = further from no effect, on arranged labels. It must not depend on anything but the labels
    /// and data that stay where they are. `None` where the labels seen give none, or nothing can change places.
    pub fn test(&self, seed: u64, statistic: impl Fn(&[usize]) -> Option<f64> + Sync) -> Option<Tested> {
        let seen = statistic(&self.observed)?;
        if self.blocks.is_empty() {
            return None;
        }
        let (values, all) = match self.count().filter(|n| *n <= ALL) {
            Some(n) => (self.every(n, &statistic), true),
            None => (self.drawn(seed, &statistic), false),
        };
        let furthest = values.iter().copied().fold(seen, f64::max);
        let slack = EQUAL * furthest.abs();
        let reaching = |level: f64| values.iter().filter(|v| **v >= level - slack).count() as f64;
        let n = values.len() as f64;
        Some(if all {
            Tested { p: reaching(seen) / n, smallest_p: reaching(furthest) / n, arrangements: values.len() as u64, all }
        } else {
            let total = n + 1.0;
            Tested { p: (1.0 + reaching(seen)) / total, smallest_p: 1.0 / total, arrangements: DRAWN + 1, all }
        })
    }

    fn every(&self, count: u64, statistic: &(impl Fn(&[usize]) -> Option<f64> + Sync)) -> Vec<f64> {
        let mut blocks = self.blocks.clone();
        let mut labels = self.observed.clone();
        blocks.iter().for_each(|block| block.write(&mut labels));
        let mut values = Vec::with_capacity(count as usize);
        loop {
            values.push(statistic(&labels).unwrap_or(f64::NEG_INFINITY));
            // Like an odometer: the first block that has a next arrangement takes it, those before it start again.
            let Some(turned) = blocks.iter_mut().position(|block| next_arrangement(&mut block.labels)) else {
                return values;
            };
            blocks[..=turned].iter().for_each(|block| block.write(&mut labels));
        }
    }

    fn drawn(&self, seed: u64, statistic: &(impl Fn(&[usize]) -> Option<f64> + Sync)) -> Vec<f64> {
        let longest = self.blocks.iter().map(|block| block.labels.len()).max().unwrap_or(0);
        (0..DRAWN)
            .into_par_iter()
            .map_init(
                || (self.observed.clone(), Vec::with_capacity(longest)),
                |(labels, mixed), i| {
                    let mut rng = stream(seed, i);
                    for block in &self.blocks {
                        mixed.clone_from(&block.labels);
                        mixed.shuffle(&mut rng);
                        block.place(mixed, labels);
                    }
                    statistic(labels).unwrap_or(f64::NEG_INFINITY)
                },
            )
            .collect()
    }
}

impl Block {
    /// Writes its own labels onto its targets.
    fn write(&self, labels: &mut [usize]) {
        self.place(&self.labels, labels);
    }

    /// Writes a label a target.
    fn place(&self, own: &[usize], labels: &mut [usize]) {
        for (target, label) in self.targets.iter().zip(own) {
            for unit in target {
                labels[*unit] = *label;
            }
        }
    }
}

/// The next arrangement in lexicographic order; after the last, the first again and `false`. (Narayana's method, in Knuth,
/// The Art of Computer Programming, 7.2.1.2.)
fn next_arrangement(labels: &mut [usize]) -> bool {
    let Some(i) = (1..labels.len()).rev().find(|&i| labels[i - 1] < labels[i]) else {
        labels.reverse();
        return false;
    };
    if let Some(j) = (i..labels.len()).rev().find(|&j| labels[j] > labels[i - 1]) {
        labels.swap(i - 1, j);
    }
    labels[i..].reverse();
    true
}

/// What each unit's level is on average over all arrangements: the mean level of its specimen where that saw several, else the
/// mean over the specimens that saw one. A covariance with levels less these is 0 on average without an effect.
#[must_use]
pub fn level_centres(specimens: &[usize], levels: &[f64]) -> Vec<f64> {
    let mut own: BTreeMap<usize, Vec<f64>> = BTreeMap::new();
    for (specimen, level) in specimens.iter().zip(levels) {
        own.entry(*specimen).or_default().push(*level);
    }
    let one = |all: &[f64]| all.windows(2).all(|pair| pair[0].total_cmp(&pair[1]).is_eq());
    let mean = |all: &[f64]| all.iter().sum::<f64>() / all.len() as f64;
    let single: Vec<f64> = own.values().filter(|all| one(all)).map(|all| all[0]).collect();
    let centre = |all: &Vec<f64>| if one(all) { mean(&single) } else { mean(all) };
    specimens.iter().map(|specimen| own.get(specimen).map_or(0.0, centre)).collect()
}

/// Holm's step-down adjustment (Holm 1979, Scand. J. Stat. 6, 65–70) of p-values in any order.
///
/// ```
/// let adjusted = veerlog::stats::arrangements::holm(&[0.01, 0.04, 0.03]);
/// assert!((adjusted[0] - 0.03).abs() < 1e-12 && (adjusted[1] - 0.06).abs() < 1e-12);
/// ```
#[must_use]
pub fn holm(p: &[f64]) -> Vec<f64> {
    let mut order: Vec<usize> = (0..p.len()).collect();
    order.sort_by(|a, b| p[*a].total_cmp(&p[*b]));
    let (mut adjusted, mut least) = (vec![1.0; p.len()], 0.0_f64);
    for (rank, &i) in order.iter().enumerate() {
        least = least.max((p.len() - rank) as f64 * p[i]).min(1.0);
        adjusted[i] = least;
    }
    adjusted
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    fn difference(y: &[f64], labels: &[usize]) -> Option<f64> {
        let mean = |g: usize| {
            let own: Vec<f64> = y.iter().zip(labels).filter(|(_, l)| **l == g).map(|(v, _)| *v).collect();
            (!own.is_empty()).then(|| own.iter().sum::<f64>() / own.len() as f64)
        };
        Some((mean(1)? - mean(0)?).abs())
    }

    #[test]
    fn all_of_two_by_three_are_gone_through() {
        // Six specimens, three each: 20 arrangements, the one seen and its mirror are the furthest.
        let y = [1.0, 2.0, 3.0, 7.0, 8.0, 9.0];
        let found = Arrangements::of(&[0, 1, 2, 3, 4, 5], &[0, 0, 0, 1, 1, 1]).test(1, |l| difference(&y, l)).unwrap();
        assert_eq!((found.arrangements, found.all), (20, true));
        assert_abs_diff_eq!(found.p, 0.1, epsilon = 1e-12);
        assert_abs_diff_eq!(found.smallest_p, 0.1, epsilon = 1e-12);
    }

    #[test]
    fn counts_are_multinomial() {
        assert_eq!(Arrangements::of(&[0; 8], &[0, 0, 1, 1, 2, 2, 3, 3]).count(), Some(2520));
        assert_eq!(Arrangements::of(&[0; 4], &[1; 4]).count(), Some(1));
        let many: Vec<usize> = (0..200).map(|i| i % 2).collect();
        assert_eq!(Arrangements::of(&[0; 200], &many).count(), None);
        let mixed = Arrangements::of(&[0, 0, 1, 2, 3, 3], &[0, 1, 0, 1, 2, 0]);
        assert_eq!(mixed.count(), Some(2 * 2 * 2));
    }

    #[test]
    fn labels_stay_within_their_specimen() {
        let specimens = [0, 0, 0, 1, 1, 2, 2, 3, 4];
        let labels = [0, 1, 1, 0, 1, 0, 0, 1, 0];
        let found = Arrangements::of(&specimens, &labels).test(1, |l| {
            assert_eq!((l[0] + l[1] + l[2], l[3] + l[4]), (2, 1));
            assert_eq!(l[5], l[6], "a specimen of one label moves whole");
            assert_eq!(l[5] + l[7] + l[8], 1);
            Some(0.0)
        });
        assert_eq!(found.unwrap().arrangements, 3 * 2 * 3);
    }

    #[test]
    fn nothing_to_change_is_no_test() {
        assert_eq!(Arrangements::of(&[0, 1], &[0, 0]).test(1, |_| Some(1.0)), None);
        assert_eq!(Arrangements::of(&[], &[]).test(1, |_| Some(1.0)), None);
    }

    #[test]
    fn drawing_agrees_with_going_through_all_and_with_itself() {
        let specimens: Vec<usize> = (0..24).map(|i| i / 2).collect();
        let labels: Vec<usize> = (0..24).map(|i| i % 2).collect();
        let y: Vec<f64> = (0..24_u32).map(|i| f64::from((i * 37) % 24) + 4.0 * f64::from(i % 2)).collect();
        let arrangements = Arrangements::of(&specimens, &labels);
        assert_eq!(arrangements.count(), Some(4096));
        let exact = arrangements.test(3, |l| difference(&y, l)).unwrap();
        let drawn = arrangements.drawn(3, &|l: &[usize]| difference(&y, l));
        assert_eq!(drawn, arrangements.drawn(3, &|l: &[usize]| difference(&y, l)));
        let seen = difference(&y, &labels).unwrap();
        let share = drawn.iter().filter(|v| **v >= seen - 1e-9).count() as f64 / drawn.len() as f64;
        assert_abs_diff_eq!(share, exact.p, epsilon = 0.015);
    }
}
