//! What would make the threshold surer: the dose and the number of further specimens, by simulation from what was fitted.
//!
//! A further specimen has a threshold drawn about the fitted one with the specimens' scatter, one run at the dose proposed and
//! as many filaments as runs had on average; the runs there are stay as they are. The width is that of the plain limits, median
//! over [`DRAWS`] draws. Limit: it takes the fitted curve for the truth. No dose above the highest tested is ever proposed:
//! loading brittle cells can break them.

use rand::RngExt;
use rand_distr::{Distribution, StandardNormal};
use rayon::prelude::*;
use serde::Serialize;

use super::threshold::{Answer, CONFIDENCE, DoseResponse, HALF, trials};
use crate::stats::bootstrap::stream;
use crate::stats::dose::{DoseFit, Link, Trials, fit};
use crate::stats::order::{mean, median};

/// Simulated campaigns a proposal.
pub const DRAWS: u64 = 40;
/// Numbers of further specimens.
const MORE: [u32; 3] = [2, 4, 8];
/// Doses tried, evenly from no load (from the lowest tested, where that is above) to the highest tested.
const DOSES: u32 = 7;

/// A proposal and what it would give.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Proposal {
    /// Dose, MPa.
    pub dose_mpa: f64,
    /// Further specimens, a run each.
    pub specimens: u32,
    /// Half the width of the threshold's interval then, MPa; absent where more than half of the draws had no end.
    pub half_width_mpa: Option<f64>,
}

/// What next.
#[derive(Debug, Clone, Default, PartialEq, Serialize)]
pub struct Next {
    /// Half the width of the same plain limits with the runs there are; absent where they have no end.
    pub now_mpa: Option<f64>,
    /// The best dose for each number of further specimens.
    pub best: Vec<Proposal>,
    /// All that were tried.
    pub tried: Vec<Proposal>,
    /// The highest dose tested, MPa: nothing above is proposed.
    pub highest_mpa: Option<f64>,
}

/// Proposals from a dose–response; empty where there is no threshold to narrow.
#[must_use]
pub fn next(response: &DoseResponse, seed: u64) -> Next {
    let highest_mpa = response.tested_mpa.map(|[_, high]| high);
    let known = matches!(response.answer, Answer::Found | Answer::Open | Answer::Separated);
    let none = Next { highest_mpa, ..Next::default() };
    let (Some([low, high]), true) = (response.tested_mpa, known) else { return none };
    let (now, clusters) = trials(&response.runs);
    let Some(world) = World::of(now, clusters, [low, high], response.response.floor()) else { return none };
    // Doses below 0 drive growth across: where some lie above, only those are proposed.
    let from = if high > 0.0 { low.max(0.0) } else { low };
    let dose = |i: u32| from + (high - from) * f64::from(i) / f64::from(DOSES - 1);
    let plans: Vec<(f64, u32)> = MORE.iter().flat_map(|&m| (0..DOSES).map(move |i| (dose(i), m))).collect();
    let tried: Vec<Proposal> = plans
        .par_iter()
        .map(|&(dose_mpa, specimens)| {
            let half_width_mpa = Some(world.expected(dose_mpa, specimens, seed)).filter(|w| w.is_finite());
            Proposal { dose_mpa, specimens, half_width_mpa }
        })
        .collect();
    let width = |p: &Proposal| p.half_width_mpa.unwrap_or(f64::INFINITY);
    let best = MORE.iter().filter_map(|m| {
        let own = tried.iter().filter(|p| p.specimens == *m && p.half_width_mpa.is_some());
        own.min_by(|a, b| width(a).total_cmp(&width(b))).copied()
    });
    Next {
        now_mpa: Some(world.half_width(&[], &[])).filter(|w| w.is_finite()),
        best: best.collect(),
        tried,
        highest_mpa,
    }
}

/// What is simulated from.
struct World {
    trials: Vec<Trials>,
    clusters: Vec<u32>,
    line: DoseFit,
    /// Scatter of the specimens' thresholds, MPa.
    scatter: f64,
    filaments: u32,
    floor: f64,
    ends: [f64; 2],
}

impl World {
    fn of(trials: Vec<Trials>, clusters: Vec<u32>, ends: [f64; 2], floor: f64) -> Option<Self> {
        let filaments = mean(&trials.iter().map(|t| t.tried).collect::<Vec<f64>>())?.round().max(1.0) as u32;
        let line = fit(&steadied(&trials, ends), Link::Logit).ok().filter(|line| line.slope > 0.0)?;
        let own = line.se_dose(HALF);
        let scatter = line.clustered(&trials, &clusters).map_or(0.0, |wide| {
            let excess = wide.se_dose(HALF) * wide.se_dose(HALF) - own * own;
            libm::sqrt(excess.max(0.0) * wide.clusters as f64)
        });
        Some(Self { trials, clusters, line, scatter, filaments, floor, ends })
    }

    /// Median half-width with so many further specimens at a dose.
    fn expected(&self, dose: f64, specimens: u32, seed: u64) -> f64 {
        let first = self.clusters.iter().max().map_or(0, |c| c + 1);
        let names: Vec<u32> = (first..first + specimens).collect();
        let widths: Vec<f64> = (0..DRAWS)
            .map(|draw| {
                let mut rng = stream(seed, draw);
                let more: Vec<Trials> = names.iter().map(|_| self.run(dose, &mut rng)).collect();
                self.half_width(&more, &names)
            })
            .collect();
        median(&widths).unwrap_or(f64::INFINITY)
    }

    fn run(&self, dose: f64, rng: &mut rand_chacha::ChaCha8Rng) -> Trials {
        let shift: f64 = StandardNormal.sample(rng);
        let share = self.line.share(dose - self.scatter * shift);
        let yes = (0..self.filaments).filter(|_| rng.random::<f64>() < share).count() as f64;
        Trials { dose, tried: f64::from(self.filaments), yes }
    }

    fn half_width(&self, more: &[Trials], names: &[u32]) -> f64 {
        let trials: Vec<Trials> = self.trials.iter().chain(more).copied().collect();
        let clusters: Vec<u32> = self.clusters.iter().chain(names).copied().collect();
        let line = fit(&steadied(&trials, self.ends), Link::Logit);
        let wide = line.ok().and_then(|line| line.clustered(&trials, &clusters));
        wide.map_or(f64::INFINITY, |wide| wide.plain_half_width(HALF, CONFIDENCE, self.floor))
    }
}

/// With one more trial at either end of the doses, half a yes, so that separated runs have a finite line.
fn steadied(trials: &[Trials], ends: [f64; 2]) -> Vec<Trials> {
    let more = ends.map(|dose| Trials { dose, tried: 1.0, yes: 0.5 });
    trials.iter().copied().chain(more).collect()
}

#[cfg(test)]
mod tests {
    use super::super::threshold::{Response, Seen};
    use super::*;

    fn response(answer: Answer) -> DoseResponse {
        let yes = [[0.0, 1.0, 4.0, 5.0], [1.0, 0.0, 3.0, 5.0], [0.0, 2.0, 5.0, 5.0], [0.0, 1.0, 4.0, 4.0]];
        let runs = (0..16)
            .map(|i| Seen {
                dose_mpa: 60.0 * (i % 4) as f64,
                share: yes[i / 4][i % 4] / 5.0,
                filaments: 5.0,
                specimen: i / 4,
                group: i % 4,
            })
            .collect();
        DoseResponse {
            response: Response::Turned,
            answer,
            half_mpa: Some(90.0),
            se_mpa: None,
            ci95: [None; 2],
            curve: None,
            foretold: None,
            test: None,
            tested_mpa: Some([0.0, 180.0]),
            runs,
            line: Vec::new(),
        }
    }

    #[test]
    fn more_specimens_near_the_threshold_narrow_it_and_nothing_is_above_the_highest_dose() {
        let next = next(&response(Answer::Found), 4);
        assert!(next.tried.iter().all(|p| (0.0..=180.0).contains(&p.dose_mpa)));
        assert_eq!(next.best.len(), 3);
        let widths: Vec<f64> = next.best.iter().filter_map(|p| p.half_width_mpa).collect();
        assert!(next.now_mpa.unwrap() > widths[0] && widths[0] > widths[2], "{next:?}");
        assert!(next.best.iter().all(|p| (45.0..=135.0).contains(&p.dose_mpa)), "{:?}", next.best);
    }

    #[test]
    fn nothing_is_proposed_without_a_threshold() {
        for answer in [Answer::NoResponse, Answer::TooFew, Answer::OutsideTested] {
            let next = next(&response(answer), 4);
            assert!(next.tried.is_empty() && next.best.is_empty());
            assert_eq!(next.highest_mpa, Some(180.0));
        }
    }
}
