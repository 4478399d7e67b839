//! When did growth turn: the change point of direction near a step, over all filaments and for each.
//!
//! One change between two directions, at once or over some frames, by least squares on the doubled-angle vectors; its time
//! is when half of the turn was made. A gradual change is taken only where it fits better than the bound below. Interval:
//! all times whose sum of squares is within the likelihood-ratio bound of a single change point, −2 ln(1 − √0.95) = 7.35
//! (Eo & Morley 2015, Quant. Econ. 6, 463–497, from memory), widened for correlated residuals by (1 + ρ)/(1 − ρ).
//! Limit: a turn cannot precede its step; a second bend is not modelled.

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
    /// When half of the turn was made, s.
    pub time_s: f64,
    /// When it began, s: the same for a turn made at once.
    pub began_s: f64,
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

/// A change of direction: half made at `middle_s`, made over `over_s` (0: at once).
#[derive(Debug, Clone, Copy)]
struct Bend {
    middle_s: f64,
    over_s: f64,
}

impl Bend {
    /// Share of the turn made at `time_s`.
    fn share(self, time_s: f64) -> f64 {
        if self.over_s > 0.0 {
            (0.5 + (time_s - self.middle_s) / self.over_s).clamp(0.0, 1.0)
        } else if time_s >= self.middle_s {
            1.0
        } else {
            0.0
        }
    }

    fn began_s(self) -> f64 {
        self.middle_s - 0.5 * self.over_s
    }
}

/// Weighted squares left of one filament when its doubled-angle vector goes from one value to another along `bend`.
/// A piece new at a frame grew since the frame before: half a frame back is its middle.
fn squares(own: &[GrowthPiece], bend: Bend, spacing_s: f64) -> f64 {
    let (mut total, mut aa, mut ab, mut bb) = (0.0, 0.0, 0.0, 0.0);
    let (mut a, mut b) = ([0.0; 2], [0.0; 2]);
    for piece in own {
        let u = bend.share(piece.time_s - 0.5 * spacing_s);
        let (w, v) = (piece.weight, doubled(piece.angle_deg));
        total += w;
        aa += w * (1.0 - u) * (1.0 - u);
        ab += w * u * (1.0 - u);
        bb += w * u * u;
        for k in 0..2 {
            a[k] += w * (1.0 - u) * v[k];
            b[k] += w * u * v[k];
        }
    }
    let det = aa * bb - ab * ab;
    // One side without growth: a single mean.
    if det <= 1e-9 * total * total {
        return total - (0..2).map(|k| (a[k] + b[k]) * (a[k] + b[k])).sum::<f64>() / total;
    }
    total - (0..2).map(|k| (bb * a[k] * a[k] - 2.0 * ab * a[k] * b[k] + aa * b[k] * b[k]) / det).sum::<f64>()
}

/// Total weight and weighted doubled-angle vector.
fn sums(side: &[GrowthPiece]) -> [f64; 3] {
    side.iter().fold([0.0; 3], |sum, p| {
        let [c, s] = doubled(p.angle_deg);
        [sum[0] + p.weight, sum[1] + p.weight * c, sum[2] + p.weight * s]
    })
}

/// Times of growth after the step: a change at once lies just before one of them.
fn cuts<'a>(near: impl Iterator<Item = &'a GrowthPiece>, step: LoadStep) -> Vec<f64> {
    let mut times: Vec<f64> = near.map(|p| p.time_s).filter(|t| *t > step.time_s).collect();
    times.sort_by(f64::total_cmp);
    times.dedup_by(|a, b| a.total_cmp(b).is_eq());
    times
}

/// Frames over which a gradual turn may be made.
const GRADUAL_FRAMES: [f64; 8] = [1.0, 2.0, 3.0, 4.0, 6.0, 8.0, 12.0, 16.0];

/// The change point over all filaments together. `None` without growth on both sides.
pub(super) fn pooled(near: &BTreeMap<u32, Vec<GrowthPiece>>, step: LoadStep, spacing_s: f64) -> Option<TurnTime> {
    let left = |bend: Bend| near.values().map(|own| squares(own, bend, spacing_s)).sum::<f64>();
    let middles: Vec<f64> = cuts(near.values().flatten(), step).iter().map(|c| c - 0.5 * spacing_s).collect();
    let at_once: Vec<f64> = middles.iter().map(|&m| left(Bend { middle_s: m, over_s: 0.0 })).collect();
    // A gradual turn begins at the step at the earliest.
    let gradual: Vec<(f64, f64)> = middles
        .iter()
        .map(|&m| {
            GRADUAL_FRAMES
                .iter()
                .map(|f| Bend { middle_s: m, over_s: f * spacing_s })
                .filter(|b| b.began_s() >= step.time_s - 0.5 * spacing_s)
                .map(|b| (left(b), b.over_s))
                .fold((f64::INFINITY, 0.0), |best, next| if next.0 < best.0 { next } else { best })
        })
        .collect();
    let slow: Vec<f64> = gradual.iter().map(|g| g.0).collect();
    let (best_once, once) = least(&at_once)?;
    let (best_slow, slowest) = least(&slow)?;
    let pieces = near.values().map(Vec::len).sum::<usize>() as f64;
    // Two vectors a filament are fitted to as many vectors as there are pieces.
    let freedom = (2.0 * pieces - 4.0 * near.len() as f64).max(1.0);
    let margin = BOUND * once.min(slowest) / freedom * inflation(near, middles[best_once]);
    let (curve, best, over_s) =
        if slowest + margin < once { (&slow, best_slow, gradual[best_slow].1) } else { (&at_once, best_once, 0.0) };
    let bound = curve[best] + margin;
    let inside: Vec<usize> = (0..curve.len()).filter(|i| curve[*i] <= bound).collect();
    let (low, high) = (*inside.first()?, *inside.last()?);
    let time_s = middles[best].max(step.time_s);
    Some(TurnTime {
        time_s,
        began_s: Bend { middle_s: middles[best], over_s }.began_s().max(step.time_s),
        ci95: [(middles[low] - 0.5 * spacing_s).max(step.time_s), middles[high] + 0.5 * spacing_s],
        lag_s: time_s - step.time_s,
    })
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
            let residuals: Vec<[f64; 2]> =
                side.iter().map(|p| doubled(p.angle_deg)).map(|v| [v[0] - c / weight, v[1] - s / weight]).collect();
            square += residuals.iter().map(|r| r[0] * r[0] + r[1] * r[1]).sum::<f64>();
            product += residuals.windows(2).map(|w| w[0][0] * w[1][0] + w[0][1] * w[1][1]).sum::<f64>();
        }
    }
    let rho = if square > 0.0 { (product / square).clamp(0.0, 0.9) } else { 0.0 };
    (1.0 + rho) / (1.0 - rho)
}

/// What each filament did, at its own change point.
pub(super) fn by_filament(near: &BTreeMap<u32, Vec<GrowthPiece>>, step: LoadStep, spacing_s: f64) -> Vec<FilamentTurn> {
    near.iter().filter_map(|(filament, own)| filament_turn(*filament, own, step, spacing_s)).collect()
}

fn filament_turn(filament: u32, own: &[GrowthPiece], step: LoadStep, spacing_s: f64) -> Option<FilamentTurn> {
    let cuts = cuts(own.iter(), step);
    let left = |cut: &f64| squares(own, Bend { middle_s: cut - 0.5 * spacing_s, over_s: 0.0 }, spacing_s);
    let (best, _) = least(&cuts.iter().map(left).collect::<Vec<_>>())?;
    let cut = cuts[best];
    let k = own.partition_point(|p| p.time_s < cut);
    let axis = |side: &[GrowthPiece]| {
        let [_, c, s] = sums(side);
        halved([c, s])
    };
    let (before_deg, after_deg) = (axis(&own[..k])?, axis(&own[k..])?);
    let expected = step.expected_after();
    let turned_deg = expected.map(|e| turned_toward(before_deg, after_deg, e));
    let followed =
        expected.zip(turned_deg).is_some_and(|(e, turned)| turned >= FOLLOW_DEG.max(0.5 * acute(before_deg, e)));
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
        for f in by_filament(&near, step(), 10.0) {
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
        assert!(by_filament(&near, step(), 10.0).iter().all(|f| !f.followed));
    }

    #[test]
    fn growth_on_one_side_only_says_nothing() {
        let early: Vec<GrowthPiece> = filament(1, 0.0).into_iter().filter(|p| p.time_s < 150.0).collect();
        let near = near(&early, &[step()], 0, 10.0);
        assert!(near.is_empty());
        assert_eq!(pooled(&near, step(), 10.0), None);
    }
}
