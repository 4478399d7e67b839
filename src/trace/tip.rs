//! The shape of a run's tips: how far behind the end of the ink the centre-line ends.
//!
//! The centre-line ends at the centre of the last disc of full local width (contract of the depth). With h(x) the
//! half width of the ink at distance x behind its end, that centre lies at the x beyond which h(x) ≤ x: half a width for
//! a round end, less for one that tapers. h is read off the mean of all tips seen so far, laid on each other by the
//! end of their ink and scaled by the half width of their strand: growing tips of one run are alike.

use ndarray::Array2;

use super::centreline::sample;

/// Steps of the scaled picture along and across.
const STEPS: usize = 17;
/// Step, half widths.
const STEP: f64 = 0.125;
/// Share of the half width for a round end, used until enough tips were seen.
const ROUND: f64 = 1.0;
/// Half widths from half of the full width to 85 % of it beyond which an end tapers; chosen by hand between a round end
/// (0.34) and the long cones of synthetic runs, no source.
const TAPER: f64 = 0.8;
/// Samples of a cell before the picture is trusted.
const LEAST_SEEN: f32 = 10.0;
/// Share of full contrast at the boundary of the ink.
const BOUNDARY: f32 = 0.5;

/// Mean picture of the tips of a run.
#[derive(Debug, Clone)]
pub(crate) struct TipShape {
    sum: Array2<f32>,
    seen: Array2<f32>,
}

impl Default for TipShape {
    fn default() -> Self {
        Self { sum: Array2::zeros((STEPS, STEPS)), seen: Array2::zeros((STEPS, STEPS)) }
    }
}

impl TipShape {
    /// Adds a tip: `line` holds positions and normals behind the end of its ink, nearest first, with their distance
    /// from it; `width` and `contrast` are the strand's.
    pub(crate) fn add(&mut self, plane: &Array2<f32>, line: &[(f64, [f64; 2], [f64; 2])], width: f64, contrast: f64) {
        let half = 0.5 * width;
        for (distance, p, n) in line {
            let row = (distance / half / STEP).round() as usize;
            if row >= STEPS {
                break;
            }
            for col in 0..STEPS {
                let o = col as f64 * STEP * half;
                for side in [-o, o] {
                    if let Some(v) = sample(plane, p[0] + side * n[0], p[1] + side * n[1]) {
                        self.sum[[row, col]] += (f64::from(v) / contrast) as f32;
                        self.seen[[row, col]] += 1.0;
                    }
                }
            }
        }
    }

    /// Distance of the centre-line's end behind that of the ink, in half widths of the strand.
    #[must_use]
    pub(crate) fn setback(&self) -> f64 {
        if self.tapers() {
            return 0.0;
        }
        let mut setback = (STEPS - 1) as f64 * STEP;
        for row in (0..STEPS).rev() {
            let x = row as f64 * STEP;
            match self.half_width(row) {
                None => return ROUND,
                Some(h) if h > x => break,
                Some(_) => setback = x,
            }
        }
        setback.min(ROUND)
    }

    /// Whether the ink gets to its full width much more slowly than behind a round end: there it takes 0.34 half widths
    /// from half of it to 85 %. The tip of such a cone is its own last disc.
    fn tapers(&self) -> bool {
        let reaches = |share: f64| (0..STEPS).find(|&row| self.half_width(row).is_some_and(|h| h >= share));
        match (reaches(0.5), reaches(0.85)) {
            (Some(a), Some(b)) => (b as f64 - a as f64) * STEP > TAPER,
            (Some(_), None) => self.half_width(STEPS - 1).is_some(),
            _ => false,
        }
    }

    /// Half width of the ink in half widths of the strand, `None` where too little was seen.
    fn half_width(&self, row: usize) -> Option<f64> {
        let mut before = 1.0f32;
        for col in 0..STEPS {
            if self.seen[[row, col]] < LEAST_SEEN {
                return None;
            }
            let value = self.sum[[row, col]] / self.seen[[row, col]];
            if value <= BOUNDARY {
                let t = if before > value { (before - BOUNDARY) / (before - value) } else { 1.0 };
                return Some(((col as f64 - 1.0 + f64::from(t)) * STEP).max(0.0));
            }
            before = value;
        }
        Some(STEPS as f64 * STEP)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A strand along x that ends at x = 30 with the half width given by `half(distance behind the end)`.
    fn drawn(half: impl Fn(f64) -> f64) -> TipShape {
        let plane = Array2::from_shape_fn((41, 60), |(row, col)| {
            let (mut inside, n) = (0, 8);
            for i in 0..n {
                for j in 0..n {
                    let x = col as f64 + (i as f64 + 0.5) / n as f64 - 0.5;
                    let y = row as f64 + (j as f64 + 0.5) / n as f64 - 0.5;
                    inside += usize::from(x <= 30.0 && (y - 20.0).abs() <= half(30.0 - x));
                }
            }
            inside as f32 / (n * n) as f32
        });
        let line: Vec<_> =
            (0..40).map(|k| (0.5 * f64::from(k), [30.0 - 0.5 * f64::from(k), 20.0], [0.0, 1.0])).collect();
        let mut shape = TipShape::default();
        (0..20).for_each(|_| shape.add(&plane, &line, 8.0, 1.0));
        shape
    }

    #[test]
    fn a_round_end_sets_back_by_half_a_width() {
        let round = drawn(|d| if d < 4.0 { (16.0 - (4.0 - d).powi(2)).max(0.0).sqrt() } else { 4.0 });
        assert!((round.setback() - 1.0).abs() <= 0.13, "{}", round.setback());
    }

    #[test]
    fn a_tapered_end_sets_back_by_less() {
        let cone = drawn(|d| (d / 3.0).min(4.0));
        assert!(cone.setback() < 0.1, "{}", cone.setback());
    }

    #[test]
    fn nothing_seen_is_taken_for_round() {
        assert!((TipShape::default().setback() - ROUND).abs() < 1e-12);
    }
}
