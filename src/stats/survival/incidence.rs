//! The share that has ended by each cause, when an end of one kind forestalls the others: the Aalen–Johansen estimator
//! (Aalen & Johansen 1978, Scand. J. Stat. 5, 141–150). A broken specimen can no longer short.

/// How a unit ended.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Ended {
    /// Time of the end, or of the last look.
    pub time: f64,
    /// Cause, 0 to k − 1; `None` when still going at the last look.
    pub cause: Option<usize>,
}

/// Cumulative incidence just after one time of ending.
#[derive(Debug, Clone, PartialEq)]
pub struct Incidence {
    /// The time.
    pub time: f64,
    /// Share without any end from here on.
    pub going: f64,
    /// Share ended by each cause.
    pub ended: Vec<f64>,
}

/// Cumulative incidence of `causes` causes, a row a distinct time of ending. Causes out of range count as none.
///
/// ```
/// use veerlog::stats::survival::incidence::{incidence, Ended};
/// let runs = [(1.0, Some(0)), (2.0, Some(1)), (3.0, None), (4.0, Some(0))].map(|(time, cause)| Ended { time, cause });
/// let last = incidence(&runs, 2).pop().unwrap();
/// assert!((last.ended[0] - 0.75).abs() < 1e-12 && (last.ended[1] - 0.25).abs() < 1e-12);
/// ```
#[must_use]
pub fn incidence(units: &[Ended], causes: usize) -> Vec<Incidence> {
    let cause_of = |u: &Ended| u.cause.filter(|c| *c < causes);
    let mut times: Vec<f64> = units.iter().filter(|u| cause_of(u).is_some()).map(|u| u.time).collect();
    times.sort_by(f64::total_cmp);
    times.dedup_by(|a, b| a.total_cmp(b).is_eq());
    let (mut going, mut ended) = (1.0, vec![0.0; causes]);
    times
        .into_iter()
        .map(|time| {
            let at_risk = units.iter().filter(|u| u.time >= time).count() as f64;
            let before = going;
            for unit in units.iter().filter(|u| u.time.total_cmp(&time).is_eq()) {
                if let Some(cause) = cause_of(unit) {
                    ended[cause] += before / at_risk;
                    going -= before / at_risk;
                }
            }
            Incidence { time, going: going.max(0.0), ended: ended.clone() }
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::stats::survival::{Follow, kaplan_meier::Curve};
    use approx::assert_abs_diff_eq;

    #[test]
    fn shares_add_up_and_one_cause_is_kaplan_meier() {
        let units: Vec<Ended> = (0..20_usize)
            .map(|i| Ended { time: ((i * 7) % 11) as f64 + 1.0, cause: (i % 3 != 2).then_some(i % 2) })
            .collect();
        for row in incidence(&units, 2) {
            assert_abs_diff_eq!(row.going + row.ended.iter().sum::<f64>(), 1.0, epsilon = 1e-12);
        }
        let single: Vec<Ended> = units.iter().map(|u| Ended { cause: u.cause.map(|_| 0), ..*u }).collect();
        let curve =
            Curve::of(&units.iter().map(|u| Follow { time: u.time, event: u.cause.is_some() }).collect::<Vec<_>>());
        for (row, step) in incidence(&single, 1).iter().zip(&curve.steps) {
            assert_abs_diff_eq!(row.going, step.survival, epsilon = 1e-12);
        }
    }

    #[test]
    fn nothing_ended() {
        assert!(incidence(&[Ended { time: 1.0, cause: None }], 2).is_empty());
    }
}
