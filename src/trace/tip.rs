//! The shape of a run's tips: how far behind the end of the ink the centre-line ends.
//!
//! The centre-line ends at the centre of the last disc of full local width (contract of the depth). With h(x) the
//! half width of the ink at distance x behind its end, that centre lies at the x beyond which h(x) ≤ x: half a width for
//! a round end, less for one that tapers. h is read off the mean of a strand's tips so far, laid on each other by the
//! end of their ink and scaled by its half width; a strand of which too little was seen takes the mean of all tips of the run.

use ndarray::Array2;

use super::centreline::sample;

/// Steps of the scaled picture along and across.
const STEPS: usize = 17;
/// Step, half widths.
const STEP: f64 = 0.125;
/// Share of the half width for a round end, used until enough tips were seen.
pub(crate) const ROUND: f64 = 1.0;
/// Half widths from half of the full width to 85 % of it up to which an end is round, blur and noise included, and
const ROUND_RISE: f64 = 0.45;
/// from which on it is a cone; both chosen by hand between round ends (0.34) and cones of synthetic runs, no source.
const CONE: f64 = 0.8;
/// Rows of the picture that must be known.
const LEAST_ROWS: usize = 12;
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
    /// Adds a tip: `line` holds positions and normals behind the end of its ink, nearest first, `spacing` px apart;
    /// `width` and `contrast` are the strand's.
    pub(crate) fn add(
        &mut self,
        plane: &Array2<f32>,
        line: &[([f64; 2], [f64; 2])],
        spacing: f64,
        width: f64,
        contrast: f64,
    ) {
        let half = 0.5 * width;
        for row in 0..STEPS {
            let at = row as f64 * STEP * half / spacing;
            let (i, t) = (at.floor() as usize, at.fract());
            let (Some((p, n)), Some((q, _))) = (line.get(i), line.get(i + 1)) else { break };
            let p = [p[0] + t * (q[0] - p[0]), p[1] + t * (q[1] - p[1])];
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

    /// Distance of the centre-line's end behind that of the ink, in half widths of the strand; `None` where too little
    /// was seen.
    #[must_use]
    pub(crate) fn setback(&self) -> Option<f64> {
        let known: Vec<(f64, f64)> =
            (0..STEPS).filter_map(|row| self.half_width(row).map(|h| (row as f64 * STEP, h))).collect();
        if known.len() < LEAST_ROWS {
            return None;
        }
        let beyond = known.iter().rev().take_while(|(x, h)| h <= x).last();
        let round = beyond.map_or(ROUND, |(x, _)| x.min(ROUND));
        Some(round * self.roundness())
    }

    /// 1 for an end that gets to its full width as fast as a round one, 0 for a cone, whose tip is its own last disc. Behind a
    /// round end it takes 0.34 half widths from half of the full width to 85 %.
    fn roundness(&self) -> f64 {
        let reaches = |share: f64| (0..STEPS).find(|&row| self.half_width(row).is_some_and(|h| h >= share));
        match (reaches(0.5), reaches(0.85)) {
            (Some(a), Some(b)) => ((CONE - (b as f64 - a as f64) * STEP) / (CONE - ROUND_RISE)).clamp(0.0, 1.0),
            (Some(_), None) => 0.0,
            _ => 1.0,
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
        let line: Vec<_> = (0..40).map(|k| ([30.0 - 0.5 * f64::from(k), 20.0], [0.0, 1.0])).collect();
        let mut shape = TipShape::default();
        (0..20).for_each(|_| shape.add(&plane, &line, 0.5, 8.0, 1.0));
        shape
    }

    #[test]
    fn a_round_end_sets_back_by_half_a_width() {
        let round = drawn(|d| if d < 4.0 { (16.0 - (4.0 - d).powi(2)).max(0.0).sqrt() } else { 4.0 });
        let setback = round.setback().unwrap();
        assert!((setback - 1.0).abs() <= 0.13, "{setback}");
    }

    #[test]
    fn a_tapered_end_sets_back_by_less() {
        let cone = drawn(|d| (d / 3.0).min(4.0));
        assert!(cone.setback().unwrap() < 0.1);
    }

    #[test]
    fn nothing_seen_says_nothing() {
        assert_eq!(TipShape::default().setback(), None);
    }
}
