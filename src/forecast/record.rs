//! The forecast's own record: re-issued at every past frame from what was then decided, and scored on what came.
//! Method: depth predicted 1, 3 and 10 frames ahead against the depth then measured: probability integral transform (Dawid 1984),
//! coverage of the central 80 and 50 %, judged by the binomial band of the non-overlapping predictions.
//! Limits: depths are scored, not the short, which comes once a run; neighbouring predictions overlap and count as one.

use rayon::prelude::*;
use statrs::distribution::{Binomial, DiscreteCDF};

use super::ahead::depth_ahead;
use super::{Forecast, Record, Settings, forecast};

/// Frames ahead at which depth is scored.
pub const STEPS: [usize; 3] = [1, 3, 10];
/// Fewest non-overlapping predictions from which calibration is judged (common practice).
pub const LEAST_JUDGED: usize = 8;

/// How depth predicted some frames ahead compared with what came.
#[derive(Debug, Clone, PartialEq)]
pub struct Ahead {
    /// Frames ahead.
    pub steps: usize,
    /// Chance given beforehand to depths up to the one measured, in order of issue: uniform on 0–1 when calibrated.
    pub pit: Vec<f64>,
    /// Share of measured depths in the central 80 %; `None` without predictions.
    pub coverage80: Option<f64>,
    /// The same for the central 50 %.
    pub coverage50: Option<f64>,
}

/// Issues a forecast from each record, in their order, whatever the number of threads.
/// Each record must hold only what was decided when it is issued: nothing else is looked at.
pub fn reissue(records: &[Record], settings: &Settings) -> Vec<Forecast> {
    records.par_iter().map(|record| forecast(record, settings)).collect()
}

/// Scores depth predicted by each of `records` against `outcome`, the last record of the same run: its `times_s` begin with theirs.
pub fn score(records: &[Record], outcome: &Record) -> [Ahead; 3] {
    STEPS.map(|steps| {
        let pit: Vec<f64> = records.par_iter().filter_map(|record| transform(record, outcome, steps)).collect();
        let within = |share: f64| {
            let hits = pit.iter().filter(|&&u| (u - 0.5).abs() <= 0.5 * share).count();
            (!pit.is_empty()).then(|| hits as f64 / pit.len() as f64)
        };
        Ahead { steps, coverage80: within(0.8), coverage50: within(0.5), pit }
    })
}

/// Chance the record gave to depths up to the one measured `steps` frames after its last.
fn transform(record: &Record, outcome: &Record, steps: usize) -> Option<f64> {
    // ahead of the issue, not of the last depth known by then
    let issued = outcome.times_s.partition_point(|&t| t <= record.issued_at_s).checked_sub(1)?;
    let at = issued.max(record.times_s.len() - 1) + steps;
    let time = *outcome.times_s.get(at)?;
    let tips = outcome.tips.iter().filter_map(|tip| {
        let k = at.checked_sub(tip.first)?;
        Some((*tip.depth_um.get(k)?, *tip.u_depth_um.get(k)?, *tip.remaining_um.get(k)?))
    });
    let (depth, u, left) = tips.max_by(|a, b| a.0.total_cmp(&b.0))?;
    // a depth stopped by the far edge says nothing about growth
    if left > 0.0 { depth_ahead(record, time, depth, u) } else { None }
}

/// The coverage of the central 80 % in one sentence; `None` where nothing could be predicted and compared.
pub fn shown(scores: &[Ahead]) -> Option<String> {
    let parts: Vec<String> = scores
        .iter()
        .filter_map(|a| Some(format!("{} ahead {:.0} % of {}", a.steps, 100.0 * a.coverage80?, a.pit.len())))
        .collect();
    let list = parts.join(", ");
    (!parts.is_empty()).then(|| {
        format!(
            "Depths predicted in this run and then measured that fell into the 80 % interval, by frames ahead: {list}."
        )
    })
}

/// What the record says about the forecast, worst first: one sentence where the coverage of the central 80 % falls out of the
/// band that chance allows (95 % binomial), `None` where it does not or where too little was predicted.
pub fn verdict(scores: &[Ahead]) -> Option<String> {
    let off = |ahead: &Ahead| {
        let judged = ahead.pit.len() / ahead.steps;
        let coverage = ahead.coverage80.filter(|_| judged >= LEAST_JUDGED)?;
        let law = Binomial::new(0.8, judged as u64).ok()?;
        let (low, high) = (law.inverse_cdf(0.025), law.inverse_cdf(0.975));
        let hits = coverage * judged as f64;
        let surer = hits < low as f64 - 0.5;
        let wider = hits > high as f64 + 0.5;
        let word = if surer { "surer than it should have been" } else { "less sure than it could have been" };
        let text = format!(
            "{} frame{} ahead the forecast of depth was {word}: {:.0} % of depths fell into its 80 % interval",
            ahead.steps,
            if ahead.steps == 1 { "" } else { "s" },
            100.0 * coverage
        );
        (surer || wider).then(|| ((coverage - 0.8).abs() + if surer { 1.0 } else { 0.0 }, text))
    };
    scores.iter().filter_map(off).max_by(|a, b| a.0.total_cmp(&b.0)).map(|(_, text)| text)
}

#[cfg(test)]
mod tests {
    use super::super::histories::{Fleet, Law, draw};
    use super::*;

    fn records(law: Law, index: u64, upto: usize) -> Vec<Record> {
        let run = draw(law, &Fleet { frames: 60, roughness: 1.0, seed: 11 }, index);
        (0..run.times_s.len().min(upto)).filter_map(|k| run.record_at(k, 2)).collect()
    }

    #[test]
    fn no_later_frame_leaks_in() {
        let whole = reissue(&records(Law::Jumps, 1, usize::MAX), &Settings::default());
        for upto in [12, 25, 33] {
            let cut = reissue(&records(Law::Jumps, 1, upto), &Settings::default());
            assert_eq!(cut[..], whole[..cut.len()]);
        }
    }

    #[test]
    fn depth_ahead_covers_over_many_runs() {
        let mut hits = [0.0; 3];
        let mut all = [0.0; 3];
        for index in 0..40 {
            for law in [Law::Steady, Law::Power, Law::Jumps] {
                let records = records(law, index, usize::MAX);
                let Some(last) = records.last() else { continue };
                for (k, ahead) in score(&records, last).iter().enumerate() {
                    hits[k] += ahead.pit.iter().filter(|&&u| (u - 0.5).abs() <= 0.4).count() as f64;
                    all[k] += ahead.pit.len() as f64;
                }
            }
        }
        for k in 0..3 {
            let coverage = hits[k] / all[k];
            println!("{} frames ahead: {coverage:.3} of {}", STEPS[k], all[k]);
            assert!((0.70..0.93).contains(&coverage), "{} frames ahead: {coverage}", STEPS[k]);
        }
    }

    #[test]
    fn a_forecast_too_sure_is_named() {
        let pit = (0..40).map(|k| if k % 2 == 0 { 0.01 } else { 0.5 }).collect();
        let ahead = Ahead { steps: 1, pit, coverage80: Some(0.5), coverage50: Some(0.5) };
        assert!(verdict(&[ahead]).unwrap().contains("surer"));
        let fine = Ahead { steps: 1, pit: vec![0.5; 40], coverage80: Some(0.8), coverage50: Some(0.5) };
        assert_eq!(verdict(std::slice::from_ref(&fine)), None);
        assert_eq!(verdict(&[]), None);
        assert!(shown(&[fine]).unwrap().ends_with("1 ahead 80 % of 40."));
        assert_eq!(shown(&[]), None);
    }
}
