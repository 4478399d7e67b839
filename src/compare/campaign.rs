//! Do the comparisons keep their word? Invented campaigns with known truth, as records, without frames.
//!
//! Each specimen has its own threshold, direction and speed; each run, too, a little. A filament is turned aside with a chance
//! that rises with dose about the specimen's threshold (or, without an effect, with a chance that knows no dose). What is
//! measured of it is worsened as tracing worsens it: filaments missed, false ones, angles off, ends miscounted.
//! [`coverage`] and [`false_effects`] count; the tests hold the counts, a reduced set always, the full set by
//! `VEERLOG_FULL=1 cargo test --release --test checks full_compare -- --nocapture`.
//! Limit: one family of laws; real specimens may differ in other ways.

use rand::RngExt;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};
use rayon::prelude::*;

use super::effects::Quantity;
use super::record::{Conditions, FilamentRecord, LoadRecord, LoadSample, PieceRecord, RunRecord};
use super::threshold::Answer;
use super::{Plan, compare};
use crate::run::manifest::Ended;
use crate::stats::angles::{acute, fold_axis};
use crate::stats::bootstrap::stream;
use crate::stats::order::median;

/// A campaign to draw.
#[derive(Debug, Clone, PartialEq)]
pub struct Campaign {
    /// Doses, MPa; 0 is no load.
    pub doses_mpa: Vec<f64>,
    /// Specimens.
    pub specimens: usize,
    /// Runs of a specimen at each dose it sees.
    pub repeats: usize,
    /// Whether a specimen sees one dose only (in turn), else all.
    pub one_dose_each: bool,
    /// Dose at which half of the filaments turn aside, MPa; `None`: the load does nothing.
    pub threshold_mpa: Option<f64>,
    /// MPa over which the chance rises by one unit of logit.
    pub rise_mpa: f64,
    /// Standard deviation of the specimens' own logit of turning, and of the runs'.
    pub specimen_logit: f64,
    /// See `specimen_logit`.
    pub run_logit: f64,
}

impl Default for Campaign {
    /// 24 runs, 4 doses, 6 specimens that see every dose, threshold 95 MPa.
    fn default() -> Self {
        Self {
            doses_mpa: vec![0.0, 60.0, 120.0, 180.0],
            specimens: 6,
            repeats: 1,
            one_dose_each: false,
            threshold_mpa: Some(95.0),
            rise_mpa: 20.0,
            specimen_logit: 0.7,
            run_logit: 0.3,
        }
    }
}

/// A campaign drawn: what was so, and what was traced.
#[derive(Debug, Clone, PartialEq)]
pub struct Drawn {
    /// The runs as they were.
    pub truth: Vec<RunRecord>,
    /// The runs as measured.
    pub measured: Vec<RunRecord>,
}

/// A filament whose last 100 µm are shorter than this cannot be judged, µm.
const SHORTEST_UM: f64 = 100.0;
/// Time at which runs are stopped, s.
const STOPPED_S: f64 = 1800.0;
/// Gap, µm.
const GAP_UM: f64 = 330.0;

fn normal(rng: &mut ChaCha8Rng) -> f64 {
    StandardNormal.sample(rng)
}

impl Campaign {
    /// The campaign of number `index` under `seed`.
    #[must_use]
    pub fn draw(&self, seed: u64, index: u64) -> Drawn {
        let mut rng = stream(seed, index);
        let mut drawn = Drawn { truth: Vec::new(), measured: Vec::new() };
        for specimen in 0..self.specimens {
            let own = Own { logit: self.specimen_logit * normal(&mut rng), speed: 0.25 * normal(&mut rng) };
            let seen: Vec<usize> = (0..self.doses_mpa.len())
                .filter(|d| !self.one_dose_each || specimen % self.doses_mpa.len() == *d)
                .collect();
            for (dose, repeat) in seen.iter().flat_map(|d| (0..self.repeats).map(move |r| (*d, r))) {
                let name = format!("s{specimen}-d{dose}-{repeat}");
                let truth = self.run(name, format!("specimen {specimen}"), self.doses_mpa[dose], own, &mut rng);
                drawn.measured.push(measured(&truth, &mut rng));
                drawn.truth.push(truth);
            }
        }
        drawn
    }

    fn run(&self, run: String, specimen: String, dose: f64, own: Own, rng: &mut ChaCha8Rng) -> RunRecord {
        let effect = self.threshold_mpa.map_or(-0.3, |threshold| (dose - threshold) / self.rise_mpa);
        let chance = 1.0 / (1.0 + libm::exp(-(effect + own.logit + self.run_logit * normal(rng))));
        let expected = (dose > 0.0).then_some(0.0);
        let filaments: Vec<FilamentRecord> =
            (0..rng.random_range(3..=7)).map(|_| filament(chance, expected, rng)).collect();
        let slowed = if self.threshold_mpa.is_some() { 1.0 - 0.6 * chance } else { 1.0 };
        let rate = 0.4 * slowed * libm::exp(own.speed + 0.15 * normal(rng));
        let short_s = 180.0 + GAP_UM / rate;
        let (ended, followed_s) =
            if short_s < STOPPED_S { (Ended::Short, short_s) } else { (Ended::Stopped, STOPPED_S) };
        let sample = LoadSample { stress_mpa: (dose > 0.0).then_some(dose), axis_to_edge_deg: expected };
        RunRecord {
            run,
            specimen: Some(specimen),
            load: LoadRecord { samples: vec![sample; 4] },
            filaments,
            depths: (0..=40)
                .map(|i| f64::from(i) * followed_s / 40.0)
                .map(|t| (t, (rate * (t - 180.0)).max(0.0)))
                .collect(),
            rate_um_per_s: Some(rate),
            followed_s,
            charge_mah_per_cm2: Some(0.6 * followed_s / 3600.0),
            ended,
            conditions: Conditions { gap_um: Some(GAP_UM), ..Conditions::default() },
            ..RunRecord::default()
        }
    }
}

/// What a specimen brings to all its runs.
#[derive(Debug, Clone, Copy)]
struct Own {
    logit: f64,
    speed: f64,
}

fn filament(chance: f64, expected: Option<f64>, rng: &mut ChaCha8Rng) -> FilamentRecord {
    let turned = rng.random::<f64>() < chance;
    let (centre, low, high) = if turned { (68.0, 46.0, 90.0) } else { (18.0, 0.0, 44.0) };
    let off: f64 = (centre + 10.0 * normal(rng)).clamp(low, high);
    let side = if rng.random::<bool>() { 1.0 } else { -1.0 };
    let length_um = 250.0 * libm::exp(0.4 * normal(rng));
    let steps = 8;
    // It starts near the normal and has come to its direction by its middle.
    let pieces = (0..steps).map(|i| {
        let come = (f64::from(i) / 4.0).min(1.0);
        let to_edge = fold_axis(90.0 - side * (off * come + 5.0 * normal(rng)));
        piece(length_um / f64::from(steps), to_edge, expected)
    });
    let pieces: Vec<PieceRecord> = pieces.collect();
    FilamentRecord {
        length_um,
        ends: 1 + usize::from(rng.random::<f64>() < 0.4),
        turned: (length_um >= SHORTEST_UM).then_some(turned),
        pieces,
    }
}

fn piece(length_um: f64, to_edge_deg: f64, expected: Option<f64>) -> PieceRecord {
    PieceRecord {
        length_um,
        to_edge_deg,
        expected_deg: expected,
        to_load_deg: expected.map(|axis| acute(to_edge_deg, axis)),
    }
}

/// What tracing makes of a run: 8 % of the filaments missed, one false short filament in every fourth run, directions off by
/// 4°, one judgement of turning in twenty wrong, ends miscounted, rate off by 5 %.
fn measured(truth: &RunRecord, rng: &mut ChaCha8Rng) -> RunRecord {
    let mut run = truth.clone();
    run.filaments.retain(|_| rng.random::<f64>() >= 0.08);
    for filament in &mut run.filaments {
        for piece in &mut filament.pieces {
            piece.to_edge_deg = fold_axis(piece.to_edge_deg + 4.0 * normal(rng));
            piece.to_load_deg = piece.expected_deg.map(|axis| acute(piece.to_edge_deg, axis));
        }
        if rng.random::<f64>() < 0.05 {
            filament.turned = filament.turned.map(|turned| !turned);
        }
        if rng.random::<f64>() < 0.2 {
            filament.ends += 1;
        }
    }
    if rng.random::<f64>() < 0.25 {
        let expected = truth.load.samples.first().and_then(|s| s.axis_to_edge_deg);
        let to_edge = rng.random_range(0.0..180.0);
        let pieces = vec![piece(30.0, to_edge, expected)];
        run.filaments.push(FilamentRecord { length_um: 30.0, ends: 1, turned: None, pieces });
    }
    run.rate_um_per_s = run.rate_um_per_s.map(|rate| rate * libm::exp(0.05 * normal(rng)));
    run
}

/// How the interval of the threshold did.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Coverage {
    /// Campaigns.
    pub campaigns: usize,
    /// Intervals that hold the truth; an end that does not exist holds all on its side.
    pub held: usize,
    /// Intervals with both ends.
    pub bounded: usize,
    /// Median half-width, MPa; infinite where most have no end.
    pub half_width_mpa: f64,
    /// The same of the fit to the true runs.
    pub half_width_of_truth_mpa: f64,
}

/// Draws campaigns and counts the intervals of the threshold.
#[must_use]
pub fn coverage(campaign: &Campaign, campaigns: u64, seed: u64) -> Coverage {
    let truth = campaign.threshold_mpa.unwrap_or(f64::NAN);
    let rows: Vec<([f64; 2], f64)> = (0..campaigns)
        .into_par_iter()
        .map(|i| {
            let drawn = campaign.draw(seed, i);
            let ends = interval(&drawn.measured);
            let [low, high] = interval(&drawn.truth);
            (ends, 0.5 * (high - low))
        })
        .collect();
    let half = |[low, high]: [f64; 2]| 0.5 * (high - low);
    let middle = |values: Vec<f64>| median(&values).unwrap_or(f64::NAN);
    Coverage {
        campaigns: rows.len(),
        held: rows.iter().filter(|([low, high], _)| *low <= truth && truth <= *high).count(),
        bounded: rows.iter().filter(|(ends, _)| half(*ends).is_finite()).count(),
        half_width_mpa: middle(rows.iter().map(|(ends, _)| half(*ends)).collect()),
        half_width_of_truth_mpa: middle(rows.iter().map(|(_, truth)| *truth).collect()),
    }
}

/// Ends of the threshold's interval, infinite where they do not exist.
fn interval(records: &[RunRecord]) -> [f64; 2] {
    let Ok(found) = compare(records, &Plan::default()) else { return [f64::NEG_INFINITY, f64::INFINITY] };
    match found.turned.answer {
        Answer::NoResponse | Answer::TooFew => [f64::NEG_INFINITY, f64::INFINITY],
        _ => [found.turned.ci95[0].unwrap_or(f64::NEG_INFINITY), found.turned.ci95[1].unwrap_or(f64::INFINITY)],
    }
}

/// Effects claimed where there is none.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct FalseEffects {
    /// Campaigns.
    pub campaigns: usize,
    /// Campaigns with p < 0.05 on the primary contrast, by what was compared.
    pub claimed: Vec<(&'static str, usize)>,
    /// The same for the share turned aside, had the filaments been pooled as if independent.
    pub pooled: usize,
    /// Campaigns in which any effect was claimed after Holm's adjustment.
    pub any_after_holm: usize,
}

/// Draws campaigns in which the load does nothing (whatever `campaign` says of it) and counts the effects claimed.
#[must_use]
pub fn false_effects(campaign: &Campaign, campaigns: u64, seed: u64) -> FalseEffects {
    let null = Campaign { threshold_mpa: None, ..campaign.clone() };
    let rows: Vec<Vec<(&'static str, f64, f64)>> = (0..campaigns)
        .into_par_iter()
        .map(|i| {
            let drawn = null.draw(seed, i);
            let plan = Plan { seed: i, ..Plan::default() };
            compare(&drawn.measured, &plan).map(|found| primary_p(&found, &drawn.measured)).unwrap_or_default()
        })
        .collect();
    let names: Vec<&'static str> = rows.first().map(|row| row.iter().map(|r| r.0).collect()).unwrap_or_default();
    let count = |name: &str, of: fn(&(&'static str, f64, f64)) -> f64| {
        rows.iter().filter(|row| row.iter().any(|r| r.0 == name && of(r) < 0.05)).count()
    };
    FalseEffects {
        campaigns: rows.len(),
        claimed: names.iter().filter(|n| **n != POOLED).map(|n| (*n, count(n, |r| r.1))).collect(),
        pooled: count(POOLED, |r| r.1),
        any_after_holm: rows.iter().filter(|row| row.iter().any(|r| r.0 != POOLED && r.2 < 0.05)).count(),
    }
}

/// Name of the test that pools filaments.
const POOLED: &str = "filaments pooled";

/// Name, p and adjusted p of every primary contrast, and p of the filaments pooled.
fn primary_p(found: &super::Comparison, records: &[RunRecord]) -> Vec<(&'static str, f64, f64)> {
    let Some(names) = &found.contrast else { return Vec::new() };
    let treated = found.groups.iter().position(|g| g.name == names[1]);
    let of = |name, gap: Option<super::effects::Gap>| {
        let gap = gap?;
        Some((name, gap.test?.p, gap.p_holm.unwrap_or(1.0)))
    };
    let mut all: Vec<_> = found
        .effects
        .iter()
        .filter(|e| e.quantity != Quantity::ToLoad)
        .filter_map(|e| of(e.quantity.words(), e.differences[treated?]))
        .collect();
    all.extend([&found.time, &found.charge].into_iter().flatten().filter_map(|e| {
        let name = if e.clock == super::endings::Clock::Time { "time to short" } else { "charge to short" };
        of(name, e.difference)
    }));
    let count = |name: &String| {
        let group = found.groups.iter().find(|g| g.name == *name);
        let members = group.map(|g| g.members.clone()).unwrap_or_default();
        members.iter().map(|&i| records[i].turned()).fold((0.0, 0.0), |s, (n, yes)| (s.0 + n as f64, s.1 + yes as f64))
    };
    let (a, b) = (count(&names[0]), count(&names[1]));
    let share = (a.1 + b.1) / (a.0 + b.0);
    let se = libm::sqrt(share * (1.0 - share) * (1.0 / a.0 + 1.0 / b.0));
    let z = (b.1 / b.0 - a.1 / a.0) / se;
    let p = 2.0 * crate::stats::distributions::normal_cdf(-z.abs());
    all.push((POOLED, if p.is_finite() { p } else { 1.0 }, 1.0));
    all
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_same_seed_draws_the_same_campaign() {
        let campaign = Campaign::default();
        assert_eq!(campaign.draw(3, 1), campaign.draw(3, 1));
        assert_ne!(campaign.draw(3, 1), campaign.draw(3, 2));
        assert_eq!(campaign.draw(3, 1).truth.len(), 24);
        let nested = Campaign { one_dose_each: true, specimens: 8, repeats: 3, ..campaign };
        assert_eq!(nested.draw(3, 1).truth.len(), 24);
    }

    #[test]
    fn half_of_the_filaments_turn_at_the_threshold() {
        let campaign = Campaign { doses_mpa: vec![95.0], specimens: 2000, ..Campaign::default() };
        let (tried, yes) =
            campaign.draw(1, 0).truth.iter().map(RunRecord::turned).fold((0, 0), |s, t| (s.0 + t.0, s.1 + t.1));
        assert!((yes as f64 / tried as f64 - 0.5).abs() < 0.02, "{yes} of {tried}");
    }
}
