//! Time to short: curves, tests and hazard of groups; runs that were stopped are followed to their last look, a broken
//! specimen is an end of another kind. On a clock of seconds, or of charge passed.
//!
//! Kaplan–Meier with log-log Greenwood intervals where every run of a group is another specimen; else the jackknife over
//! specimens on the same scale (Lipsitz, Dear & Zhao 1994, Biometrics 50, 842–846). Log-rank stratified by specimen where
//! strata hold two groups; its p is by arrangement of the labels over log-rank scores (Peto & Peto 1972, J. R. Stat. Soc. A
//! 135, 185–207), exact with few specimens. Hazard ratio by Cox with Efron's ties, robust to specimens from [`MANY`] on; with
//! fewer its p is by arrangement. Limit: being stopped must have nothing to do with how near the short was.

use std::collections::BTreeSet;

use serde::Serialize;

use super::effects::{Gap, Unit, difference};
use super::groups::{Contrast, Group};
use super::{RunRecord, Specimens};
use crate::run::manifest::Ended;
use crate::stats::arrangements::{Arrangements, Tested, level_centres};
use crate::stats::bootstrap::jackknife_se;
use crate::stats::distributions::{normal_quantile, t_critical, t_two_sided};
use crate::stats::survival::Follow;
use crate::stats::survival::cox::{Exposed, Ties, cox};
use crate::stats::survival::incidence::{Ended as End, incidence};
use crate::stats::survival::kaplan_meier::Curve;
use crate::stats::survival::logrank::{LogRank, Member, Weight, logrank};

/// Specimens from which on the robust variance of the hazard ratio is trusted (common practice).
pub const MANY: usize = 10;
/// Dose for which the hazard ratio is given, MPa.
pub const STEP_MPA: f64 = 50.0;
/// Confidence of the intervals.
const CONFIDENCE: f64 = 0.95;
/// A share within rounding of one half is one half.
const HALF: f64 = 0.5 + 1e-12;

/// The clock on which runs are followed.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum Clock {
    /// Seconds since the first frame.
    Time,
    /// Charge passed, mAh/cm².
    Charge,
}

impl Clock {
    fn of(self, run: &RunRecord) -> Option<f64> {
        match self {
            Self::Time => Some(run.followed_s),
            Self::Charge => run.charge_mah_per_cm2.filter(|c| *c > 0.0),
        }
    }

    /// Its unit.
    #[must_use]
    pub fn unit(self) -> &'static str {
        match self {
            Self::Time => "s",
            Self::Charge => "mAh/cm²",
        }
    }
}

/// A curve just after one time.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Point {
    /// The time, on the clock.
    pub at: f64,
    /// Runs followed until just before it.
    pub at_risk: usize,
    /// Shorts at it.
    pub shorts: usize,
    /// Share without a short from here on.
    pub without: f64,
    /// Its 95 % interval.
    pub ci95: Option<[f64; 2]>,
}

/// Shares that have ended, just after one time.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Shares {
    /// The time, on the clock.
    pub at: f64,
    /// Shorted.
    pub short: f64,
    /// Broken without a short.
    pub broke: f64,
}

/// How the runs of a group ended.
#[derive(Debug, Clone, Default, PartialEq, Serialize)]
pub struct GroupEnds {
    /// Runs followed.
    pub runs: usize,
    /// Of these, by end.
    pub short: usize,
    /// Stopped.
    pub stopped: usize,
    /// Broken.
    pub broke: usize,
    /// For a reason not known.
    pub unknown: usize,
    /// Kaplan–Meier, a point a short; broken specimens count as no longer followed.
    pub curve: Vec<Point>,
    /// Cumulative incidence with breaking as the other end; empty where none broke.
    pub incidence: Vec<Shares>,
    /// When half had shorted.
    pub median: Option<f64>,
    /// Ends of its 95 % interval.
    pub median_ci95: [Option<f64>; 2],
    /// Mean time without a short up to `until`.
    pub restricted_mean: Option<f64>,
    /// Times at which runs ended without a short.
    pub censored: Vec<f64>,
    /// Times at which runs ended, of any kind.
    #[serde(skip)]
    pub ends: Vec<f64>,
}

/// The log-rank test over groups.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Ranks {
    /// Chi-squared statistic.
    pub chi_squared: f64,
    /// Its degrees of freedom.
    pub dof: usize,
    /// p by the chi-squared law, which needs some shorts in each group.
    pub p_chi_squared: f64,
    /// Whether it is stratified by specimen.
    pub stratified: bool,
}

/// The hazard of a short against dose.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Hazard {
    /// Ratio for [`STEP_MPA`] more of dose.
    pub ratio: f64,
    /// 95 % interval robust to specimens; absent under [`MANY`].
    pub ci95: Option<[f64; 2]>,
    /// p: robust, or by arrangement under [`MANY`].
    pub p: Option<f64>,
    /// Specimens.
    pub specimens: usize,
    /// Shorts.
    pub shorts: usize,
}

/// All about the time to short on one clock.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Endings {
    /// The clock.
    pub clock: Clock,
    /// A row a group, in the order of the groups.
    pub groups: Vec<GroupEnds>,
    /// Up to where the restricted means go: the last time to which both groups of the contrast were followed.
    pub until: Option<f64>,
    /// Difference of restricted means in the primary contrast.
    pub difference: Option<Gap>,
    /// Log-rank over the primary contrast.
    pub ranks: Option<Ranks>,
    /// Log-rank over all groups with a run.
    pub ranks_of_all: Option<Ranks>,
    /// Hazard against dose.
    pub hazard: Option<Hazard>,
    /// Why there is none.
    pub no_hazard: Option<&'static str>,
}

/// One run on the clock.
#[derive(Debug, Clone, Copy)]
struct Followed {
    specimen: usize,
    follow: Follow,
    ended: Ended,
}

/// Curves, tests and hazard on a clock; `None` where no run has it.
#[must_use]
pub fn endings(
    records: &[RunRecord],
    specimens: &Specimens,
    groups: &[Group],
    contrast: Option<Contrast>,
    clock: Clock,
    seed: u64,
) -> Option<Endings> {
    let one = |i: usize| {
        let (run, time) = (&records[i], clock.of(&records[i])?);
        let follow = Follow { time, event: run.ended == Ended::Short };
        Some(Followed { specimen: specimens.of(i), follow, ended: run.ended })
    };
    let sets: Vec<Vec<Followed>> = groups.iter().map(|g| g.members.iter().filter_map(|&i| one(i)).collect()).collect();
    if sets.iter().all(Vec::is_empty) {
        return None;
    }
    let until = contrast.and_then(|c| known_until([&sets[c.control], &sets[c.treated]]));
    let (hazard, no_hazard) = match hazard(groups, &sets, seed) {
        Ok(hazard) => (Some(hazard), None),
        Err(why) => (None, Some(why)),
    };
    Some(Endings {
        clock,
        groups: sets.iter().map(|set| group_ends(set, until)).collect(),
        until,
        difference: contrast.and_then(|c| contrasted(&sets[c.control], &sets[c.treated], until?, seed)),
        ranks: contrast.and_then(|c| ranks(&[&sets[c.control], &sets[c.treated]])),
        ranks_of_all: ranks(&sets.iter().filter(|s| !s.is_empty()).map(Vec::as_slice).collect::<Vec<_>>()),
        hazard,
        no_hazard,
    })
}

/// The last time at which both curves are known: a curve whose last run shorted stays at 0 for ever.
fn known_until(sets: [&[Followed]; 2]) -> Option<f64> {
    let longest = |set: &[Followed]| set.iter().map(|f| f.follow.time).fold(0.0, f64::max);
    let known = |set: &[Followed]| {
        let last = longest(set);
        let gone = set.iter().all(|f| f.follow.time < last || f.follow.event);
        if gone && !set.is_empty() { f64::INFINITY } else { last }
    };
    let [a, b] = sets.map(known);
    let until = if a.min(b).is_finite() { a.min(b) } else { longest(sets[0]).max(longest(sets[1])) };
    Some(until).filter(|u| *u > 0.0)
}

fn follows(set: &[Followed]) -> Vec<Follow> {
    set.iter().map(|f| f.follow).collect()
}

fn specimens_of(set: &[Followed]) -> BTreeSet<usize> {
    set.iter().map(|f| f.specimen).collect()
}

fn without(set: &[Followed], specimen: usize) -> Vec<Followed> {
    set.iter().copied().filter(|f| f.specimen != specimen).collect()
}

fn group_ends(set: &[Followed], until: Option<f64>) -> GroupEnds {
    let count = |ended: Ended| set.iter().filter(|f| f.ended == ended).count();
    let curve = Curve::of(&follows(set));
    let apart = specimens_of(set).len() == set.len();
    let left_out = if apart { Vec::new() } else { left_out(set) };
    let points: Vec<Point> = curve
        .steps
        .iter()
        .map(|s| Point {
            at: s.time,
            at_risk: s.at_risk,
            shorts: s.events,
            without: s.survival,
            ci95: if apart { s.interval(CONFIDENCE) } else { jackknifed(&left_out, s.time, s.survival) },
        })
        .collect();
    // The lower limit reaches half at the latest when the curve is 0; the upper one has to be known there.
    let reaches = |p: &Point, end: usize| match p.ci95 {
        Some(ci) => ci[end] <= HALF,
        None => end == 0 && p.without <= HALF,
    };
    let limit =
        |end: usize| points.iter().find(|p| reaches(p, end)).map(|p| p.at).filter(|_| specimens_of(set).len() > 1);
    let mut ends: Vec<f64> = set.iter().map(|f| f.follow.time).collect();
    ends.sort_by(f64::total_cmp);
    let mut censored: Vec<f64> = set.iter().filter(|f| !f.follow.event).map(|f| f.follow.time).collect();
    censored.sort_by(f64::total_cmp);
    GroupEnds {
        runs: set.len(),
        short: count(Ended::Short),
        stopped: count(Ended::Stopped),
        broke: count(Ended::Broke),
        unknown: count(Ended::Unknown),
        incidence: if count(Ended::Broke) > 0 { shares(set) } else { Vec::new() },
        median: curve.median(),
        median_ci95: [limit(0), limit(1)],
        restricted_mean: until.filter(|_| !set.is_empty()).map(|u| curve.restricted_mean(u)),
        curve: points,
        censored,
        ends,
    }
}

fn shares(set: &[Followed]) -> Vec<Shares> {
    let cause = |f: &Followed| match f.ended {
        Ended::Short => Some(0),
        Ended::Broke => Some(1),
        Ended::Stopped | Ended::Unknown => None,
    };
    let units: Vec<End> = set.iter().map(|f| End { time: f.follow.time, cause: cause(f) }).collect();
    incidence(&units, 2).into_iter().map(|i| Shares { at: i.time, short: i.ended[0], broke: i.ended[1] }).collect()
}

/// The curve without each specimen in turn.
fn left_out(set: &[Followed]) -> Vec<Curve> {
    specimens_of(set).iter().map(|&specimen| Curve::of(&follows(&without(set, specimen)))).collect()
}

/// Interval of the share without a short from the curves without each specimen, on the log-minus-log scale; `None` at 0 and 1
/// and where leaving one out leads there.
fn jackknifed(curves: &[Curve], time: f64, share: f64) -> Option<[f64; 2]> {
    let scale = |s: f64| (s > 0.0 && s < 1.0).then(|| libm::log(-libm::log(s)));
    let centre = scale(share)?;
    let left_out: Option<Vec<f64>> = curves.iter().map(|curve| scale(curve.survival_at(time))).collect();
    let half = t_critical(CONFIDENCE, curves.len() as f64 - 1.0) * jackknife_se(&left_out?)?;
    let back = |y: f64| libm::exp(-libm::exp(y));
    half.is_finite().then(|| [back(centre + half), back(centre - half)])
}

/// Difference of restricted means; its interval by leaving out specimens in turn from both groups at once, its test by
/// arrangement of the labels over log-rank scores.
fn contrasted(control: &[Followed], treated: &[Followed], until: f64, seed: u64) -> Option<Gap> {
    if control.is_empty() || treated.is_empty() {
        return None;
    }
    let mean = |set: &[Followed]| Curve::of(&follows(set)).restricted_mean(until);
    let value = mean(treated) - mean(control);
    let all: Vec<Followed> = control.iter().chain(treated).copied().collect();
    let specimens = specimens_of(&all);
    let each_alone = specimens_of(control).len() == 1 && specimens_of(treated).len() == 1;
    let left_out: Vec<f64> = specimens
        .iter()
        .map(|&s| [without(control, s), without(treated, s)])
        .filter(|sets| sets.iter().all(|set| !set.is_empty()))
        .map(|[a, b]| mean(&b) - mean(&a))
        .collect();
    // A group that loses its only specimen has no mean: then there is no interval.
    let se = jackknife_se(&left_out).filter(|se| !each_alone && left_out.len() == specimens.len() && *se > 0.0);
    let dof = specimens.len() as f64 - 2.0;
    let ci95 = se.filter(|_| dof >= 1.0).map(|se| {
        let half = t_critical(CONFIDENCE, dof) * se;
        [(value - half).max(-until), (value + half).min(until)]
    });
    let scores = log_rank_scores(&all);
    let units = |from: usize, set: &[Followed]| -> Vec<Unit> {
        set.iter().enumerate().map(|(i, f)| (f.specimen, scores[from + i])).collect()
    };
    let tested =
        difference(&[units(0, control), units(control.len(), treated)], [f64::NEG_INFINITY, f64::INFINITY], seed)?;
    let smallest_seen = se.filter(|_| dof >= 1.0).map(|se| (t_critical(CONFIDENCE, dof) + t_critical(0.6, dof)) * se);
    Some(Gap { value, ci95, specimens: specimens.len(), smallest_seen, ..tested })
}

/// Each run's event less its cumulative hazard (Nelson–Aalen over all runs) when it ended: sums to 0, below 0 for those that
/// lasted. The sum over a group is the log-rank's observed less expected.
fn log_rank_scores(all: &[Followed]) -> Vec<f64> {
    let curve = Curve::of(&follows(all));
    let hazard = |time: f64| {
        curve.steps.iter().take_while(|s| s.time <= time).map(|s| s.events as f64 / s.at_risk as f64).sum::<f64>()
    };
    all.iter().map(|f| if f.follow.event { 1.0 } else { 0.0 } - hazard(f.follow.time)).collect()
}

fn ranks(sets: &[&[Followed]]) -> Option<Ranks> {
    let seen_twice = |specimen: usize| sets.iter().filter(|set| specimens_of(set).contains(&specimen)).count() >= 2;
    let stratified = sets.iter().flat_map(|set| set.iter()).any(|f| seen_twice(f.specimen));
    let member = |group: usize, f: &Followed| Member {
        follow: f.follow,
        group,
        stratum: if stratified { f.specimen as u32 } else { 0 },
    };
    let members: Vec<Member> =
        sets.iter().enumerate().flat_map(|(g, set)| set.iter().map(move |f| member(g, f))).collect();
    let LogRank { chi_squared, dof, p, .. } = logrank(&members, sets.len(), Weight::Equal)?;
    Some(Ranks { chi_squared, dof, p_chi_squared: p, stratified })
}

fn hazard(groups: &[Group], sets: &[Vec<Followed>], seed: u64) -> Result<Hazard, &'static str> {
    let dosed: Vec<(usize, f64, Followed)> = groups
        .iter()
        .zip(sets)
        .enumerate()
        .filter_map(|(g, (group, set))| Some((g, group.dose_mpa?, set)))
        .flat_map(|(g, dose, set)| set.iter().map(move |f| (g, dose, *f)))
        .collect();
    let specimens = dosed.iter().map(|(_, _, f)| f.specimen).collect::<BTreeSet<_>>().len();
    let shorts = dosed.iter().filter(|(_, _, f)| f.follow.event).count();
    if shorts == 0 {
        return Err("no run with a dose shorted");
    }
    let dose_of: Vec<f64> = groups.iter().map(|g| g.dose_mpa.unwrap_or(0.0)).collect();
    let fitted = |labels: &[usize]| {
        let units: Vec<Exposed> = dosed
            .iter()
            .zip(labels)
            .map(|((_, _, f), g)| Exposed { follow: f.follow, x: dose_of[*g] / STEP_MPA, cluster: f.specimen as u32 })
            .collect();
        cox(&units, Ties::Efron)
    };
    let labels: Vec<usize> = dosed.iter().map(|(g, _, _)| *g).collect();
    let fit = fitted(&labels).ok_or("the doses order the shorts completely, or are all the same: no finite ratio")?;
    let ratio = libm::exp(fit.log_ratio);
    if specimens >= MANY {
        let half = normal_quantile(0.5 + 0.5 * CONFIDENCE).max(t_critical(CONFIDENCE, specimens as f64 - 1.0));
        let ends = [-half, half].map(|z| libm::exp(fit.log_ratio + z * fit.robust_se));
        let p = t_two_sided(fit.log_ratio / fit.robust_se, specimens as f64 - 1.0);
        return Ok(Hazard { ratio, ci95: Some(ends), p: Some(p), specimens, shorts });
    }
    let test = dose_test(&dosed, &dose_of, &labels, seed);
    Ok(Hazard { ratio, ci95: None, p: test.map(|t| t.p), specimens, shorts })
}

/// The partial likelihood's score at no effect, under all arrangements of the doses.
fn dose_test(dosed: &[(usize, f64, Followed)], dose_of: &[f64], labels: &[usize], seed: u64) -> Option<Tested> {
    let all: Vec<Followed> = dosed.iter().map(|(_, _, f)| *f).collect();
    let scores = log_rank_scores(&all);
    let own: Vec<usize> = all.iter().map(|f| f.specimen).collect();
    let centres = level_centres(&own, &labels.iter().map(|g| dose_of[*g]).collect::<Vec<f64>>());
    let statistic = |labels: &[usize]| {
        let parts = labels.iter().zip(&centres).zip(&scores).map(|((g, centre), s)| (dose_of[*g] - centre) * s);
        Some(parts.sum::<f64>().abs())
    };
    Arrangements::of(&own, labels).test(seed, statistic)
}

impl GroupEnds {
    /// Runs still followed at a time, as under a curve.
    #[must_use]
    pub fn at_risk(&self, time: f64) -> usize {
        self.ends.len() - self.ends.partition_point(|end| *end < time)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    fn run(specimen: &str, time: f64, ended: Ended) -> RunRecord {
        let run = format!("{specimen}-{time}");
        RunRecord { run, specimen: Some(specimen.into()), followed_s: time, ended, ..RunRecord::default() }
    }

    fn group(name: &str, dose: f64, members: std::ops::Range<usize>) -> Group {
        let specimens = members.len();
        Group { name: name.into(), kind: None, dose_mpa: Some(dose), members: members.collect(), specimens }
    }

    fn judged(records: &[RunRecord], split: usize) -> Endings {
        let groups = [group("a", 0.0, 0..split), group("b", 100.0, split..records.len())];
        let contrast = Some(Contrast { control: 0, treated: 1 });
        endings(records, &Specimens::new(records), &groups, contrast, Clock::Time, 1).unwrap()
    }

    /// The trial of Freireich et al. (1963), every patient a specimen: medians, limits and χ² as R survival 3.5-3 and lifelines
    /// 0.30.3 give them (they are checked one by one in tests/checks/survival.rs).
    #[test]
    fn a_published_trial_comes_out() {
        let text = include_str!("../../fixtures/stats/freireich.csv");
        let rows = text.lines().filter(|l| l.starts_with(|c: char| c.is_ascii_digit()));
        let mut records: Vec<(bool, RunRecord)> = rows
            .enumerate()
            .map(|(i, line)| {
                let cells: Vec<&str> = line.split(',').collect();
                let ended = if cells[1] == "1" { Ended::Short } else { Ended::Stopped };
                (cells[2] != "control", run(&format!("p{i}"), cells[0].parse().unwrap(), ended))
            })
            .collect();
        records.sort_by_key(|(treated, _)| *treated);
        let records: Vec<RunRecord> = records.into_iter().map(|(_, run)| run).collect();
        let found = judged(&records, 21);
        assert_eq!((found.groups[0].median, found.groups[1].median), (Some(8.0), Some(23.0)));
        assert_eq!(found.groups[1].median_ci95, [Some(13.0), None]);
        let ranks = found.ranks.unwrap();
        assert_abs_diff_eq!(ranks.chi_squared, 16.792_941, epsilon = 1e-6);
        assert!(!ranks.stratified);
        // The hazard of the treated: −1.572125 by Efron for the step of 100 MPa here, half of it for 50.
        assert_abs_diff_eq!(found.hazard.unwrap().ratio, (-0.5 * 1.572_125_149_f64).exp(), epsilon = 1e-5);
        assert!(found.difference.unwrap().test.unwrap().p < 0.001);
    }

    #[test]
    fn stopped_and_broken_runs_are_no_shorts() {
        use Ended::{Broke, Short, Stopped};
        let records = [
            run("A", 10.0, Short),
            run("B", 20.0, Broke),
            run("C", 30.0, Short),
            run("A", 40.0, Stopped),
            run("B", 40.0, Stopped),
            run("C", 35.0, Short),
        ];
        let found = judged(&records, 3);
        let control = &found.groups[0];
        assert_eq!((control.short, control.broke, control.stopped), (2, 1, 0));
        let last = control.incidence.last().unwrap();
        assert_abs_diff_eq!(last.short + last.broke, 1.0, epsilon = 1e-12);
        assert!(found.groups[1].incidence.is_empty());
        assert!(found.ranks.unwrap().stratified);
        // All of the control have ended, the treated are known to 40 s.
        assert_eq!(found.until, Some(40.0));
        // Within three specimens that saw both, no test goes below 2/8.
        assert_abs_diff_eq!(found.difference.unwrap().test.unwrap().smallest_p, 0.25, epsilon = 1e-12);
        assert_eq!(control.at_risk(20.0), 2);
    }

    #[test]
    fn doses_that_order_all_shorts_have_no_ratio() {
        let records = [
            run("A", 10.0, Ended::Short),
            run("B", 12.0, Ended::Short),
            run("C", 30.0, Ended::Stopped),
            run("D", 30.0, Ended::Stopped),
        ];
        let found = judged(&records, 2);
        assert!(found.hazard.is_none() && found.no_hazard.unwrap().contains("no finite ratio"));
    }

    #[test]
    fn several_runs_of_a_specimen_widen_the_limits() {
        let time = |i: u32| f64::from(10 + (i * 7) % 12);
        let ended = |i: u32| if i % 4 == 3 { Ended::Stopped } else { Ended::Short };
        let single: Vec<RunRecord> = (0..12).map(|i| run(&format!("s{i}"), time(i), ended(i))).collect();
        let mut shared = single.clone();
        shared.sort_by(|a, b| a.followed_s.total_cmp(&b.followed_s));
        for (i, run) in shared.iter_mut().enumerate() {
            run.specimen = Some(format!("s{}", i / 3));
        }
        let width = |records: &[RunRecord]| {
            let all = Specimens::new(records);
            let groups = [group("a", 0.0, 0..12)];
            let found = endings(records, &all, &groups, None, Clock::Time, 1).unwrap();
            let middle = found.groups[0].curve.iter().find(|p| p.without < 0.6).unwrap().ci95.unwrap();
            middle[1] - middle[0]
        };
        assert!(width(&shared) > 1.2 * width(&single), "{} {}", width(&shared), width(&single));
    }
}
