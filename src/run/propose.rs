//! What the pictures themselves suggest for `run.toml`: the two electrode edges, darker or brighter, how
//! many frames are bare. Method: an electrode is a band along one side of the picture, so its edge is the
//! steepest step of the mean profile near that side; growth is what changes between the first frame and a
//! later one beyond the noise (median absolute deviation). Rough by design: a person confirms each. Limit: edges are
//! taken as straight and upright or level; drift between the frames can fake changes.

use ndarray::{Array2, Axis};

use super::block::block_mean;

/// Share of the picture on either side in which an electrode is looked for (common practice).
const SIDE: f64 = 0.35;

/// Steps of the profile below this many deviations of all steps are no edge (common practice).
const CLEAR: f64 = 6.0;

/// Changes of a pixel above this many deviations count (common practice).
const CHANGED: f64 = 4.5;

/// Makes the median absolute deviation estimate the SD of normal data. Rousseeuw & Croux (1993), J. Am. Stat. Assoc. 88, 1273.
const MAD_TO_SD: f64 = 1.482_602_218_505_602;

/// A straight edge across the picture.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct ProposedEdge {
    /// Its two ends, px.
    pub(super) ends: [[f64; 2]; 2],
    /// Whether a clear step was found there; else it is the picture's side.
    pub(super) clear: bool,
}

/// The two edges: the plating edge first as far as growth tells it, and whether it does.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct ProposedEdges {
    pub(super) plating: ProposedEdge,
    pub(super) far: ProposedEdge,
    /// Whether growth told the plating edge from the far one.
    pub(super) told_apart: bool,
}

/// What grew between the first frame and a later one.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Change {
    /// Share of pixels that became darker.
    pub(super) darker: f64,
    /// Share of pixels that became brighter.
    pub(super) brighter: f64,
    /// Centre of the changed pixels of the commoner sign, px.
    pub(super) centre: Option<[f64; 2]>,
}

impl Change {
    /// Whether the change has one sign: growth. Drift and flicker change pixels both ways.
    pub(super) fn told(&self) -> bool {
        /// Least share of pixels, and least ratio of the commoner to the rarer way (both found on synthetic runs).
        const SHARE: f64 = 4e-3;
        const ONE_SIDED: f64 = 3.0;
        self.share() >= SHARE && self.share() >= ONE_SIDED * self.darker.min(self.brighter)
    }

    /// Share of pixels that changed the commoner way.
    pub(super) fn share(&self) -> f64 {
        self.darker.max(self.brighter)
    }
}

/// Compares two frames of one size.
pub(super) fn change(first: &Array2<f32>, later: &Array2<f32>) -> Change {
    let ratio: Vec<f64> = first.iter().zip(later).map(|(a, b)| f64::from(*b) / f64::from(a.max(1.0))).collect();
    let middle = median(ratio.clone());
    let deviation = MAD_TO_SD * median(ratio.iter().map(|value| (value - middle).abs()).collect());
    // One part in a thousand: a floor for noiseless pictures.
    let bound = CHANGED * deviation.max(1e-3 * middle.abs());
    let width = first.ncols();
    let mut sums = [(0.0, 0.0, 0.0); 2];
    for (at, value) in ratio.iter().enumerate() {
        let sign = usize::from(*value > middle);
        if (value - middle).abs() > bound {
            let sum = &mut sums[sign];
            *sum = (sum.0 + 1.0, sum.1 + as_f64(at % width), sum.2 + as_f64(at / width));
        }
    }
    let all = as_f64(ratio.len());
    let most = if sums[1].0 > sums[0].0 { sums[1] } else { sums[0] };
    Change {
        darker: sums[0].0 / all,
        brighter: sums[1].0 / all,
        centre: (most.0 > 0.0).then(|| [most.1 / most.0, most.2 / most.0]),
    }
}

/// Proposes both edges on a frame. `grown`: centre of what grew, which lies nearer to the plating edge.
pub(super) fn edges(frame: &Array2<f32>, grown: Option<[f64; 2]>) -> ProposedEdges {
    let (height, width) = frame.dim();
    let across = steps(&mean_profile(frame, Axis(0)));
    let down = steps(&mean_profile(frame, Axis(1)));
    let upright = weaker(&across) >= weaker(&down);
    let (found, size, length) = if upright { (across, width, height) } else { (down, height, width) };
    let edge = |step: Option<Step>, side: f64| {
        let clear = step.is_some_and(|step| step.strength >= CLEAR);
        let at = step.filter(|_| clear).map_or(side, |step| step.at);
        let end = as_f64(length.saturating_sub(1));
        let ends = if upright { [[at, 0.0], [at, end]] } else { [[0.0, at], [end, at]] };
        ProposedEdge { ends, clear }
    };
    let last = as_f64(size.saturating_sub(1));
    let (low, high) = (edge(found[0], 0.0), edge(found[1], last));
    let place = grown.map(|centre| if upright { centre[0] } else { centre[1] });
    let place_of = |edge: &ProposedEdge| {
        if upright { edge.ends[0][0] } else { edge.ends[0][1] }
    };
    let middle = 0.5 * (place_of(&low) + place_of(&high));
    let swapped = place.is_some_and(|place| place > middle);
    let (plating, far) = if swapped { (high, low) } else { (low, high) };
    ProposedEdges { plating, far, told_apart: place.is_some() }
}

/// A step of a profile: where, and how strong against the profile's other steps.
#[derive(Debug, Clone, Copy)]
struct Step {
    at: f64,
    strength: f64,
}

fn weaker(steps: &[Option<Step>; 2]) -> f64 {
    steps.iter().map(|step| step.map_or(0.0, |step| step.strength)).fold(f64::INFINITY, f64::min)
}

fn mean_profile(frame: &Array2<f32>, along: Axis) -> Vec<f64> {
    let mean = frame.mean_axis(along);
    mean.map_or_else(Vec::new, |profile| profile.iter().map(|value| f64::from(*value)).collect())
}

/// The strongest step near either end of a profile.
fn steps(profile: &[f64]) -> [Option<Step>; 2] {
    let size = profile.len();
    // Half-width of the step filter: 1 % of the picture, at least 2 px.
    let half = (size / 100).max(2);
    if size < 4 * half {
        return [None, None];
    }
    let mean = |from: usize, to: usize| profile[from..to].iter().sum::<f64>() / as_f64(to - from);
    let places: Vec<usize> = (half..=size - half).collect();
    let step: Vec<f64> = places.iter().map(|at| (mean(*at, at + half) - mean(at - half, *at)).abs()).collect();
    let noise = MAD_TO_SD * median(step.clone());
    let side = floor(SIDE * as_f64(size));
    let strongest = |from: usize, to: usize| {
        let inside = places.iter().zip(&step).filter(|(at, _)| (from..to).contains(*at));
        let best = inside.max_by(|a, b| a.1.total_cmp(b.1))?;
        // The step lies between two pixels.
        Some(Step { at: as_f64(*best.0) - 0.5, strength: best.1 / noise.max(f64::MIN_POSITIVE) })
    };
    [strongest(0, side), strongest(size - side, size + 1)]
}

/// How many leading frames show no growth yet against the first. `shares`: what changed in each frame.
pub(super) fn bare(shares: &[f64]) -> usize {
    /// Share of pixels whose change counts as growth: one in a thousand (common practice).
    const GROWN: f64 = 1e-3;
    /// More bare frames bring little.
    const MOST: usize = 10;
    let settled = shares.get(1).copied().unwrap_or(0.0);
    let grown = shares.iter().position(|share| *share > settled + GROWN);
    grown.unwrap_or(shares.len()).clamp(1, MOST)
}

/// The frame shrunk by whole pixels, and the factor: proposals stay quick, and noise is averaged out.
pub(super) fn shrunk(frame: &Array2<f32>) -> (Array2<f32>, usize) {
    /// Longest side that is looked at, px.
    const SIDE: usize = 1024;
    /// Least factor: thin lines survive it, pixel noise is halved.
    const LEAST: usize = 2;
    let (height, width) = frame.dim();
    let factor = height.max(width).div_ceil(SIDE).max(LEAST);
    let shape = ((height / factor).max(1), (width / factor).max(1));
    let cell = |(row, column): (usize, usize)| {
        let (top, left) = (row * factor, column * factor);
        block_mean(frame, top..top + factor, left..left + factor)
    };
    (Array2::from_shape_fn(shape, cell), factor)
}

fn median(mut values: Vec<f64>) -> f64 {
    if values.is_empty() {
        return 0.0;
    }
    let middle = values.len() / 2;
    *values.select_nth_unstable_by(middle, f64::total_cmp).1
}

#[expect(clippy::cast_precision_loss, reason = "picture sizes are far below 2^53")]
fn as_f64(size: usize) -> f64 {
    size as f64
}

#[expect(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "the cast saturates; the value is a place in a profile"
)]
fn floor(value: f64) -> usize {
    value as usize
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Two dark bands, a fixed pattern of noise, and a dark line that has grown to `depth` px from the left band.
    fn frame(depth: usize) -> Array2<f32> {
        Array2::from_shape_fn((120, 200), |(row, column)| {
            let noise = f32::from(u8::try_from((row * 37 + column * 91 + row * column) % 7).unwrap());
            let band = if !(20..185).contains(&column) { -60.0 } else { 0.0 };
            let line = if (60..63).contains(&row) && (20..20 + depth).contains(&column) { -50.0 } else { 0.0 };
            150.0 + noise + band + line
        })
    }

    #[test]
    fn bands_and_growth_are_found() {
        let change = change(&frame(0), &frame(60));
        assert!(change.darker > 20.0 * change.brighter.max(1e-5));
        let edges = edges(&frame(0), change.centre);
        assert!(edges.plating.clear && edges.far.clear && edges.told_apart);
        assert!((edges.plating.ends[0][0] - 19.5).abs() <= 1.0, "{edges:?}");
        assert!((edges.far.ends[0][0] - 184.5).abs() <= 1.0, "{edges:?}");
        // Turned by 180° the plating edge is on the right, turned by 90° it lies level.
        let mut turned = frame(0);
        turned.invert_axis(Axis(1));
        assert!((super::edges(&turned, Some([150.0, 60.0])).plating.ends[0][0] - 179.5).abs() <= 1.0);
        let level = super::edges(&frame(0).t().to_owned(), Some([60.0, 40.0]));
        assert!((level.plating.ends[1][1] - 19.5).abs() <= 1.0 && level.plating.ends[1][0] > 100.0, "{level:?}");
    }

    #[test]
    fn no_band_gives_the_sides_and_says_so() {
        let plain = Array2::from_shape_fn((80, 90), |(row, column)| {
            f32::from(u8::try_from((row * 37 + column * 91 + row * column) % 7).unwrap())
        });
        let edges = edges(&plain, None);
        assert!(!edges.told_apart);
        assert!(!edges.plating.clear || !edges.far.clear);
    }

    #[test]
    fn bare_frames_end_where_growth_begins() {
        assert_eq!(bare(&[0.0, 0.0001, 0.0001, 0.002, 0.004]), 3);
        assert_eq!(bare(&[0.0; 40]), 10);
        assert_eq!(bare(&[]), 1);
    }
}
