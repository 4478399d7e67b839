//! Time to an end that some runs never reach: one idea a file.
//! Runs that were stopped or broke are censored ([`kaplan_meier`], [`logrank`], [`cox`]) or end otherwise ([`incidence`]).
//! Limit of all: censoring that has nothing to do with the time that was still to come.

pub mod cox;
pub mod incidence;
pub mod kaplan_meier;
pub mod logrank;

/// One unit followed from time 0.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Follow {
    /// Time of the event, or of the last look.
    pub time: f64,
    /// Whether the event came.
    pub event: bool,
}

/// Distinct event times, rising.
fn event_times(times: impl Iterator<Item = Follow>) -> Vec<f64> {
    let mut events: Vec<f64> = times.filter(|f| f.event).map(|f| f.time).collect();
    events.sort_by(f64::total_cmp);
    events.dedup_by(|a, b| a.total_cmp(b).is_eq());
    events
}

/// Whether the unit's event came at `time`.
fn falls_at(follow: Follow, time: f64) -> bool {
    follow.event && follow.time.total_cmp(&time).is_eq()
}
