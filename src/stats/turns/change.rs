//! When did growth turn: the change point of direction near a step, over all filaments and for each.
//!
//! One change between two constant directions by least squares on the doubled-angle vectors; for a gradual turn this is the
//! time by which about half of it was made. Interval: all times whose sum of squares is within the likelihood-ratio bound of
//! a single change point, −2 ln(1 − √0.95) = 7.35 (Eo & Morley 2015, Quant. Econ. 6, 463–497, from memory), widened for
//! correlated residuals by (1 + ρ)/(1 − ρ). Limit: a turn cannot precede its step; a second bend is not modelled.

use std::collections::BTreeMap;

use super::steps::LoadStep;
use super::{GrowthPiece, turned_toward};
use crate::stats::angles::{acute, doubled, halved};

/// Frames looked at on each side of a step.
const REACH_FRAMES: f64 = 30.0;
/// Likelihood-ratio bound of a 95 % set for one change point.
const BOUND: f64 = 7.352;
/// Least turn of one filament that counts as following, degrees: ours, some times the wander of a straight filament.
const FOLLOW_DEG: f64 = 20.0;

/// Time of a turn.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct TurnTime {
    /// Best time, s.
    pub time_s: f64,
    /// 95 % interval, s.
    pub ci95: [f64; 2],
    /// How long growth went on after the step, s.
    pub lag_s: f64,
}

/// What one filament did at a step.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct FilamentTurn {
    /// The filament.
    pub filament: u32,
    /// Axis before its change point, degrees.
    pub before_deg: f64,
    /// Axis after it.
    pub after_deg: f64,
    /// Loss of acute angle to the expected axis, degrees; `None` when none is expected.
    pub turned_deg: Option<f64>,
    /// Whether it turned by at least 20° and half the angle it had to turn.
    pub followed: bool,
    /// Length grown from the step until its change point.
    pub grew_on: Option<f64>,
}

/// Pieces of each filament near step `index`, from the step before to the step after, at most 30 frames away.
/// Filaments that did not grow on both sides of the step are left out.
pub(super) fn near(
    pieces: &[GrowthPiece],
    found: &[LoadStep],
    index: usize,
    spacing_s: f64,
) -> BTreeMap<u32, Vec<GrowthPiece>> {
    let step = found[index].time_s;
    let reach = REACH_FRAMES * spacing_s;
    let from = index.checked_sub(1).map_or(f64::NEG_INFINITY, |i| found[i].time_s).max(step - reach);
    let to = found.get(index + 1).map_or(f64::INFINITY, |s| s.time_s).min(step + reach);
    let mut near: BTreeMap<u32, Vec<GrowthPiece>> = BTreeMap::new();
    for piece in pieces.iter().filter(|p| p.time_s > from && p.time_s <= to) {
        near.entry(piece.filament).or_default().push(*piece);
    }
    near.retain(|_, own| own[0].time_s <= step && own[own.len() - 1].time_s > step);
    near
}

/// Squares about the two means when a filament's growth is cut at `cut` (pieces at or after it are after), and degrees of
/// freedom of each side are left to the caller.
fn squares(own: &[GrowthPiece], cut: f64) -> f64 {
    [own.partition_point(|p| p.time_s < cut)]
        .into_iter()
        .flat_map(|k| [&own[..k], &own[k..]])
        .map(|side| {
            let [weight, c, s] = sums(side);
            if weight > 0.0 { weight - (c * c + s * s) / weight } else { 0.0 }
        })
        .sum()
}

/// Total weight and weighted doubled-angle vector.
fn sums(side: &[GrowthPiece]) -> [f64; 3] {
    side.iter().fold([0.0; 3], |sum, p| {
        let [c, s] = doubled(p.angle_deg);
        [sum[0] + p.weight, sum[1] + p.weight * c, sum[2] + p.weight * s]
    })
}

/// Times of growth at which a change after the step may begin: from the first after the step on.
fn cuts<'a>(near: impl Iterator<Item = &'a GrowthPiece>, step: LoadStep) -> Vec<f64> {
    let mut times: Vec<f64> = near.map(|p| p.time_s).filter(|t| *t > step.time_s).collect();
    times.sort_by(f64::total_cmp);
    times.dedup_by(|a, b| a.total_cmp(b).is_eq());
    times
}

/// The change point over all filaments together. `None` without growth on both sides.
pub(super) fn pooled(near: &BTreeMap<u32, Vec<GrowthPiece>>, step: LoadStep, spacing_s: f64) -> Option<TurnTime> {
    let cuts = cuts(near.values().flatten(), step);
    let curve: Vec<f64> = cuts.iter().map(|c| near.values().map(|own| squares(own, *c)).sum()).collect();
    let (best, least) = least(&curve)?;
    let pieces = near.values().map(Vec::len).sum::<usize>() as f64;
    let weight: f64 = near.values().flatten().map(|p| p.weight).sum();
    // Two means of two components a filament are fitted.
    let freedom = (2.0 * pieces - 4.0 * near.len() as f64).max(1.0);
    let variance = least * pieces / weight / freedom;
    let inflation = inflation(near, cuts[best]);
    let bound = least + BOUND * variance * inflation * weight / pieces;
    let inside: Vec<usize> = (0..curve.len()).filter(|i| curve[*i] <= bound).collect();
    let (low, high) = (*inside.first()?, *inside.last()?);
    // What is new at a frame grew since the frame before: half a frame back is its middle.
    let middle = |i: usize| (cuts[i] - 0.5 * spacing_s).max(step.time_s);
    let time_s = middle(best);
    let ci95 = [(cuts[low] - spacing_s).max(step.time_s), cuts[high]];
    Some(TurnTime { time_s, ci95, lag_s: time_s - step.time_s })
}

/// Index and value of the first least value.
fn least(curve: &[f64]) -> Option<(usize, f64)> {
    curve.iter().copied().enumerate().fold(None, |best, (i, v)| match best {
        Some((_, b)) if b <= v => best,
        _ => Some((i, v)),
    })
}

/// (1 + ρ)/(1 − ρ) with ρ the correlation of neighbouring residuals, 0 ≤ ρ ≤ 0.9.
fn inflation(near: &BTreeMap<u32, Vec<GrowthPiece>>, cut: f64) -> f64 {
    let (mut product, mut square) = (0.0, 0.0);
    for own in near.values() {
        let k = own.partition_point(|p| p.time_s < cut);
        for side in [&own[..k], &own[k..]] {
            let [weight, c, s] = sums(side);
            let residuals: Vec<[f64; 2]> = side
                .iter()
                .map(|p| doubled(p.angle_deg))
                .map(|v| [v[0] - c / weight, v[1] - s / weight])
                .collect();
            square += residuals.iter().map(|r| r[0] * r[0] + r[1] * r[1]).sum::<f64>();
            product += residuals.windows(2).map(|w| w[0][0] * w[1][0] + w[0][1] * w[1][1]).sum::<f64>();
        }
    }
    let rho = if square > 0.0 { (product / square).clamp(0.0, 0.9) } else { 0.0 };
    (1.0 + rho) / (1.0 - rho)
}

/// What each filament did; its own change point, or the pooled one where it has no better.
pub(super) fn by_filament(
    near: &BTreeMap<u32, Vec<GrowthPiece>>,
    step: LoadStep,
    pooled_s: Option<f64>,
) -> Vec<FilamentTurn> {
    near.iter().filter_map(|(filament, own)| filament_turn(*filament, own, step, pooled_s)).collect()
}

fn filament_turn(filament: u32, own: &[GrowthPiece], step: LoadStep, pooled_s: Option<f64>) -> Option<FilamentTurn> {
    let cuts = cuts(own.iter(), step);
    let curve: Vec<f64> = cuts.iter().map(|c| squares(own, *c)).collect();
    let (best, _) = least(&curve)?;
    let cut = if curve.len() > 1 { cuts[best] } else { pooled_s.map_or(cuts[best], |p| cuts[best].min(p)) };
    let k = own.partition_point(|p| p.time_s < cut);
    let axis = |side: &[GrowthPiece]| {
        let [_, c, s] = sums(side);
        halved([c, s])
    };
    let (before_deg, after_deg) = (axis(&own[..k])?, axis(&own[k..])?);
    let expected = step.expected_after();
    let turned_deg = expected.map(|e| turned_toward(before_deg, after_deg, e));
    let followed = expected.zip(turned_deg).is_some_and(|(e, turned)| turned >= FOLLOW_DEG.max(0.5 * acute(before_deg, e)));
    let at_step = own[..own.partition_point(|p| p.time_s <= step.time_s)].last().map(|p| p.position);
    let at_turn = own.get(k).map(|p| p.position - 0.5 * p.weight);
    let grew_on = at_step.zip(at_turn).map(|(a, b)| (b - a).max(0.0));
    Some(FilamentTurn { filament, before_deg, after_deg, turned_deg, followed, grew_on })
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    fn step() -> LoadStep {
        LoadStep {
            time_s: 200.0,
            axis_before_deg: Some(0.0),
            stress_before_mpa: 150.0,
            axis_after_deg: Some(90.0),
            stress_after_mpa: 150.0,
        }
    }

    fn filament(number: u32, turns_at: f64) -> Vec<GrowthPiece> {
        (0..40)
            .map(|i| {
                let time_s = 10.0 * f64::from(i);
                let wander = f64::from((i * 7 + number as i32 * 3) % 9) - 4.0;
                let angle_deg = wander + if time_s >= turns_at { 80.0 } else { 0.0 };
                GrowthPiece { time_s, filament: number, position: 3.0 * f64::from(i), angle_deg, weight: 3.0 }
            })
            .collect()
    }

    #[test]
    fn an_abrupt_turn_is_found_to_the_frame() {
        let pieces: Vec<GrowthPiece> = (1..4).flat_map(|n| filament(n, 240.0)).collect();
        let near = near(&pieces, &[step()], 0, 10.0);
        let turn = pooled(&near, step(), 10.0).unwrap();
        assert_abs_diff_eq!(turn.time_s, 235.0);
        assert!(turn.ci95[0] <= 235.0 && 235.0 <= turn.ci95[1] && turn.ci95[1] - turn.ci95[0] <= 30.0, "{turn:?}");
        for f in by_filament(&near, step(), Some(turn.time_s)) {
            assert!(f.followed);
            assert_abs_diff_eq!(f.turned_deg.unwrap(), 80.0, epsilon = 3.0);
            // Step at piece 20; pieces 21 to 23 grew on: 9 units, and half a piece.
            assert_abs_diff_eq!(f.grew_on.unwrap(), 10.5, epsilon = 1e-9);
        }
    }

    #[test]
    fn straight_growth_follows_nothing() {
        let pieces = filament(1, f64::INFINITY);
        let near = near(&pieces, &[step()], 0, 10.0);
        assert!(by_filament(&near, step(), None).iter().all(|f| !f.followed));
    }

    #[test]
    fn growth_on_one_side_only_says_nothing() {
        let early: Vec<GrowthPiece> = filament(1, 0.0).into_iter().filter(|p| p.time_s < 150.0).collect();
        let near = near(&early, &[step()], 0, 10.0);
        assert!(near.is_empty());
        assert_eq!(pooled(&near, step(), 10.0), None);
    }
}
