//! The load's effect within a run: growth rows and load samples put to [`crate::stats::turns`], its answer as table rows;
//! and how uneven the directions of growth are, by sign of stress ([`crate::stats::filaments`]).
//!
//! A step needs a stress and an axis; a run without either is said to have no load to judge. Interval of the median length
//! grown on: order statistics of the filaments that followed (the sign test's interval; Conover 1999, Practical
//! Nonparametric Statistics, 3rd ed., section 3.2, from memory), so that under six of them there is none.

use std::collections::BTreeMap;

use super::Input;
use crate::measure::GrowthRow;
use crate::results::{DirectionRow, LoadKnown, TurnRow, TurnVerdict, TurnsSummary};
use crate::run::Series;
use crate::stats::angles::fold_axis;
use crate::stats::filaments::{AxialPiece, AxialSummary, TurnDraws, by_sign};
use crate::stats::order::sorted;
use crate::stats::turns::{GrowthPiece, LoadSample, StepTurn, TurnSettings, Turns, Verdict, turns};

/// What the load did, row by row and over the run.
#[derive(Debug, Default, PartialEq)]
pub(super) struct Steered {
    /// A row a step of the load.
    pub(super) rows: Vec<TurnRow>,
    /// Over all steps.
    pub(super) summary: TurnsSummary,
}

impl Steered {
    /// Judges the growth of a run by the steps of its load.
    pub(super) fn of(input: &Input, growth: &[GrowthRow]) -> Self {
        Self::judged(growth, &samples(input))
    }

    /// The same from plain records; `load` in order of time.
    fn judged(growth: &[GrowthRow], load: &[LoadSample]) -> Self {
        let found = turns(&pieces(growth), load, TurnSettings::default());
        let rows: Vec<TurnRow> = found.steps.iter().enumerate().map(|(i, turn)| row(i + 1, turn, load)).collect();
        Self { summary: summary(&found, &rows, load), rows }
    }
}

fn summary(found: &Turns, rows: &[TurnRow], load: &[LoadSample]) -> TurnsSummary {
    let with = |verdict| rows.iter().filter(|row| row.verdict == verdict).count();
    TurnsSummary {
        load: known(load),
        steps: rows.len(),
        turned: with(TurnVerdict::Turned),
        did_nothing: with(TurnVerdict::DidNothing),
        gain: found.overall.map(|all| all.gain),
        p: found.overall.map(|all| all.p),
        filaments: found.overall.map(|all| all.filaments),
    }
}

fn known(load: &[LoadSample]) -> LoadKnown {
    let stress = || load.iter().filter(|sample| sample.stress_mpa.is_some());
    match (stress().next(), stress().find(|sample| sample.axis_deg.is_some())) {
        (None, _) => LoadKnown::NoStress,
        (Some(_), None) => LoadKnown::NoAxis,
        (Some(_), Some(_)) => LoadKnown::Stress,
    }
}

/// Growth rows as the turn finder takes them, each with the length its filament had grown by then.
fn pieces(growth: &[GrowthRow]) -> Vec<GrowthPiece> {
    let mut grown: BTreeMap<u32, f64> = BTreeMap::new();
    let mut rows: Vec<&GrowthRow> = growth.iter().collect();
    rows.sort_by(|a, b| a.time_s.total_cmp(&b.time_s));
    rows.into_iter()
        .map(|row| {
            let position = grown.entry(row.filament).or_default();
            *position += row.length_um;
            GrowthPiece {
                time_s: row.time_s,
                filament: row.filament,
                position: *position,
                angle_deg: row.angle_deg,
                weight: row.length_um,
            }
        })
        .collect()
}

/// The load's samples, and one where a sample ceases to hold, so that a gap of the log is a gap here.
fn samples(input: &Input) -> Vec<LoadSample> {
    let mut times = input.load_samples().time_s;
    let end = times.last().copied().unwrap_or(0.0);
    let log = &input.load.log;
    for series in [&log.force_n, &log.stress_mpa, &log.direction_deg].into_iter().flatten() {
        times.extend(ends_of_hold(series, end));
    }
    times.sort_by(f64::total_cmp);
    times.dedup_by(|a, b| a.total_cmp(b).is_eq());
    let sample = |time_s: f64| {
        let state = input.load.at(time_s, None);
        LoadSample { time_s, axis_deg: state.direction_deg, stress_mpa: state.stress_mpa }
    };
    times.into_iter().map(sample).collect()
}

/// Times just after a sample ceased to hold before the next came, up to `end_s`.
fn ends_of_hold(series: &Series, end_s: f64) -> Vec<f64> {
    /// A moment later, s: far below any log's resolution.
    const MOMENT_S: f64 = 1e-6;
    let next = series.time_s.iter().skip(1).copied().chain([end_s]);
    let ends = series.time_s.iter().zip(next).map(|(&from, next)| (from + series.hold_s + MOMENT_S, next));
    ends.filter(|(end, next)| end < next && (0.0..end_s).contains(end)).map(|(end, _)| end).collect()
}

fn row(number: usize, turn: &StepTurn, load: &[LoadSample]) -> TurnRow {
    let step = turn.step;
    let after = load.partition_point(|sample| sample.time_s < step.time_s);
    let sign_of = |sample: Option<&LoadSample>| sample.and_then(|s| s.stress_mpa).is_some_and(|stress| stress < 0.0);
    let pulled_before = sign_of(after.checked_sub(1).and_then(|i| load.get(i)));
    let pulled_after = sign_of(load.get(after));
    let (axis_before_deg, stress_before_mpa) = as_logged(step.axis_before_deg, step.stress_before_mpa, pulled_before);
    let (axis_after_deg, stress_after_mpa) = as_logged(step.axis_after_deg, step.stress_after_mpa, pulled_after);
    let grew_on = turn.grew_on.and_then(|_| median_interval(&grown_on(turn)));
    TurnRow {
        step: number,
        time_s: step.time_s,
        axis_before_deg,
        axis_after_deg,
        stress_before_mpa,
        stress_after_mpa,
        expected_deg: step.expected_after(),
        growth_before_deg: turn.before_deg,
        growth_after_deg: turn.after_deg,
        turned_deg: turn.turned_deg,
        lag_s: turn.turned_at.map(|at| at.lag_s),
        lag_low_s: turn.turned_at.map(|at| at.ci95[0] - step.time_s),
        lag_high_s: turn.turned_at.map(|at| at.ci95[1] - step.time_s),
        lag_um: turn.grew_on,
        lag_low_um: grew_on.map(|ends| ends[0]),
        lag_high_um: grew_on.map(|ends| ends[1]),
        filaments: turn.filaments.len(),
        followed: turn.followed,
        gain: turn.contrast.map(|contrast| contrast.gain),
        p: turn.contrast.map(|contrast| contrast.p),
        verdict: verdict(turn),
    }
}

/// "Did nothing" is said where growth kept its way. Where it turned as far as a turn must, but not more surely than it does
/// at other times, the filaments are too few to say.
fn verdict(turn: &StepTurn) -> TurnVerdict {
    let far = turn.turned_deg.is_some_and(|turned| turned >= TurnSettings::default().min_turn_deg);
    let gained = turn.contrast.is_some_and(|contrast| contrast.gain > 0.0);
    match turn.verdict {
        Verdict::Turned => TurnVerdict::Turned,
        Verdict::NoTurn if !(far && gained) => TurnVerdict::DidNothing,
        Verdict::NoTurn | Verdict::TooFewToSay => TurnVerdict::TooFew,
        Verdict::NothingExpected => TurnVerdict::TakenOff,
    }
}

/// Steps hold tension as compression across; the table says it as it was logged: negative, along the load axis.
fn as_logged(axis_deg: Option<f64>, size_mpa: f64, pulled: bool) -> (Option<f64>, f64) {
    if pulled { (axis_deg.map(|axis| fold_axis(axis + 90.0)), -size_mpa) } else { (axis_deg, size_mpa) }
}

fn grown_on(turn: &StepTurn) -> Vec<f64> {
    turn.filaments.iter().filter(|own| own.followed).filter_map(|own| own.grew_on).collect()
}

/// 95 % interval of a median between two order statistics; `None` under six values.
fn median_interval(values: &[f64]) -> Option<[f64; 2]> {
    /// Chance left out on each side.
    const TAIL: f64 = 0.025;
    let n = values.len();
    // Of a fair coin thrown n times: the largest k for which under k heads come with a chance of at most `TAIL`.
    let mut chance = libm::pow(0.5, n as f64);
    let (mut below, mut k) = (0.0, 0);
    while k < n && below + chance <= TAIL {
        below += chance;
        k += 1;
        chance *= (n - k + 1) as f64 / k as f64;
    }
    let order = sorted(values);
    (k > 0).then(|| [order[k - 1], order[n - k]])
}

/// How uneven the directions of growth are: all of it, then by sign of the stress; sets without growth take no row.
pub(super) fn directions(growth: &[GrowthRow], seed: u64) -> Vec<DirectionRow> {
    let pieces: Vec<AxialPiece> = growth
        .iter()
        .map(|row| AxialPiece {
            filament: row.filament,
            angle_deg: row.angle_deg,
            weight: row.length_um,
            load_axis_deg: row.load_direction_deg,
            stress_mpa: row.stress_mpa,
        })
        .collect();
    let sets = by_sign(&pieces, TurnDraws { seed, ..TurnDraws::default() });
    [("all", sets.all), ("compression", sets.compressed), ("tension", sets.stretched), ("none", sets.unstressed)]
        .into_iter()
        .filter_map(|(stress, set)| Some(direction_row(stress, &set?)))
        .collect()
}

fn direction_row(stress: &str, set: &AxialSummary) -> DirectionRow {
    let toward = set.alignment_to_expected;
    let ends = toward.and_then(|estimate| estimate.ci95);
    DirectionRow {
        stress: stress.to_owned(),
        filaments: set.filaments,
        pieces: set.pieces,
        length_um: set.weight,
        mean_axis_deg: set.mean.axis_deg,
        resultant: set.mean.resultant,
        kappa: Some(set.mean.kappa).filter(|kappa| kappa.is_finite()),
        rayleigh_p: set.rayleigh_p,
        alignment: set.alignment.map(|estimate| estimate.value),
        toward_expected: toward.map(|estimate| estimate.value),
        toward_expected_low: ends.map(|ends| ends[0]),
        toward_expected_high: ends.map(|ends| ends[1]),
        v_p: set.v_p,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Eight filaments along 0° (with wander) that turn to 80° at `turns_s`, a piece every 10 s.
    fn growth(turns_s: f64) -> Vec<GrowthRow> {
        let piece = |frame: u32, filament: u32| {
            let time_s = 10.0 * f64::from(frame);
            let wander = f64::from((frame * 7 + filament * 5) % 11) - 5.0;
            GrowthRow {
                frame: frame as usize,
                time_s,
                load_time_s: time_s - 5.0,
                filament,
                x_px: 0.0,
                y_px: 0.0,
                length_um: 4.0,
                angle_deg: fold_axis(wander + if time_s > turns_s { 80.0 } else { 0.0 }),
                u_angle_deg: None,
                load_direction_deg: Some(if time_s - 5.0 >= 300.0 { 90.0 } else { 0.0 }),
                angle_to_load_deg: None,
                stress_mpa: Some(150.0),
            }
        };
        (1..60).flat_map(|frame| (1..9).map(move |filament| piece(frame, filament))).collect()
    }

    fn demo(name: &str) -> crate::results::Results {
        let run = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("synthetic-frames").join(name);
        analysed(&run)
    }

    fn analysed(run: &std::path::Path) -> crate::results::Results {
        crate::pipeline::analyse(run, crate::pipeline::Choices::default(), &crate::pipeline::Quiet).unwrap()
    }

    /// Growth changes direction after the step of the load (common practice: a turned load turns it). Of three drawings of
    /// one scenario most are sure of it, and none says that the load did nothing.
    #[test]
    fn a_filmed_load_that_turns_is_seen_to_turn_growth() {
        let file = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/turns/nine.toml");
        let mut turned = 0;
        for seed in [13, 42, 43] {
            let mut scenario = crate::synth::Scenario::load(&file).unwrap();
            scenario.seed = seed;
            let folder = tempfile::tempdir().unwrap();
            crate::synth::write_run(&scenario, &folder.path().join("run")).unwrap();
            let results = analysed(&folder.path().join("run"));
            let row = &results.turns[0];
            // The scenario's own step: from 40° to 130° at 660 s, the log has a sample every 6 s.
            assert!((row.time_s - 660.0).abs() <= 6.0, "{row:?}");
            assert!(
                (row.axis_before_deg.unwrap() - 40.0).abs() < 1.0 && (row.axis_after_deg.unwrap() - 130.0).abs() < 1.0
            );
            assert_ne!(row.verdict, TurnVerdict::DidNothing, "seed {seed}: {row:?}");
            turned += usize::from(row.verdict == TurnVerdict::Turned);
        }
        assert!(turned >= 2, "{turned} of 3");
    }

    /// Three filaments grow through the step of this run: they turn, too few to be sure.
    #[test]
    fn the_turning_demo_run_is_not_said_to_have_ignored_its_load() {
        let results = demo("turning-1");
        let row = &results.turns[0];
        assert_eq!((results.turns.len(), results.summary.turns.load), (1, LoadKnown::Stress));
        assert!((row.time_s - 660.0).abs() <= 6.0 && row.turned_deg.unwrap() > 15.0, "{row:?}");
        assert_ne!(row.verdict, TurnVerdict::DidNothing);
        assert!(results.summary.kink_model.is_some() && !results.charge.is_empty() && results.half_cycles.len() == 1);
    }

    /// No load was logged: nothing steps, nothing is judged, no model is drawn; charge is accounted all the same.
    #[test]
    fn a_still_demo_run_has_no_step() {
        let results = demo("still-1");
        assert_eq!((results.turns.len(), results.summary.turns.load), (0, LoadKnown::NoStress));
        assert_eq!(results.summary.kink_model, None);
        assert!(results.summary.directions.iter().all(|row| matches!(row.stress.as_str(), "all" | "none")));
        assert!(results.summary.charge.logged);
    }

    fn at(time_s: f64, axis: f64, stress: f64) -> LoadSample {
        LoadSample { time_s, axis_deg: Some(axis), stress_mpa: Some(stress) }
    }

    #[test]
    fn growth_that_follows_is_reported_with_its_lag() {
        let steered = Steered::judged(&growth(320.0), &[at(0.0, 0.0, 150.0), at(300.0, 90.0, 150.0)]);
        let row = &steered.rows[0];
        assert_eq!((row.verdict, row.filaments, row.followed), (TurnVerdict::Turned, 8, 8), "{row:?}");
        assert!((row.turned_deg.unwrap() - 80.0).abs() < 5.0, "{row:?}");
        assert!((row.lag_s.unwrap() - 20.0).abs() <= 10.0, "{row:?}");
        assert!(row.lag_low_s <= row.lag_s && row.lag_s <= row.lag_high_s);
        // Two whole pieces and a half of 4 µm, at most one off.
        assert!((row.lag_um.unwrap() - 10.0).abs() <= 4.0, "{row:?}");
        assert!(row.lag_low_um <= row.lag_um && row.lag_um <= row.lag_high_um);
        assert_eq!((steered.summary.turned, steered.summary.did_nothing), (1, 0));
    }

    #[test]
    fn a_load_that_did_nothing_is_reported_so() {
        let steered = Steered::judged(&growth(f64::INFINITY), &[at(0.0, 0.0, 150.0), at(300.0, 90.0, 150.0)]);
        let row = &steered.rows[0];
        assert_eq!((row.verdict, row.followed, row.lag_s), (TurnVerdict::DidNothing, 0, None), "{row:?}");
        assert_eq!(steered.summary.did_nothing, 1);
    }

    #[test]
    fn a_pull_is_told_as_it_was_logged() {
        // From compression along 0° to tension along 0°: growth is then expected along 90°.
        let steered = Steered::judged(&growth(320.0), &[at(0.0, 0.0, 150.0), at(300.0, 0.0, -120.0)]);
        let row = &steered.rows[0];
        assert_eq!((row.axis_before_deg, row.axis_after_deg, row.expected_deg), (Some(0.0), Some(0.0), Some(90.0)));
        assert!((row.stress_before_mpa - 150.0).abs() < 1e-9 && (row.stress_after_mpa + 120.0).abs() < 1e-9);
        assert_eq!(row.verdict, TurnVerdict::Turned);
    }

    #[test]
    fn without_stress_axis_or_growth_there_is_nothing_to_judge() {
        let bare = |axis_deg, stress_mpa| [LoadSample { time_s: 0.0, axis_deg, stress_mpa }];
        for (load, expected) in [
            (bare(Some(90.0), None).to_vec(), LoadKnown::NoStress),
            (Vec::new(), LoadKnown::NoStress),
            (bare(None, Some(80.0)).to_vec(), LoadKnown::NoAxis),
            (bare(Some(90.0), Some(80.0)).to_vec(), LoadKnown::Stress),
        ] {
            let steered = Steered::judged(&growth(320.0), &load);
            assert_eq!((steered.summary.load, steered.rows.len()), (expected, 0));
        }
        let steered = Steered::judged(&[], &[at(0.0, 0.0, 150.0), at(300.0, 90.0, 150.0)]);
        assert_eq!((steered.summary.steps, steered.summary.p), (0, None));
        assert_eq!(directions(&[], 0), []);
    }

    #[test]
    fn growth_on_one_side_of_the_step_is_too_little() {
        let mut rows = growth(320.0);
        rows.retain(|row| (row.filament <= 4) == (row.time_s <= 300.0));
        let steered = Steered::judged(&rows, &[at(0.0, 0.0, 150.0), at(300.0, 90.0, 150.0)]);
        let row = &steered.rows[0];
        assert_eq!((row.verdict, row.followed, row.lag_s), (TurnVerdict::TooFew, 0, None), "{row:?}");
    }

    #[test]
    fn directions_stand_apart_by_sign() {
        let mut rows = growth(320.0);
        rows.iter_mut().filter(|row| row.time_s > 320.0).for_each(|row| row.stress_mpa = Some(-50.0));
        rows.push(GrowthRow { stress_mpa: None, ..rows[0].clone() });
        let sets = directions(&rows, 0);
        assert_eq!(
            sets.iter().map(|set| set.stress.as_str()).collect::<Vec<_>>(),
            ["all", "compression", "tension", "none"]
        );
        assert!((sets[2].mean_axis_deg.unwrap() - 80.0).abs() < 2.0);
        assert_eq!(sets[0].pieces, sets[1..].iter().map(|set| set.pieces).sum::<usize>());
        assert!(sets[1].rayleigh_p.unwrap() < 0.01 && sets[1].toward_expected_low > Some(0.5));
        assert_eq!(sets[3].v_p, None);
    }

    /// Ranks of the sign test's interval: 6 values 1 and 6, 10 values 2 and 9, 20 values 6 and 15 (Conover 1999, from memory).
    #[test]
    fn the_median_lies_between_the_known_ranks() {
        let upto = |n: u32| (1..=n).map(f64::from).collect::<Vec<_>>();
        assert_eq!(median_interval(&upto(5)), None);
        assert_eq!(median_interval(&[]), None);
        assert_eq!(median_interval(&upto(6)), Some([1.0, 6.0]));
        assert_eq!(median_interval(&upto(10)), Some([2.0, 9.0]));
        assert_eq!(median_interval(&upto(20)), Some([6.0, 15.0]));
    }

    #[test]
    fn a_gap_of_the_log_is_marked_where_the_hold_ends() {
        let series = Series::new(vec![0.0, 10.0, 200.0], vec![1.0, 1.0, 2.0], 30.0);
        let ends = ends_of_hold(&series, 400.0);
        assert_eq!(ends.len(), 2);
        assert!((ends[0] - 40.0).abs() < 1e-3 && (ends[1] - 230.0).abs() < 1e-3);
        assert_eq!(series.at(ends[0]), None);
        assert_eq!(ends_of_hold(&Series::constant(2.0), 400.0), Vec::<f64>::new());
    }
}
