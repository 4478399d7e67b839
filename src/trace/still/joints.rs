//! Straight lines from one border of the picture to the opposite one: joints, panel edges, rulings, cables. Nothing that
//! grows is as straight over a whole picture, and filaments end at the electrodes, not at the picture's border.
//!
//! Method: Hough transform (Duda & Hart 1972, Comm. ACM 15, 11–15) of crest pixels, each voting only for directions
//! near its own; a line counts when crest covers at least half of it and parts of both its ends.
//! Limit: lines within 27° of the rows or columns only; a joint that bends by more than a few px stays.

use ndarray::Array2;

use super::evidence::{Evidence, ORIENTATIONS};

/// Width of a vote, px.
const BIN: f64 = 2.0;
/// Greatest slope against the rows or columns.
const STEEPEST: f64 = 0.5;
/// Share of the line that crest must cover.
const COVERED: f64 = 0.5;
/// Share of the line that counts as an end, and the share of it to be covered.
const END: f64 = 0.12;
/// Share of an end to be covered.
const END_COVERED: f64 = 0.3;
/// Distance from the line within which crest belongs to it, px, and in scales of the crest.
const NEAR: f64 = 3.0;
/// In scales of the crest.
const NEAR_SCALES: f64 = 1.0;
/// Evidence from which a crest pixel votes.
const FIRM: f32 = 2.5;
/// Greatest number of joints looked for in each direction.
const MOST: usize = 24;

/// Takes the crest pixels of joints out of `crest`.
pub(crate) fn remove(crest: &mut Array2<bool>, evidence: &Evidence) {
    for across in [false, true] {
        for _ in 0..MOST {
            let pixels = Family { across }.pixels(crest, evidence);
            let Some(joint) = Family { across }.strongest(&pixels, crest.dim()) else { break };
            pixels.iter().filter(|p| joint.holds(p)).for_each(|p| crest[p.at] = false);
        }
    }
}

/// Lines that run from top to bottom, or from left to right (`across`).
#[derive(Clone, Copy)]
struct Family {
    across: bool,
}

/// A crest pixel in the family's coordinates: `t` along the picture, `u` across it.
struct Pixel {
    at: [usize; 2],
    t: f64,
    u: f64,
    slope: f64,
    sigma: f64,
    firm: bool,
}

/// The line u = u0 + slope · t.
struct Joint {
    u0: f64,
    slope: f64,
}

impl Joint {
    fn holds(&self, p: &Pixel) -> bool {
        let off = (p.u - self.u0 - self.slope * p.t).abs();
        off <= NEAR.max(NEAR_SCALES * p.sigma) && (p.slope - self.slope).abs() <= 2.0 * step()
    }
}

/// Slope between neighbouring orientations.
fn step() -> f64 {
    std::f64::consts::PI / ORIENTATIONS as f64
}

impl Family {
    fn pixels(self, crest: &Array2<bool>, evidence: &Evidence) -> Vec<Pixel> {
        let on = crest.indexed_iter().filter(|(_, on)| **on);
        on.filter_map(|((row, column), _)| {
            let at = [row, column];
            let angle = f64::from(evidence.angle[at]) * step();
            let (s, c) = (libm::sin(angle), libm::cos(angle));
            let (t, u, slope) =
                if self.across { (column as f64, row as f64, s / c) } else { (row as f64, column as f64, c / s) };
            let sigma = f64::from(evidence.sigma[at]);
            (slope.abs() <= STEEPEST + step()).then_some(Pixel { at, t, u, slope, sigma, firm: evidence.z[at] >= FIRM })
        })
        .collect()
    }

    /// The line with most votes that is covered as a joint is.
    fn strongest(self, pixels: &[Pixel], shape: (usize, usize)) -> Option<Joint> {
        let (length, width) = if self.across { (shape.1, shape.0) } else { (shape.0, shape.1) };
        let length = length as f64;
        let slopes = (2.0 * STEEPEST * length / BIN).ceil() as usize + 1;
        let slope_of = |k: usize| -STEEPEST + k as f64 * BIN / length;
        let room = STEEPEST * length;
        let bins = ((width as f64 + 2.0 * room) / BIN).ceil() as usize + 1;
        let mut votes = Array2::<u16>::zeros((slopes, bins));
        for p in pixels.iter().filter(|p| p.firm) {
            let first = ((p.slope - step() + STEEPEST) * length / BIN).ceil().max(0.0) as usize;
            let last = ((p.slope + step() + STEEPEST) * length / BIN).floor();
            for k in first..slopes.min((last + 1.0).max(0.0) as usize) {
                let bin = ((p.u - slope_of(k) * p.t + room) / BIN).round();
                if bin >= 0.0 && (bin as usize) < bins {
                    votes[[k, bin as usize]] += 1;
                }
            }
        }
        let wanted = COVERED * length / 2.0;
        let mut best: Vec<(u16, usize, usize)> =
            votes.indexed_iter().filter(|(_, v)| f64::from(**v) >= wanted).map(|((k, bin), v)| (*v, k, bin)).collect();
        best.sort_unstable_by(|a, b| b.cmp(a));
        best.truncate(200);
        let joints = best.iter().map(|&(_, k, bin)| Joint { u0: bin as f64 * BIN - room, slope: slope_of(k) });
        joints.into_iter().find(|joint| covered(joint, pixels, length as usize))
    }
}

/// Whether crest covers enough of a line and of both its ends.
fn covered(joint: &Joint, pixels: &[Pixel], length: usize) -> bool {
    let mut met = vec![false; length];
    for p in pixels.iter().filter(|p| p.firm && joint.holds(p)) {
        met[p.t as usize] = true;
    }
    let share = |part: &[bool]| part.iter().filter(|m| **m).count() as f64 / part.len().max(1) as f64;
    let end = ((END * length as f64) as usize).max(1);
    share(&met) >= COVERED && share(&met[..end]) >= END_COVERED && share(&met[length - end..]) >= END_COVERED
}
