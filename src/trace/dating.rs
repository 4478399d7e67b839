//! When did each vertex arrive: how far had the strand come by each frame.
//!
//! Method: along a strand the metal arrives from the start to the tip, so in each frame the contrast
//! across the line is that of the filament up to the tip and nil beyond: a change point along the path.
//! The tip positions of all frames in the window are found together, as the sequence that never falls
//! and has the greatest likelihood (dynamic programming; Viterbi 1967, IEEE Trans. Inf. Theory 13, 260–269).
//! A frame that its neighbours deny thus claims nothing.
//! Limit: the first frame of the window takes the blame for all that is older.

use ndarray::Array2;

use super::centreline::sample;
use super::forest::Owners;
use super::recent::Corrected;

/// Half width of the core of clear ink that is read, in widths: narrow, so that the end of a round or tapered tip is
/// where its middle line ends.
const CORE: f64 = 0.25;
/// Its least half width, px.
const LEAST_CORE: f64 = 0.6;
/// Its greatest, px.
const MOST_CORE: f64 = 1.25;
/// Contrast over pixel noise above which a narrow core is enough.
const CLEAR: f64 = 6.0;
/// And below which all of the ink is read.
const FAINT: f64 = 2.5;

/// Half width of the core to be read for ink of full width `width` whose contrast is `clarity` times a pixel's noise:
/// narrow where it is clear, all of it where it is faint.
#[must_use]
pub(crate) fn core_of(width: f64, clarity: f64) -> f64 {
    let narrow = (CORE * width).clamp(LEAST_CORE, MOST_CORE);
    let share = ((CLEAR - clarity) / (CLEAR - FAINT)).clamp(0.0, 1.0);
    narrow + share * (0.5 * width - narrow).max(0.0)
}

/// Contrast at one vertex in one frame and its standard deviation.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Contrast {
    /// Mean over the ink less the mean beside it.
    pub value: f64,
    /// Standard deviation from pixel noise.
    pub sd: f64,
}

/// Contrast of a line of full width `width` at `p` with unit normal `n`: the mean across the core of the ink less
/// the mean of strips on those of both sides that are `free` of other ink. `None` where the frame does not cover them.
#[must_use]
pub(crate) fn contrast(
    frame: &Corrected,
    noise: &Array2<f32>,
    p: [f64; 2],
    n: [f64; 2],
    width: f64,
    core: f64,
    free: [bool; 2],
) -> Option<Contrast> {
    let half = core.min(0.5 * width - 0.25).max(0.5);
    let inside = strip(&frame.residual, p, n, -half, half)?;
    let (near, far) = strips(width);
    let sides = [strip(&frame.residual, p, n, near, far), strip(&frame.residual, p, n, -far, -near)];
    let known: Vec<(f64, f64)> = sides.into_iter().zip(free).filter(|s| s.1).filter_map(|s| s.0).collect();
    if known.is_empty() {
        return None;
    }
    let beside = known.iter().map(|k| k.0).sum::<f64>() / known.len() as f64;
    let sigma = f64::from(sample(noise, p[0], p[1])? * frame.noise_factor);
    let spread = 1.0 / inside.1 + 1.0 / (known.len() as f64 * known[0].1);
    Some(Contrast { value: inside.0 - beside, sd: sigma * spread.sqrt() })
}

/// On which sides of a line of full width `width` at `p` with unit normal `n` the strips of [`contrast`] lie outside the ink of
/// others; both where neither does.
#[must_use]
pub(crate) fn free_sides(owners: &Owners, strand: usize, p: [f64; 2], n: [f64; 2], width: f64) -> [bool; 2] {
    let (near, far) = strips(width);
    let free = [1.0, -1.0].map(|side| {
        [near, 0.5 * (near + far), far].iter().all(|o| {
            let at = [p[0] + side * o * n[0], p[1] + side * o * n[1]];
            let pixel = [at[1].round().max(0.0) as usize, at[0].round().max(0.0) as usize];
            owners.strand.get(pixel).is_none_or(|&s| s == 0 || s as usize == strand + 1)
        })
    });
    if free[0] || free[1] { free } else { [true, true] }
}

/// Offsets between which the strips beside a line of full width `width` lie, px.
fn strips(width: f64) -> (f64, f64) {
    (0.5 * width + 2.0, 0.5 * width + 5.5)
}

/// Mean of the plane between offsets `a` and `b` along the normal, and the number of pixels it is worth.
fn strip(plane: &Array2<f32>, p: [f64; 2], n: [f64; 2], a: f64, b: f64) -> Option<(f64, f64)> {
    let steps = ((b - a) / 0.75).ceil().max(1.0) as usize;
    let mut sum = 0.0;
    for k in 0..=steps {
        let o = a + (b - a) * k as f64 / steps as f64;
        sum += f64::from(sample(plane, p[0] + o * n[0], p[1] + o * n[1])?);
    }
    Some((sum / (steps + 1) as f64, (b - a).max(1.0)))
}

/// How far the strand had come by each frame: the number of vertices reached, never falling.
///
/// `rows[j][i]` is the contrast in frame j (oldest first) at vertex i, `None` where unknown; `height` is the
/// contrast of the filament. Where two sequences are equally likely the shorter one is taken.
#[must_use]
pub(crate) fn positions(rows: &[Vec<Option<Contrast>>], height: f64) -> Vec<usize> {
    let n = rows.first().map_or(0, Vec::len);
    let mut best = vec![0.0f64; n + 1];
    let mut came_from: Vec<Vec<usize>> = Vec::with_capacity(rows.len());
    for row in rows {
        let gain = cumulative_gain(row, height);
        let (mut top, mut top_at) = (f64::NEG_INFINITY, 0);
        let mut next = vec![0.0; n + 1];
        let mut from = vec![0; n + 1];
        for s in 0..=n {
            if best[s] > top {
                top = best[s];
                top_at = s;
            }
            next[s] = top + gain[s];
            from[s] = top_at;
        }
        best = next;
        came_from.push(from);
    }
    let mut s = (0..=n).fold(0, |a, b| if best[b] > best[a] { b } else { a });
    let mut out = vec![0; rows.len()];
    for j in (0..rows.len()).rev() {
        out[j] = s;
        s = came_from[j][s];
    }
    out
}

/// Log-likelihood ratio of "filament up to vertex s" against "bare", for s = 0..=n.
fn cumulative_gain(row: &[Option<Contrast>], height: f64) -> Vec<f64> {
    let mut total = 0.0;
    let mut out = vec![0.0];
    for c in row {
        if let Some(c) = c.filter(|c| c.sd > 0.0) {
            // One wild vertex may not outweigh its neighbours.
            let value = c.value.clamp(-height, 2.0 * height);
            total += height * (value - 0.5 * height) / (c.sd * c.sd);
        }
        out.push(total);
    }
    out
}

/// Evidence of a stretch of vertices in one frame, in standard deviations: the sum of contrasts over
/// its own standard deviation, neighbours counted as sharing `share` px of noise.
#[must_use]
pub(crate) fn strength(row: &[Option<Contrast>], share: f64) -> f64 {
    let known: Vec<&Contrast> = row.iter().flatten().collect();
    let sum: f64 = known.iter().map(|c| c.value).sum();
    let power: f64 = known.iter().map(|c| c.sd * c.sd).sum();
    if power > 0.0 { sum / (power * share).sqrt() } else { 0.0 }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn row(values: &[f64]) -> Vec<Option<Contrast>> {
        values.iter().map(|&value| Some(Contrast { value, sd: 0.3 })).collect()
    }

    #[test]
    fn the_tip_of_each_frame_is_found() {
        let rows = [row(&[1.0, 0.0, 0.1, 0.0]), row(&[1.0, 0.9, 0.1, 0.0]), row(&[1.0, 1.1, 0.9, 0.8])];
        assert_eq!(positions(&rows, 1.0), [1, 2, 4]);
    }

    #[test]
    fn a_frame_that_its_neighbours_deny_claims_nothing() {
        let rows = [
            row(&[1.0, 0.0, 0.0, 0.0]),
            row(&[1.0, 1.0, 1.0, 1.0]),
            row(&[1.0, 0.0, 0.0, 0.0]),
            row(&[1.0, 0.0, 0.0, 0.0]),
        ];
        assert_eq!(positions(&rows, 1.0), [1, 1, 1, 1]);
    }

    #[test]
    fn a_root_that_fades_in_one_frame_does_not_cut_the_filament() {
        let rows = [row(&[1.0, 1.0, 1.0, 0.0]), row(&[0.0, 0.1, 1.0, 1.0]), row(&[1.0, 1.0, 1.0, 1.0])];
        assert_eq!(positions(&rows, 1.0), [3, 4, 4]);
    }

    #[test]
    fn nothing_known_is_nothing_reached() {
        assert_eq!(positions(&[vec![None, None]], 1.0), [0]);
        assert!(positions(&[], 1.0).is_empty());
    }
}
