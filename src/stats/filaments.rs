//! Which way did the filaments grow: axial summary of pieces, with the filament as the sampling unit.
//!
//! Alignment and its interval by [`super::clusters`]. Rayleigh and V p-values by Monte Carlo: under isotropy a filament may
//! as well have grown along any axis, so each filament's length-weighted doubled-angle vector gets an independent uniform
//! turn; correlation within a filament then does not matter (Besag & Clifford 1989, Biometrika 76, 633–642, for p = (1 + hits)/(1 + draws)).
//! Limit: these p-values describe anisotropy. Filaments cross the gap anyway; a small p is not an effect of the load.

use std::collections::BTreeMap;

use rand::RngExt;

use super::angles::{acute, doubled, expected_axis};
use super::axial::{AxialMean, weighted_axial_mean};
use super::bootstrap::stream;
use super::clusters::{Estimate, Total, bounded_mean, clustered_mean};

/// A piece of centre-line with one direction.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct AxialPiece {
    /// The filament it belongs to.
    pub filament: u32,
    /// Direction, degrees, axial.
    pub angle_deg: f64,
    /// Arc length, any unit, ≥ 0.
    pub weight: f64,
    /// Load axis in force while it grew, degrees; `None` without one.
    pub load_axis_deg: Option<f64>,
    /// Stress then in force, MPa, positive in compression; `None` without one.
    pub stress_mpa: Option<f64>,
}

impl AxialPiece {
    fn expected(&self) -> Option<f64> {
        expected_axis(self.load_axis_deg?, self.stress_mpa?)
    }
}

/// Draws of the random-turn p-values and their seed.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct TurnDraws {
    /// Number of draws; p is no finer than 1/(draws + 1).
    pub draws: u32,
    /// Seed.
    pub seed: u64,
}

impl Default for TurnDraws {
    fn default() -> Self {
        Self { draws: 1_999, seed: 0 }
    }
}

/// Axial statistics of one set of pieces.
#[derive(Debug, Clone, PartialEq)]
pub struct AxialSummary {
    /// Filaments with length.
    pub filaments: usize,
    /// Pieces.
    pub pieces: usize,
    /// Total arc length, unit of the weights.
    pub weight: f64,
    /// Mean axis in the image, resultant, concentration.
    pub mean: AxialMean,
    /// Mean of cos 2Δ to the load axis; `None` without an axis.
    pub alignment: Option<Estimate>,
    /// Mean acute angle to the load axis, degrees; `None` without an axis.
    pub angle_to_load_deg: Option<Estimate>,
    /// Mean of cos 2Δ to the *expected* axis (V over n); `None` without stress.
    pub alignment_to_expected: Option<Estimate>,
    /// p of no preferred axis in the image; `None` under two filaments (one vector is always as long as itself).
    pub rayleigh_p: Option<f64>,
    /// One-sided p of no preference for the expected axis; `None` without stress or under two filaments.
    pub v_p: Option<f64>,
}

/// The same, separately by sign of the stress. A set without pieces is `None`.
#[derive(Debug, Clone, PartialEq)]
pub struct BySign {
    /// All pieces.
    pub all: Option<AxialSummary>,
    /// Stress > 0 (compression).
    pub compressed: Option<AxialSummary>,
    /// Stress < 0 (tension).
    pub stretched: Option<AxialSummary>,
    /// Stress 0 or absent.
    pub unstressed: Option<AxialSummary>,
}

/// Summaries of all pieces and by sign of stress.
#[must_use]
pub fn by_sign(pieces: &[AxialPiece], turns: TurnDraws) -> BySign {
    let of = |keep: &dyn Fn(f64) -> bool| {
        let kept: Vec<AxialPiece> = pieces.iter().copied().filter(|p| keep(p.stress_mpa.unwrap_or(0.0))).collect();
        summarise(&kept, turns)
    };
    BySign {
        all: of(&|_| true),
        compressed: of(&|s| s > 0.0),
        stretched: of(&|s| s < 0.0),
        unstressed: of(&|s| s.abs() <= 0.0),
    }
}

/// Axial summary of pieces. `None` when they have no length. Pieces without a load axis count only where none is needed.
///
/// ```
/// use veerlog::stats::filaments::{summarise, AxialPiece, TurnDraws};
/// let pieces: Vec<AxialPiece> = (0..8)
///     .map(|f| AxialPiece {
///         filament: f,
///         angle_deg: 85.0 + f64::from(f % 4) * 4.0,
///         weight: 10.0,
///         load_axis_deg: Some(90.0),
///         stress_mpa: Some(150.0),
///     })
///     .collect();
/// let summary = summarise(&pieces, TurnDraws::default()).unwrap();
/// let alignment = summary.alignment.unwrap();
/// assert!(alignment.value > 0.95 && alignment.ci95.unwrap()[0] > 0.9);
/// assert!(summary.v_p.unwrap() < 0.01);
/// ```
#[must_use]
pub fn summarise(pieces: &[AxialPiece], turns: TurnDraws) -> Option<AxialSummary> {
    let kept: Vec<AxialPiece> = pieces.iter().copied().filter(|p| p.weight > 0.0).collect();
    let mean = weighted_axial_mean(kept.iter().map(|p| (p.angle_deg, p.weight)))?;
    let image = vectors(&kept, |p| Some(p.angle_deg));
    let expected = vectors(&kept, |p| p.expected().map(|axis| p.angle_deg - axis));
    let (rayleigh_p, _) = random_turns(&image, turns);
    let (_, v_p) = random_turns(&expected, turns);
    let cosine = |p: &AxialPiece, axis: f64| doubled(p.angle_deg - axis)[0];
    Some(AxialSummary {
        filaments: image.len(),
        pieces: kept.len(),
        weight: kept.iter().map(|p| p.weight).sum(),
        mean,
        alignment: bounded_mean(&totals(&kept, |p| p.load_axis_deg.map(|axis| cosine(p, axis)))),
        angle_to_load_deg: clustered_mean(&totals(&kept, |p| p.load_axis_deg.map(|axis| acute(p.angle_deg, axis))))
            .map(within_right_angle),
        alignment_to_expected: bounded_mean(&totals(&kept, |p| p.expected().map(|axis| cosine(p, axis)))),
        rayleigh_p,
        v_p,
    })
}

/// An interval of an acute angle ends at 0 and 90 degrees.
fn within_right_angle(estimate: Estimate) -> Estimate {
    Estimate { ci95: estimate.ci95.map(|ends| ends.map(|e| e.clamp(0.0, 90.0))), ..estimate }
}

/// Totals by filament of a value of each piece, in order of filament; pieces without the value are left out.
fn totals(pieces: &[AxialPiece], value: impl Fn(&AxialPiece) -> Option<f64>) -> Vec<Total> {
    let mut by_filament: BTreeMap<u32, Total> = BTreeMap::new();
    for piece in pieces {
        if let Some(v) = value(piece) {
            let total = by_filament.entry(piece.filament).or_default();
            total.weight += piece.weight;
            total.sum += piece.weight * v;
        }
    }
    by_filament.into_values().collect()
}

/// Length-weighted doubled-angle vector of each filament, in order of filament.
fn vectors(pieces: &[AxialPiece], angle: impl Fn(&AxialPiece) -> Option<f64>) -> Vec<[f64; 2]> {
    let mut by_filament: BTreeMap<u32, [f64; 2]> = BTreeMap::new();
    for piece in pieces {
        if let Some(a) = angle(piece) {
            let vector = by_filament.entry(piece.filament).or_default();
            let [c, s] = doubled(a);
            vector[0] += piece.weight * c;
            vector[1] += piece.weight * s;
        }
    }
    by_filament.into_values().collect()
}

/// Fewest filaments for a random-turn p-value.
const MIN_TURNED: usize = 2;
/// Sums that differ by less than this share are equal: rounding decides no test.
const SAME: f64 = 1e-12;

/// p of the resultant's length (Rayleigh) and, one-sided, of its first component (V), by turning every vector at random.
/// `None` under two vectors.
#[must_use]
pub fn random_turns(vectors: &[[f64; 2]], turns: TurnDraws) -> (Option<f64>, Option<f64>) {
    if vectors.len() < MIN_TURNED {
        return (None, None);
    }
    let lengths: Vec<f64> = vectors.iter().map(|v| libm::hypot(v[0], v[1])).collect();
    let slack = SAME * lengths.iter().sum::<f64>();
    let (c, s) = vectors.iter().fold((0.0, 0.0), |sum, v| (sum.0 + v[0], sum.1 + v[1]));
    let resultant = libm::hypot(c, s);
    let mut rng = stream(turns.seed, 0);
    let (mut longer, mut further) = (1_u32, 1_u32);
    for _ in 0..turns.draws {
        let (mut x, mut y) = (0.0, 0.0);
        for length in &lengths {
            let (sin, cos) = libm::sincos(std::f64::consts::TAU * rng.random::<f64>());
            x += length * cos;
            y += length * sin;
        }
        longer += u32::from(libm::hypot(x, y) >= resultant - slack);
        further += u32::from(x >= c - slack);
    }
    let share = |hits: u32| f64::from(hits) / f64::from(turns.draws + 1);
    (Some(share(longer)), Some(share(further)))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::stats::uniformity::{rayleigh_p, v_test};
    use approx::assert_abs_diff_eq;

    fn piece(filament: u32, angle_deg: f64, stress: f64) -> AxialPiece {
        AxialPiece { filament, angle_deg, weight: 1.0, load_axis_deg: Some(0.0), stress_mpa: Some(stress) }
    }

    #[test]
    fn one_piece_a_filament_is_the_classical_test() {
        let axes = [10.0, 40.0, 25.0, 60.0, 5.0, 80.0, 30.0];
        let pieces: Vec<AxialPiece> = axes.iter().zip(0..).map(|(&a, f)| piece(f, a, 100.0)).collect();
        let s = summarise(&pieces, TurnDraws { draws: 20_000, seed: 3 }).unwrap();
        // Four standard errors of a share of 20 000 draws.
        assert_abs_diff_eq!(s.rayleigh_p.unwrap(), rayleigh_p(7, s.mean.resultant), epsilon = 0.012);
        let v = v_test(&axes.map(|a| 2.0 * a), 0.0).unwrap();
        assert_abs_diff_eq!(s.v_p.unwrap(), v.p, epsilon = 0.02);
        assert_abs_diff_eq!(s.alignment_to_expected.unwrap().value, v.v / 7.0, epsilon = 1e-12);
    }

    #[test]
    fn cutting_a_filament_in_pieces_changes_nothing() {
        let whole: Vec<AxialPiece> = (0..6).map(|f| piece(f, 12.0 * f64::from(f), 50.0)).collect();
        let cut: Vec<AxialPiece> =
            whole.iter().flat_map(|p| [AxialPiece { weight: 0.25, ..*p }, AxialPiece { weight: 0.75, ..*p }]).collect();
        let (a, b) = (summarise(&whole, TurnDraws::default()).unwrap(), summarise(&cut, TurnDraws::default()).unwrap());
        assert_eq!(a.rayleigh_p, b.rayleigh_p);
        let ends = |s: &AxialSummary| s.alignment.unwrap().ci95.unwrap();
        assert_abs_diff_eq!(ends(&a)[0], ends(&b)[0], epsilon = 1e-12);
    }

    #[test]
    fn tension_expects_the_perpendicular_and_signs_are_apart() {
        let mut pieces: Vec<AxialPiece> = (0..6).map(|f| piece(f, 88.0 + f64::from(f), -80.0)).collect();
        pieces.push(AxialPiece { load_axis_deg: None, stress_mpa: None, ..piece(9, 45.0, 0.0) });
        let sets = by_sign(&pieces, TurnDraws::default());
        let stretched = sets.stretched.unwrap();
        assert!(stretched.alignment.unwrap().value < -0.9);
        assert!(stretched.alignment_to_expected.unwrap().value > 0.9);
        assert!(stretched.v_p.unwrap() < 0.01);
        assert_eq!(sets.compressed, None);
        let unstressed = sets.unstressed.unwrap();
        assert_eq!((unstressed.alignment, unstressed.v_p, unstressed.rayleigh_p), (None, None, None));
        assert_eq!(sets.all.unwrap().filaments, 7);
    }

    #[test]
    fn nothing_from_nothing() {
        assert_eq!(summarise(&[], TurnDraws::default()), None);
        assert_eq!(summarise(&[AxialPiece { weight: 0.0, ..piece(1, 0.0, 1.0) }], TurnDraws::default()), None);
    }
}
