//! From what dose on does growth turn: share turned aside and alignment with the plates against dose, and the dose for half.
//!
//! Half: half of the filaments turned aside, or growth as much along the plates as across. The alignment a enters as the
//! share (1 + a)/2, weighed by filaments. Two curves, logistic and flat-then-rising, are compared by how well they foretell
//! specimens left out; the flat one is taken only when it is better by more than its standard error (the one-standard-error
//! rule, Breiman et al. 1984). The interval is the profile of the deviance, stretched for specimens ([`clustered`]).
//! Limits: runs whose load turned or has no axis have no dose and are left out. Where the doses divide yes from no completely,
//! there is no finite slope: the interval is then the profile with every run as one trial.
//!
//! [`clustered`]: crate::stats::dose::clustered

use std::collections::BTreeSet;

use serde::Serialize;

use super::groups::{Group, Load};
use super::{RunRecord, Specimens};
use crate::stats::arrangements::{Arrangements, Tested, level_centres};
use crate::stats::distributions::t_critical;
use crate::stats::dose::clustered::MIN_CLUSTERS;
use crate::stats::dose::predict::scores;
use crate::stats::dose::rising::fit_rising;
use crate::stats::dose::{DoseFit, Link, NoFit, Trials, fit, profiled, walk_out};
use crate::stats::order::{mean, variance};

/// Confidence of the interval.
pub(super) const CONFIDENCE: f64 = 0.95;
/// The share that is half.
pub(super) const HALF: f64 = 0.5;
/// Points of the fitted curve that is drawn.
const DRAWN: usize = 60;

/// What responds to the dose.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Response {
    /// Share of the filaments turned aside.
    Turned,
    /// Alignment with the plates, as a share.
    AlongPlates,
}

/// The curve that was taken.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Curve {
    /// Logistic.
    Logistic,
    /// Flat up to an onset, then logistic.
    FlatThenRising,
}

/// What can be said of the dose for half.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Answer {
    /// It lies within the doses tested, and its interval has two ends.
    Found,
    /// It lies within the doses tested; its interval has no end on one side or both.
    Open,
    /// It lies outside the doses tested.
    OutsideTested,
    /// The doses divide turned from straight completely: it lies between two of them.
    Separated,
    /// The response does not rise with dose as far as can be told.
    NoResponse,
    /// Too few doses or specimens.
    TooFew,
}

/// One run's part.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Seen {
    /// Dose, MPa.
    pub dose_mpa: f64,
    /// Share.
    pub share: f64,
    /// Filaments.
    pub filaments: f64,
    /// Specimen's number.
    #[serde(skip)]
    pub specimen: usize,
    /// Group's number.
    #[serde(skip)]
    pub group: usize,
}

/// Mean log score a trial of the curves on specimens left out; nearer to 0 is better.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Foretold {
    /// The same share at every dose.
    pub constant: f64,
    /// Logistic.
    pub logistic: f64,
    /// Flat, then rising.
    pub flat_then_rising: f64,
}

/// The response to the dose.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct DoseResponse {
    /// What responds.
    pub response: Response,
    /// What can be said.
    pub answer: Answer,
    /// The dose for half, MPa.
    pub half_mpa: Option<f64>,
    /// Its standard error, specimens allowed for.
    pub se_mpa: Option<f64>,
    /// Its 95 % interval; an end that does not exist is absent.
    pub ci95: [Option<f64>; 2],
    /// The curve taken.
    pub curve: Option<Curve>,
    /// How the curves foretold specimens left out.
    pub foretold: Option<Foretold>,
    /// Test of no response: the covariance of dose and share under all arrangements of the doses.
    pub test: Option<Tested>,
    /// Lowest and highest dose tested, MPa.
    pub tested_mpa: Option<[f64; 2]>,
    /// The runs.
    pub runs: Vec<Seen>,
    /// The curve: dose and share.
    pub line: Vec<[f64; 2]>,
}

/// The dose–response of the runs that have a dose.
#[must_use]
pub fn dose_response(
    response: Response,
    records: &[RunRecord],
    specimens: &Specimens,
    groups: &[Group],
    loads: &[Load],
    seed: u64,
) -> DoseResponse {
    let seen: Vec<Seen> = groups
        .iter()
        .enumerate()
        .flat_map(|(g, group)| group.members.iter().map(move |&i| (g, i)))
        .filter_map(|(group, i)| {
            let (share, filaments) = response.of(&records[i])?;
            Some(Seen { dose_mpa: loads[i].dose_mpa?, share, filaments, specimen: specimens.of(i), group })
        })
        .collect();
    judge(response, seen, seed)
}

impl Response {
    /// Share and number of filaments of a run.
    fn of(self, run: &RunRecord) -> Option<(f64, f64)> {
        match self {
            Self::Turned => {
                let (tried, yes) = run.turned();
                (tried > 0).then(|| (yes as f64 / tried as f64, tried as f64))
            }
            Self::AlongPlates => {
                let grown = run.filaments.iter().filter(|f| !f.pieces.is_empty()).count();
                Some((0.5 * (1.0 + run.along_plates()?), grown as f64))
            }
        }
    }

    /// Least stretch of the limits: counts cannot scatter less than independent trials, weighed shares can.
    pub(super) fn floor(self) -> f64 {
        match self {
            Self::Turned => 1.0,
            Self::AlongPlates => 0.0,
        }
    }
}

pub(super) fn trials(seen: &[Seen]) -> (Vec<Trials>, Vec<u32>) {
    seen.iter()
        .map(|s| (Trials { dose: s.dose_mpa, tried: s.filaments, yes: s.filaments * s.share }, s.specimen as u32))
        .unzip()
}

fn judge(response: Response, seen: Vec<Seen>, seed: u64) -> DoseResponse {
    let doses = || seen.iter().map(|s| s.dose_mpa);
    let tested =
        (!seen.is_empty()).then(|| [doses().fold(f64::INFINITY, f64::min), doses().fold(f64::NEG_INFINITY, f64::max)]);
    let mut out = DoseResponse {
        response,
        answer: Answer::TooFew,
        half_mpa: None,
        se_mpa: None,
        ci95: [None; 2],
        curve: None,
        foretold: None,
        test: trend(&seen, seed),
        tested_mpa: tested,
        line: Vec::new(),
        runs: seen,
    };
    let levels = out.runs.iter().map(|s| s.group).collect::<BTreeSet<_>>().len();
    let specimens = out.runs.iter().map(|s| s.specimen).collect::<BTreeSet<_>>().len();
    let (Some(tested), true) = (tested, levels >= 2 && specimens >= MIN_CLUSTERS) else { return out };
    let (trials, clusters) = trials(&out.runs);
    match fit(&trials, Link::Logit) {
        Ok(line) => fitted(&mut out, &line, &trials, &clusters, tested),
        Err(NoFit::Separated) => separated(&mut out, &trials),
        Err(NoFit::NothingVaries | NoFit::Unsettled) => out.answer = Answer::NoResponse,
    }
    out
}

/// A finite logistic line: which curve, its dose for half, its interval.
fn fitted(out: &mut DoseResponse, line: &DoseFit, trials: &[Trials], clusters: &[u32], tested: [f64; 2]) {
    let floor = out.response.floor();
    let Some(wide) = line.clustered(trials, clusters) else { return };
    if line.slope <= 0.0 || !wide.slope_is_shown(CONFIDENCE, floor) {
        out.answer = Answer::NoResponse;
        out.line = drawn(tested, |x| line.share(x));
        return;
    }
    let (better, foretold) = flat_is_better(trials, clusters);
    out.foretold = foretold;
    let rising = if better { fit_rising(trials, Link::Logit).ok() } else { None };
    let flat = rising.and_then(|rising| Some((rising, rising.dose_for(HALF)?)));
    if let Some((rising, half)) = flat {
        let t = t_critical(CONFIDENCE, f64::from(wide.clusters as u32) - 1.0);
        let stretch = wide.stretch(half, floor);
        out.curve = Some(Curve::FlatThenRising);
        out.ci95 = rising.limits(trials, HALF, t * t * stretch);
        out.se_mpa = Some(rising.line.se_dose(HALF) * libm::sqrt(stretch));
        out.half_mpa = Some(half);
        out.line = drawn(tested, |x| rising.share(x));
    } else {
        out.curve = Some(Curve::Logistic);
        out.ci95 = wide.limits(trials, HALF, CONFIDENCE, floor);
        out.se_mpa = Some(wide.se_dose(HALF).max(libm::sqrt(floor) * line.se_dose(HALF)));
        out.half_mpa = Some(line.dose_for(HALF));
        out.line = drawn(tested, |x| line.share(x));
    }
    out.answer = match (out.half_mpa, out.ci95) {
        (Some(half), _) if half < tested[0] || half > tested[1] => Answer::OutsideTested,
        (Some(_), [Some(_), Some(_)]) => Answer::Found,
        _ => Answer::Open,
    };
}

/// Whether the flat-then-rising curve foretells specimens left out better than the logistic by more than a standard error.
fn flat_is_better(trials: &[Trials], clusters: &[u32]) -> (bool, Option<Foretold>) {
    let all = scores(trials, clusters);
    let column = |of: fn(&crate::stats::dose::predict::Scores) -> f64| all.iter().map(of).collect::<Vec<f64>>();
    let [constant, line, rising] = [column(|s| s.constant), column(|s| s.line), column(|s| s.rising)];
    let (Some(constant), Some(logistic), Some(flat)) = (mean(&constant), mean(&line), mean(&rising)) else {
        return (false, None);
    };
    let gains: Vec<f64> = rising.iter().zip(&line).map(|(r, l)| r - l).collect();
    let se = variance(&gains).map_or(f64::INFINITY, |v| libm::sqrt(v / gains.len() as f64));
    (flat - logistic > se, Some(Foretold { constant, logistic, flat_then_rising: flat }))
}

/// No finite slope: the two doses between which all turned and all straight part, and the profile with a run as one trial.
fn separated(out: &mut DoseResponse, trials: &[Trials]) {
    let straight = trials.iter().filter(|t| t.yes < t.tried).map(|t| t.dose).fold(f64::NEG_INFINITY, f64::max);
    let turned = trials.iter().filter(|t| t.yes > 0.0).map(|t| t.dose).fold(f64::INFINITY, f64::min);
    if straight > turned {
        // All turned lie below all straight.
        out.answer = Answer::NoResponse;
        return;
    }
    let runs: Vec<Trials> = trials.iter().map(|t| Trials { dose: t.dose, tried: 1.0, yes: t.yes / t.tried }).collect();
    let clusters = out.runs.iter().map(|s| s.specimen).collect::<BTreeSet<_>>().len();
    let t = t_critical(CONFIDENCE, clusters as f64 - 1.0);
    let inside = [straight.min(turned), straight.max(turned)];
    let middle = 0.5 * (straight + turned);
    let least = profiled(&runs, Link::Logit, 0.0, middle);
    let span = out.tested_mpa.map_or(1.0, |[low, high]| high - low);
    out.half_mpa = Some(middle);
    out.ci95 = walk_out(inside, span / 200.0, |x| profiled(&runs, Link::Logit, 0.0, x) > least + t * t);
    out.answer = Answer::Separated;
}

/// Test of no response.
fn trend(seen: &[Seen], seed: u64) -> Option<Tested> {
    let specimens: Vec<usize> = seen.iter().map(|s| s.specimen).collect();
    let groups: Vec<usize> = seen.iter().map(|s| s.group).collect();
    let most = groups.iter().max()?;
    // A group's dose is the mean of its runs', so that changing labels changes doses.
    let dose_of: Vec<f64> = (0..=*most)
        .map(|g| mean(&seen.iter().filter(|s| s.group == g).map(|s| s.dose_mpa).collect::<Vec<f64>>()).unwrap_or(0.0))
        .collect();
    let centres = level_centres(&specimens, &groups.iter().map(|g| dose_of[*g]).collect::<Vec<f64>>());
    let level = mean(&seen.iter().map(|s| s.share).collect::<Vec<f64>>())?;
    let statistic = |labels: &[usize]| {
        let parts = labels.iter().zip(&centres).zip(seen).map(|((g, c), s)| (dose_of[*g] - c) * (s.share - level));
        Some(parts.sum::<f64>().abs())
    };
    Arrangements::of(&specimens, &groups).test(seed, statistic)
}

fn drawn([low, high]: [f64; 2], share: impl Fn(f64) -> f64) -> Vec<[f64; 2]> {
    let at = |i: usize| low + (high - low) * i as f64 / DRAWN as f64;
    (0..=DRAWN).map(|i| [at(i), share(at(i))]).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Six specimens at four doses, five filaments a run.
    fn campaign(yes: [[f64; 4]; 6]) -> Vec<Seen> {
        (0..24)
            .map(|i| Seen {
                dose_mpa: 60.0 * (i % 4) as f64,
                share: yes[i / 4][i % 4] / 5.0,
                filaments: 5.0,
                specimen: i / 4,
                group: i % 4,
            })
            .collect()
    }

    #[test]
    fn a_threshold_is_found_with_two_ends() {
        let seen = campaign([
            [0.0, 1.0, 4.0, 5.0],
            [1.0, 0.0, 3.0, 5.0],
            [0.0, 2.0, 5.0, 5.0],
            [0.0, 1.0, 4.0, 4.0],
            [1.0, 2.0, 4.0, 5.0],
            [0.0, 0.0, 3.0, 5.0],
        ]);
        let found = judge(Response::Turned, seen, 1);
        assert_eq!((found.answer, found.curve), (Answer::Found, Some(Curve::Logistic)));
        let [Some(low), Some(high)] = found.ci95 else { panic!("{found:?}") };
        assert!(60.0 < low && low < 90.0 && 90.0 < high && high < 130.0, "{low} {high}");
        assert!(found.test.unwrap().p < 0.001);
        let foretold = found.foretold.unwrap();
        assert!(foretold.logistic > foretold.constant);
    }

    #[test]
    fn separation_gives_a_bracket_and_no_standard_error() {
        let found = judge(Response::Turned, campaign([[0.0, 0.0, 5.0, 5.0]; 6]), 1);
        assert_eq!((found.answer, found.se_mpa), (Answer::Separated, None));
        let [Some(low), Some(high)] = found.ci95 else { panic!("{found:?}") };
        assert!(low <= 60.0 && high >= 120.0 && low > 0.0 && high < 180.0, "{low} {high}");
    }

    #[test]
    fn no_response_is_an_answer() {
        let flat = [[2.0, 3.0, 2.0, 3.0], [1.0, 1.0, 2.0, 0.0], [4.0, 3.0, 4.0, 4.0]];
        let found = judge(Response::Turned, campaign([flat[0], flat[1], flat[2], flat[1], flat[0], flat[2]]), 1);
        assert_eq!((found.answer, found.half_mpa), (Answer::NoResponse, None));
        let falling = judge(Response::Turned, campaign([[5.0, 4.0, 1.0, 0.0]; 6]), 1);
        assert_eq!(falling.answer, Answer::NoResponse);
        let none = judge(Response::Turned, campaign([[0.0; 4]; 6]), 1);
        assert_eq!(none.answer, Answer::NoResponse);
    }

    #[test]
    fn half_beyond_the_doses_is_said() {
        let seen = campaign([
            [0.0, 0.0, 1.0, 2.0],
            [0.0, 1.0, 1.0, 1.0],
            [0.0, 0.0, 1.0, 2.0],
            [0.0, 0.0, 0.0, 2.0],
            [0.0, 1.0, 1.0, 2.0],
            [0.0, 0.0, 1.0, 1.0],
        ]);
        let found = judge(Response::Turned, seen, 1);
        assert_eq!(found.answer, Answer::OutsideTested);
        assert!(found.half_mpa.unwrap() > 180.0);
    }

    #[test]
    fn two_specimens_are_too_few() {
        let mut seen = campaign([[0.0, 1.0, 4.0, 5.0]; 6]);
        seen.retain(|s| s.specimen < 2);
        assert_eq!(judge(Response::Turned, seen, 1).answer, Answer::TooFew);
        assert_eq!(judge(Response::Turned, Vec::new(), 1).answer, Answer::TooFew);
    }
}
