//! Growth histories drawn without frames, to measure the forecast over many runs.
//! Method: a common pace by one of the laws in `courses`, several filaments with their own onset, pace and gamma noise, depths read at frames
//! with measurement noise and never falling. Most laws share nothing with the forecast's own clock. All is invented; the ranges
//! are common practice.
//! Limits: filaments do not touch each other; a turn shows only in the depth it costs.

use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

use super::courses::{Course, FINE, exponential, normal};
pub use super::courses::{LAWS, Law, STRANGERS};
use super::{Record, TipSeries};

/// Leading frames before any growth.
const BARE: usize = 6;

/// One drawn run.
#[derive(Debug, Clone)]
pub struct History {
    /// Its law.
    pub law: Law,
    /// Frame times, s.
    pub times_s: Vec<f64>,
    /// Measured depths of each filament, as long as the run was watched.
    pub tips: Vec<TipSeries>,
    /// Distance of the edges, µm.
    pub gap_um: f64,
    /// Time of true first contact, s; `None` if growth ended before, or it never came while simulated
    /// (five times the watched time).
    pub contact_s: Option<f64>,
    /// Time at which growth ended for good, s.
    pub stalled_s: Option<f64>,
}

impl History {
    /// The record at frame `frame` when depths are decided `lag` frames late. `None` before two frames are decided and
    /// after the last.
    pub fn record_at(&self, frame: usize, lag: usize) -> Option<Record> {
        let known = (frame + 1).checked_sub(lag).filter(|&n| n >= 2 && frame < self.times_s.len())?;
        let cut = |tip: &TipSeries| {
            let n = known.saturating_sub(tip.first);
            TipSeries {
                filament: tip.filament,
                first: tip.first,
                depth_um: tip.depth_um[..n].to_vec(),
                u_depth_um: tip.u_depth_um[..n].to_vec(),
                remaining_um: tip.remaining_um[..n].to_vec(),
            }
        };
        Some(Record {
            times_s: self.times_s[..known].to_vec(),
            tips: self.tips.iter().filter(|tip| tip.first < known).map(cut).collect(),
            gap_um: self.gap_um,
            issued_at_s: self.times_s[frame],
            ..Record::default()
        })
    }

    /// Deepest measured depth at a frame, in parts of the gap.
    pub fn fraction_at(&self, frame: usize) -> f64 {
        let depths = self.tips.iter().filter(|tip| tip.first <= frame).map(|tip| tip.depth_um[frame - tip.first]);
        depths.fold(0.0, f64::max) / self.gap_um
    }
}

/// What the histories of a fleet have in common.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Fleet {
    /// Frames a run is watched at most.
    pub frames: usize,
    /// Growth noise in parts of the usual one: 0 none, 1 usual.
    pub roughness: f64,
    /// Seed; history i takes stream i.
    pub seed: u64,
}

/// Draws history `index` of a fleet, watched until contact or for `fleet.frames` frames.
///
/// # Examples
/// ```
/// use veerlog::forecast::histories::{draw, Fleet, Law};
/// let fleet = Fleet { frames: 40, roughness: 1.0, seed: 7 };
/// let run = draw(Law::Deflected, &fleet, 3);
/// assert!(run.times_s.len() <= 40 && !run.tips.is_empty());
/// assert_eq!(run.times_s, draw(Law::Deflected, &fleet, 3).times_s);
/// ```
pub fn draw(law: Law, fleet: &Fleet, index: u64) -> History {
    if STRANGERS.contains(&law) {
        return super::strangers::draw(law, fleet, index);
    }
    let Fleet { frames, roughness, seed } = *fleet;
    let mut rng = ChaCha8Rng::seed_from_u64(seed);
    rng.set_stream(index);
    let interval = 10.0 * libm::exp(1.5 * normal(&mut rng));
    let gap_um = rng.random_range(250.0..1500.0);
    let steps = 5 * frames * FINE;
    // the course crosses the gap, at pace 1, after this many frames of growth
    let nominal = (frames - BARE) as f64 * rng.random_range(0.6..1.0);
    let course = Course::draw(law, nominal, steps, roughness, &mut rng);
    let count = 1 + (4.0 * rng.random::<f64>() * rng.random::<f64>()) as usize;
    let blur = gap_um * rng.random_range(0.001..0.008);
    let grain = gap_um * 0.0005 * (roughness * roughness).max(1e-6) * libm::exp(rng.random_range(0.0..3.4));
    let spread = rng.random_range(0.1..0.4);
    let mut truths: Vec<Vec<f64>> = Vec::new();
    for number in 0..count {
        let late = if number == 0 { 0.0 } else { 0.25 * nominal * exponential(&mut rng) };
        let pace = if number == 0 { 1.0 } else { libm::exp(-0.2 + spread * normal(&mut rng)) };
        let start = (late * FINE as f64) as usize;
        truths.push(course.grow(start, pace * gap_um, grain, number == 0, &mut rng));
    }
    let bare = BARE as f64 + rng.random::<f64>();
    let offset = (bare * FINE as f64) as usize;
    let contact = truths.iter().filter_map(|depth| crossing(depth, gap_um)).fold(f64::INFINITY, f64::min);
    let time = |step: f64| interval * (step + offset as f64) / FINE as f64;
    // a contact by creep after the end of growth is not one that anybody waits for
    let contact_s = (contact.is_finite() && course.ends.is_none_or(|end| contact < end as f64)).then(|| time(contact));
    let watched = (0..frames).take_while(|&k| contact_s.is_none_or(|t| (k as f64) * interval < t)).count();
    let tips =
        truths.iter().enumerate().filter_map(|(k, depth)| seen(k, depth, offset, watched, gap_um, blur, &mut rng));
    History {
        law,
        times_s: (0..watched).map(|k| k as f64 * interval).collect(),
        tips: tips.collect(),
        gap_um,
        contact_s,
        stalled_s: course.ends.map(|step| time(step as f64)),
    }
}

/// Step (with its fraction) at which the depth first reaches the gap.
pub(super) fn crossing(depth: &[f64], gap: f64) -> Option<f64> {
    let at = depth.iter().position(|&d| d >= gap)?;
    let before = if at > 0 { depth[at - 1] } else { 0.0 };
    Some(at as f64 - 1.0 + (gap - before) / (depth[at] - before))
}

/// The measured series of one filament: noise, never falling, from the first frame at which it stands out.
pub(super) fn seen(
    number: usize,
    truth: &[f64],
    offset: usize,
    watched: usize,
    gap: f64,
    blur: f64,
    rng: &mut ChaCha8Rng,
) -> Option<TipSeries> {
    let mut tip = TipSeries { filament: number as u32 + 1, ..TipSeries::default() };
    let mut deepest = 0.0_f64;
    for frame in 0..watched {
        let depth = (frame * FINE).checked_sub(offset).and_then(|step| truth.get(step)).copied().unwrap_or(0.0);
        if depth <= 0.0 {
            continue;
        }
        deepest = deepest.max(depth + blur * normal(rng)).min(0.999 * gap);
        if tip.depth_um.is_empty() {
            if deepest < 3.0 * blur {
                continue;
            }
            tip.first = frame;
        }
        tip.depth_um.push(deepest);
        tip.u_depth_um.push(blur);
        tip.remaining_um.push(gap - deepest);
    }
    (!tip.depth_um.is_empty()).then_some(tip)
}
