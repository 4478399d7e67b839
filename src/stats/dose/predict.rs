//! Which curve foretells specimens it has not seen: the logarithmic score (Good 1952, J. R. Stat. Soc. B 14, 107–114) of each
//! specimen under the curves fitted to the others.
//!
//! A fit here has one trial more at the lowest and one at the highest dose, half of each a yes, so that it stays finite where
//! the others are completely separated. Limit: scores of few specimens are near each other; see their standard error.

use super::rising::fit_rising;
use super::{Link, SHARE_FLOOR, Trials, fit};

/// Most parts into which clusters are put: with more clusters, several are left out at once.
const PARTS: usize = 12;

/// Log score a trial of the clusters left out under each curve, 0 at best.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Scores {
    /// The share is the same at every dose.
    pub constant: f64,
    /// [`fit`].
    pub line: f64,
    /// [`fit_rising`].
    pub rising: f64,
}

/// Scores of every cluster (of every twelfth part of them, where there are more) left out in turn; those whose others have
/// no fit are left out.
#[must_use]
pub fn scores(trials: &[Trials], clusters: &[u32]) -> Vec<Scores> {
    let mut names: Vec<u32> = clusters.to_vec();
    names.sort_unstable();
    names.dedup();
    let part_of = |cluster: u32| names.partition_point(|name| *name < cluster) % PARTS;
    let split = |part: usize| -> (Vec<Trials>, Vec<Trials>) {
        let (own, others): (Vec<_>, Vec<_>) = trials.iter().zip(clusters).partition(|(_, c)| part_of(**c) == part);
        let plain = |list: Vec<(&Trials, &u32)>| list.into_iter().map(|(t, _)| *t).collect();
        (plain(own), plain(others))
    };
    let parts = (0..names.len().min(PARTS)).map(split);
    parts.filter_map(|(own, others)| left_out(&own, others, trials)).collect()
}

fn left_out(own: &[Trials], mut others: Vec<Trials>, all: &[Trials]) -> Option<Scores> {
    let doses = || all.iter().map(|t| t.dose);
    for end in [doses().fold(f64::INFINITY, f64::min), doses().fold(f64::NEG_INFINITY, f64::max)] {
        others.push(Trials { dose: end, tried: 1.0, yes: 0.5 });
    }
    let share = others.iter().map(|t| t.yes).sum::<f64>() / others.iter().map(|t| t.tried).sum::<f64>();
    let line = fit(&others, Link::Logit).ok()?;
    let rising = fit_rising(&others, Link::Logit).ok()?;
    Some(Scores {
        constant: score(own, |_| share),
        line: score(own, |x| line.share(x)),
        rising: score(own, |x| rising.share(x)),
    })
}

/// Mean logarithm of the share given to what was seen.
fn score(own: &[Trials], share: impl Fn(f64) -> f64) -> f64 {
    let tried: f64 = own.iter().map(|t| t.tried).sum();
    let sum: f64 = own
        .iter()
        .map(|t| {
            let p = share(t.dose).clamp(SHARE_FLOOR, 1.0 - SHARE_FLOOR);
            t.yes * libm::log(p) + (t.tried - t.yes) * libm::log1p(-p)
        })
        .sum();
    sum / tried
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_response_foretells_better_than_none() {
        let trials: Vec<Trials> = (0..24)
            .map(|i| Trials { dose: 60.0 * f64::from(i % 4), tried: 5.0, yes: [0.0, 1.0, 4.0, 5.0][(i % 4) as usize] })
            .collect();
        let clusters: Vec<u32> = (0..24).map(|i| i / 4).collect();
        let all = scores(&trials, &clusters);
        assert_eq!(all.len(), 6);
        assert!(all.iter().all(|s| s.line > s.constant + 0.2 && s.line < 0.0), "{all:?}");
    }

    #[test]
    fn nothing_to_foretell_from_nothing() {
        assert!(scores(&[], &[]).is_empty());
    }
}
