//! Steps of the load: where its axis or its stress changes at once and holds before and after.
//!
//! The load is a vector, stress·(cos 2a, sin 2a): half a turn of the axis changes nothing, tension is the perpendicular
//! compression, and no stress has no axis. Averaged over frame-wide cells, it is cut into flat runs; two runs that meet
//! within a few cells and differ enough make a step. A slow drift is one run, a long ramp is a gap, a spike returns.

use super::{GrowthPiece, LoadSample};
use crate::stats::angles::{doubled, expected_axis, halved};
use crate::stats::order::median;

/// A step of the load.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct LoadStep {
    /// When half the change was reached, s.
    pub time_s: f64,
    /// Load axis before, degrees, compression-positive (tension is given as compression along its perpendicular); `None`
    /// without stress.
    pub axis_before_deg: Option<f64>,
    /// Size of the stress before, MPa, ≥ 0 along `axis_before_deg`.
    pub stress_before_mpa: f64,
    /// Like `axis_before_deg`.
    pub axis_after_deg: Option<f64>,
    /// Like `stress_before_mpa`.
    pub stress_after_mpa: f64,
}

/// Below this a load is no load, MPa: common practice, some times the noise of a load cell on a small beam.
const NO_LOAD_MPA: f64 = 10.0;

impl LoadStep {
    /// Axis along which growth is expected after the step; `None` when the load was taken off.
    #[must_use]
    pub fn expected_after(&self) -> Option<f64> {
        (self.stress_after_mpa >= NO_LOAD_MPA).then_some(self.axis_after_deg).flatten()
    }
}

/// Cells that must hold for a run to be flat.
const HOLD_CELLS: usize = 3;
/// Cells between two runs at most; a longer ramp is no step.
const RAMP_CELLS: usize = 5;
/// A cell may stray from its run by this share of the least step. Under 1/3: a ramp slow enough to pass as flat then
/// changes by less than the least step between one window of three cells and the next.
const STRAY: f64 = 0.25;
/// Cells before the first growth that are looked at.
const LEAD_CELLS: f64 = 10.0;

/// Median spacing of the distinct times of growth; `None` under two times. `pieces` in order of time.
pub(super) fn frame_spacing(pieces: &[GrowthPiece]) -> Option<f64> {
    let gaps: Vec<f64> = pieces.windows(2).map(|w| w[1].time_s - w[0].time_s).filter(|g| *g > 0.0).collect();
    median(&gaps)
}

/// Steps of the load while there was growth, in order of time. `pieces` and `load` in order of time.
#[must_use]
pub fn find(pieces: &[GrowthPiece], load: &[LoadSample], spacing_s: f64, min_step_mpa: f64) -> Vec<LoadStep> {
    let (Some(first), Some(last)) = (pieces.first(), pieces.last()) else {
        return Vec::new();
    };
    let start = first.time_s - LEAD_CELLS * spacing_s;
    let count = ((last.time_s - start) / spacing_s).ceil() as usize;
    let cells = cell_means(load, start, spacing_s, count);
    let runs = flat_runs(&cells, STRAY * min_step_mpa);
    runs.windows(2)
        .filter(|w| w[1].0 - w[0].1 <= RAMP_CELLS)
        .filter_map(|w| {
            let before = mean_of(&cells[w[0].1.saturating_sub(HOLD_CELLS).max(w[0].0)..w[0].1])?;
            let after = mean_of(&cells[w[1].0..(w[1].0 + HOLD_CELLS).min(w[1].1)])?;
            if libm::hypot(after[0] - before[0], after[1] - before[1]) < min_step_mpa {
                return None;
            }
            let from = start + (w[0].1 as f64 - 1.0) * spacing_s;
            let to = start + (w[1].0 as f64 + 1.0) * spacing_s;
            Some(LoadStep {
                time_s: half_way(load, before, after, from, to),
                axis_before_deg: halved(before).filter(|_| length(before) >= NO_LOAD_MPA),
                stress_before_mpa: length(before),
                axis_after_deg: halved(after).filter(|_| length(after) >= NO_LOAD_MPA),
                stress_after_mpa: length(after),
            })
        })
        .filter(|step| step.time_s > first.time_s && step.time_s < last.time_s)
        .collect()
}

fn length(v: [f64; 2]) -> f64 {
    libm::hypot(v[0], v[1])
}

/// The load as a vector; zero stress is a load of nothing even without an axis.
fn vector(sample: &LoadSample) -> Option<[f64; 2]> {
    let stress = sample.stress_mpa?;
    let Some(axis) = sample.axis_deg else {
        return (stress.abs() <= 0.0).then_some([0.0; 2]);
    };
    // Tension along an axis acts as compression along its perpendicular.
    let [c, s] = doubled(expected_axis(axis, stress).unwrap_or(axis));
    Some([stress.abs() * c, stress.abs() * s])
}

/// Time average of the held load over each cell; `None` where it is absent for any part.
fn cell_means(load: &[LoadSample], start: f64, width: f64, count: usize) -> Vec<Option<[f64; 2]>> {
    let mut index = load.partition_point(|s| s.time_s <= start);
    (0..count)
        .map(|cell| {
            let (mut from, to) = (start + cell as f64 * width, start + (cell + 1) as f64 * width);
            let mut sum = Some([0.0; 2]);
            while from < to {
                let until = load.get(index).map_or(to, |s| s.time_s.min(to));
                let held = index.checked_sub(1).and_then(|i| vector(&load[i]));
                let part = (until - from).max(0.0) / width;
                if part > 0.0 {
                    sum = sum.zip(held).map(|(s, h)| [s[0] + part * h[0], s[1] + part * h[1]]);
                }
                from = until;
                if load.get(index).is_some_and(|s| s.time_s <= to) {
                    index += 1;
                }
            }
            sum
        })
        .collect()
}

fn mean_of(cells: &[Option<[f64; 2]>]) -> Option<[f64; 2]> {
    let n = cells.len() as f64;
    cells.iter().copied().try_fold([0.0; 2], |sum, cell| cell.map(|c| [sum[0] + c[0] / n, sum[1] + c[1] / n]))
}

/// Half-open ranges of cells over which the load holds or drifts slowly.
fn flat_runs(cells: &[Option<[f64; 2]>], stray: f64) -> Vec<(usize, usize)> {
    let near = |cell: Option<[f64; 2]>, centre: [f64; 2]| {
        cell.is_some_and(|c| libm::hypot(c[0] - centre[0], c[1] - centre[1]) <= stray)
    };
    let mut runs = Vec::new();
    let mut from = 0;
    while from + HOLD_CELLS <= cells.len() {
        let window = &cells[from..from + HOLD_CELLS];
        let flat = mean_of(window).is_some_and(|centre| window.iter().all(|c| near(*c, centre)));
        if !flat {
            from += 1;
            continue;
        }
        let mut to = from + HOLD_CELLS;
        while to < cells.len() && mean_of(&cells[to - HOLD_CELLS..to]).is_some_and(|centre| near(cells[to], centre)) {
            to += 1;
        }
        runs.push((from, to));
        from = to;
    }
    runs
}

/// Time of the first sample between `from` and `to` that is nearer to `after` than to `before`; the middle without one.
fn half_way(load: &[LoadSample], before: [f64; 2], after: [f64; 2], from: f64, to: f64) -> f64 {
    let gap = |a: [f64; 2], b: [f64; 2]| libm::hypot(a[0] - b[0], a[1] - b[1]);
    load[load.partition_point(|s| s.time_s < from)..]
        .iter()
        .take_while(|s| s.time_s <= to)
        .find(|s| vector(s).is_some_and(|v| gap(v, after) <= gap(v, before)))
        .map_or(0.5 * (from + to), |s| s.time_s)
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    fn growth() -> Vec<GrowthPiece> {
        (0..100)
            .map(|i| GrowthPiece {
                time_s: 10.0 * f64::from(i),
                filament: 1,
                position: f64::from(i),
                angle_deg: 0.0,
                weight: 1.0,
            })
            .collect()
    }

    fn at(time_s: f64, axis: f64, stress: f64) -> LoadSample {
        LoadSample { time_s, axis_deg: Some(axis), stress_mpa: Some(stress) }
    }

    fn find_in(load: &[LoadSample]) -> Vec<LoadStep> {
        find(&growth(), load, 10.0, 30.0)
    }

    #[test]
    fn a_turn_of_the_axis_in_a_log_of_changes_only() {
        let found = find_in(&[at(-200.0, 90.0, 150.0), at(503.0, 0.0, 150.0)]);
        assert_eq!(found.len(), 1);
        assert_abs_diff_eq!(found[0].time_s, 503.0);
        assert_abs_diff_eq!(found[0].axis_before_deg.unwrap(), 90.0, epsilon = 1e-9);
        assert_abs_diff_eq!(found[0].expected_after().unwrap(), 0.0, epsilon = 1e-9);
    }

    #[test]
    fn the_same_load_in_other_words_is_no_step() {
        // Half a turn, and tension along the perpendicular, are the same load.
        assert!(find_in(&[at(-200.0, 30.0, 150.0), at(400.0, 210.0, 150.0), at(700.0, 120.0, -150.0)]).is_empty());
    }

    #[test]
    fn drift_ramp_spike_noise_and_gaps_are_no_steps() {
        let log = |f: &dyn Fn(f64) -> f64| -> Vec<LoadSample> {
            (-100..500).map(|i| f64::from(2 * i)).map(|t| at(t, 0.0, f(t))).collect()
        };
        assert!(find_in(&log(&|t| 50.0 + 0.2 * t)).is_empty(), "drift");
        assert!(find_in(&log(&|t| 50.0 + 1.0 * (t - 400.0).clamp(0.0, 150.0))).is_empty(), "ramp");
        assert!(find_in(&log(&|t| if (400.0..404.0).contains(&t) { 400.0 } else { 100.0 })).is_empty(), "spike");
        assert!(find_in(&log(&|t| 100.0 + 8.0 * (t * 1.7).sin())).is_empty(), "noise");
        let mut gap = log(&|_| 100.0);
        for sample in gap.iter_mut().filter(|s| s.time_s > 300.0 && s.time_s < 500.0) {
            (sample.axis_deg, sample.stress_mpa) = (None, None);
        }
        assert!(find_in(&gap).is_empty(), "gap");
    }

    #[test]
    fn load_on_and_off() {
        let found = find_in(&[at(-200.0, 0.0, 0.0), at(300.0, 45.0, 80.0), at(600.0, 45.0, 0.0)]);
        assert_eq!(found.len(), 2);
        assert_eq!(found[0].axis_before_deg, None);
        assert_abs_diff_eq!(found[0].expected_after().unwrap(), 45.0, epsilon = 1e-9);
        assert_eq!(found[1].expected_after(), None);
    }

    #[test]
    fn nothing_from_nothing() {
        assert!(find(&[], &[at(0.0, 0.0, 1.0)], 1.0, 30.0).is_empty());
        assert!(find_in(&[]).is_empty());
    }
}
