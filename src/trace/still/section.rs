//! Centre and width of a line of any width, from the picture itself.
//!
//! Method: the profile across the line, averaged along it over its own scale, is followed from its crest to half height on
//! either side; the centre is midway, the width the distance (as for thin lines in `centreline`, whose profiles end at ± 9 px).
//! Limit: where a side does not fall to half within the reach, as beside a touching line, nothing is said.

use ndarray::Array2;

use super::super::centreline::sample;

/// Reach of the profile to either side, Gaussian scales of the line.
const REACH_SCALES: f64 = 3.0;
/// And px.
const REACH: f64 = 3.0;
/// Step across and along, px.
const STEP: f64 = 0.5;
/// Half the length over which it is averaged, scales, and its bounds, px.
const ALONG_SCALES: f64 = 1.5;
/// Least.
const LEAST_ALONG: f64 = 2.0;
/// Greatest.
const MOST_ALONG: f64 = 12.0;
/// Distance within which the crest is looked for, scales.
const SEARCH_SCALES: f64 = 1.0;

/// Offset of the centre along the normal and full width at half height, px.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Section {
    /// Offset.
    pub offset: f64,
    /// Width.
    pub width: f64,
}

/// The section at `p` across a line of unit normal `n` and Gaussian scale `sigma`, px.
#[must_use]
pub(crate) fn section(plane: &Array2<f32>, p: [f64; 2], n: [f64; 2], sigma: f64) -> Option<Section> {
    let reach = REACH_SCALES * sigma + REACH;
    let half_length = (ALONG_SCALES * sigma).clamp(LEAST_ALONG, MOST_ALONG);
    let count = (reach / STEP).round() as i32;
    let offset = |i: usize| (i as i32 - count) as f64 * STEP;
    let values: Vec<Option<f64>> =
        (0..=2 * count as usize).map(|i| mean_along(plane, p, n, offset(i), half_length)).collect();
    let near = (SEARCH_SCALES * sigma).max(1.0);
    let crest = (0..values.len())
        .filter(|&i| offset(i).abs() <= near)
        .filter_map(|i| values[i].map(|v| (v, i)))
        .max_by(|a, b| a.0.total_cmp(&b.0).then(offset(b.1).abs().total_cmp(&offset(a.1).abs())))?;
    let lowest = |side: &[Option<f64>]| side.iter().flatten().copied().min_by(f64::total_cmp);
    let base = 0.5 * (lowest(&values[..crest.1])? + lowest(&values[crest.1 + 1..])?);
    let half = base + 0.5 * (crest.0 - base);
    if crest.0 <= base {
        return None;
    }
    let left = falls(&mut (0..=crest.1).rev(), &values, half)?;
    let right = falls(&mut (crest.1..values.len()), &values, half)?;
    let place = |at: f64| (at - f64::from(count)) * STEP;
    Some(Section { offset: 0.5 * (place(left) + place(right)), width: (place(right) - place(left)).max(1.0) })
}

/// Where the profile, followed along `way`, falls to `level`: a place between two of its samples.
fn falls(way: &mut dyn Iterator<Item = usize>, values: &[Option<f64>], level: f64) -> Option<f64> {
    let mut before: Option<(usize, f64)> = None;
    for i in way {
        let value = values[i]?;
        if let Some((k, high)) = before.filter(|_| value <= level) {
            let share = if high > value { (high - level) / (high - value) } else { 0.0 };
            return Some(k as f64 + share * (i as f64 - k as f64));
        }
        before = Some((i, value));
    }
    None
}

/// Mean of the plane over a piece of line parallel to the line at offset `across` along the normal.
fn mean_along(plane: &Array2<f32>, p: [f64; 2], n: [f64; 2], across: f64, half_length: f64) -> Option<f64> {
    let steps = (half_length / STEP / 2.0).round() as i32;
    let t = [n[1], -n[0]];
    let (mut sum, mut known) = (0.0, 0.0);
    for k in -steps..=steps {
        let along = f64::from(k) * 2.0 * STEP;
        let (x, y) = (p[0] + across * n[0] + along * t[0], p[1] + across * n[1] + along * t[1]);
        if let Some(value) = sample(plane, x, y) {
            sum += f64::from(value);
            known += 1.0;
        }
    }
    (known > 0.0).then(|| sum / known)
}
