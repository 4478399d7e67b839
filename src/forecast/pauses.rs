//! Whether a filament that stands will go on: judged against its own earlier pauses.
//! Method: a pause is a stretch in which the depth gained no more than the measurement can invent and far less than its own
//! earlier pace would give. The longer the present one is against the longest before, the smaller the chance of growth.
//! Limits: a filament that has never paused tells nothing about its pauses; a few frames are then always allowed.

use super::{Record, TipSeries};

/// Gain within a pause that measurement can invent, in standard uncertainties of a depth.
const INVENTED: f64 = 2.5;
/// Share of the earlier pace below which growth counts as standing (growth along the plates still creeps).
const CREEP: f64 = 0.15;
/// Usual gain, in parts of what measurement can invent, from which a smaller one tells of a pause.
const RESOLVED: f64 = 1.5;
/// Frames that any filament may stand before it is in doubt.
const ALLOWED_FRAMES: f64 = 6.0;
/// The same in parts of the longest earlier pause.
const ALLOWED_PARTS: f64 = 1.7;
/// How steeply doubt becomes near certainty: chance = 1/(1 + (stood/allowed)^STEEPNESS).
const STEEPNESS: f64 = 6.0;

/// Chance that the filament still grows.
pub(crate) fn growing(record: &Record, tip: &TipSeries) -> f64 {
    let times = &record.times_s[tip.first..];
    let last = times.len() - 1;
    if last < 2 {
        return 1.0;
    }
    let frame = (times[last] - times[0]) / last as f64;
    let onset = times[0] - frame;
    let stood = standing(times, tip, last, onset);
    let start = times[last] - stood;
    let longest = (1..last).filter(|&k| times[k] < start).map(|k| standing(times, tip, k, onset)).fold(0.0, f64::max);
    let allowed = (ALLOWED_FRAMES * frame).max(ALLOWED_PARTS * longest);
    1.0 / (1.0 + libm::pow(stood / allowed, STEEPNESS))
}

/// How long the filament had stood at index `at`, s.
fn standing(times: &[f64], tip: &TipSeries, at: usize, onset: f64) -> f64 {
    let depth = &tip.depth_um;
    let mut from = at;
    for earlier in (0..at).rev() {
        let stood = times[at] - times[earlier];
        let usual = stood * depth[earlier] / (times[earlier] - onset);
        let invented = INVENTED * tip.u_depth_um[at].max(tip.u_depth_um[earlier]);
        let gained = depth[at] - depth[earlier];
        if gained > invented.max(CREEP * usual) {
            break;
        }
        // a small gain over a time too short to tell neither ends a pause nor makes one
        if gained <= 0.0 || usual > RESOLVED * invented {
            from = earlier;
        }
    }
    times[at] - times[from]
}
