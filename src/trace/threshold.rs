//! Thresholds, hysteresis and connected regions: from a plane of values to a mask.
//!
//! Methods: Otsu (1979), IEEE Trans. SMC 9, 62–66; triangle, Zack, Rogers & Latt (1977), J. Histochem. Cytochem. 25, 741–753; local
//! threshold in [`sauvola`]; hysteresis with two levels after Canny (1986), IEEE Trans. PAMI 8, 679–698, linked over all 8
//! neighbours, so that a mirror flip of the plane flips the mask and changes nothing else.
//!
//! One rule everywhere: foreground is *above* the threshold. A value that is not a number is never foreground.

pub mod sauvola;

use std::cmp::Ordering;

use ndarray::{Array2, ArrayView2};

use super::thin::NEIGHBOURS;

/// Otsu's threshold of a histogram: the bin t for which the classes `<= t` and `> t` have the largest variance between them.
///
/// `counts[i]` is the number of pixels in bin i. The first of several equal maxima is taken. `None` when fewer than two bins are
/// filled: there is nothing to part.
///
/// # Examples
/// ```
/// let mut counts = [0_u64; 256];
/// (counts[10], counts[200]) = (90, 10);
/// assert_eq!(veerlog::trace::threshold::otsu(&counts), Some(10));
/// assert_eq!(veerlog::trace::threshold::otsu(&[0, 7, 0]), None);
/// ```
#[must_use]
pub fn otsu(counts: &[u64]) -> Option<usize> {
    let total: f64 = counts.iter().map(|&n| n as f64).sum();
    let moment: f64 = counts.iter().enumerate().map(|(bin, &n)| bin as f64 * n as f64).sum();
    let (mut below, mut moment_below) = (0.0, 0.0);
    let mut best: Option<(usize, f64)> = None;
    for (bin, &n) in counts.iter().enumerate() {
        below += n as f64;
        moment_below += bin as f64 * n as f64;
        let above = total - below;
        if below > 0.0 && above > 0.0 {
            let difference = moment_below / below - (moment - moment_below) / above;
            let between = below * above * difference * difference;
            if best.is_none_or(|(_, most)| between > most) {
                best = Some((bin, between));
            }
        }
    }
    best.map(|(bin, _)| bin)
}

/// The triangle threshold of a histogram: the bin farthest below the straight line from the peak to the end of its longer tail.
///
/// Made for one tall peak with a long tail of few pixels, such as bare ceramic with a thin filament. `None` when fewer than two bins
/// are filled. Libraries differ by one bin in where the tail ends; here it ends in its last filled bin.
#[must_use]
pub fn triangle(counts: &[u64]) -> Option<usize> {
    let first = counts.iter().position(|&n| n > 0)?;
    let last = counts.iter().rposition(|&n| n > 0)?;
    if first == last {
        return None;
    }
    let peak = (first..=last).rev().max_by_key(|&bin| counts[bin])?;
    let end = if peak - first > last - peak { first } else { last };
    let height = |bin: usize| counts[bin] as f64;
    let slope = (height(end) - height(peak)) / (end as f64 - peak as f64);
    // The distance to the line is this vertical gap times a constant, so that the larger gap is the larger distance.
    let gap = |bin: usize| height(peak) + slope * (bin as f64 - peak as f64) - height(bin);
    let nearer = |a: &usize, b: &usize| gap(*a).total_cmp(&gap(*b)).then_with(|| b.cmp(a));
    (peak.min(end)..=peak.max(end)).max_by(nearer)
}

/// Pixels of `evidence` above `low` that hang together (over 8 neighbours) with one above `high`.
///
/// Work past the first scan is proportional to the pixels above `low`. With `high <= low` the low level alone decides.
///
/// # Examples
/// ```
/// use ndarray::array;
/// let evidence = array![[5.0_f32, 2.0, 0.0, 2.0], [0.0, 0.0, 2.0, 0.0], [0.0, 0.0, 0.0, 0.0], [2.0, 2.0, 0.0, 0.0]];
/// let mask = veerlog::trace::threshold::hysteresis(&evidence, 1.0, 4.0);
/// assert_eq!(mask.iter().filter(|on| **on).count(), 4);
/// assert!(!mask[[3, 0]], "nothing strong hangs on to the last row");
/// ```
#[must_use]
pub fn hysteresis(evidence: &Array2<f32>, low: f32, high: f32) -> Array2<bool> {
    let weak = evidence.mapv(|value| value > low);
    let mut mask = Array2::from_elem(evidence.dim(), false);
    for_each_component(weak.view(), |pixels| {
        if pixels.iter().any(|&at| evidence[at] > high) {
            pixels.iter().for_each(|&at| mask[at] = true);
        }
    });
    mask
}

/// `mask` without its 8-connected components of fewer than `min_area` pixels.
#[must_use]
pub fn clean(mask: &Array2<bool>, min_area: usize) -> Array2<bool> {
    let mut kept = Array2::from_elem(mask.dim(), false);
    for_each_component(mask.view(), |pixels| {
        if pixels.len() >= min_area {
            pixels.iter().for_each(|&at| kept[at] = true);
        }
    });
    kept
}

/// Calls `visit` with the pixels `[row, column]` of each 8-connected component of `mask`.
///
/// Components come in row-major order of their first pixel, and each starts with that pixel; the order of the rest is fixed but has no
/// meaning. One scan and one mask of memory, then work proportional to the foreground.
pub fn for_each_component(mask: ArrayView2<'_, bool>, mut visit: impl FnMut(&[[usize; 2]])) {
    let mut left = mask.to_owned();
    let mut pixels = Vec::new();
    for ((row, column), _) in mask.indexed_iter().filter(|(_, on)| **on) {
        if !std::mem::take(&mut left[[row, column]]) {
            continue;
        }
        pixels.clear();
        pixels.push([row, column]);
        let mut next = 0;
        while let Some(&[row, column]) = pixels.get(next) {
            next += 1;
            for (down, right) in NEIGHBOURS {
                let at = [row.wrapping_add_signed(down), column.wrapping_add_signed(right)];
                if left.get(at) == Some(&true) {
                    left[at] = false;
                    pixels.push(at);
                }
            }
        }
        visit(&pixels);
    }
}

/// Counts of `values` in `bins` equal bins over [`low`, `high`]; values outside fall into the end bins, what is not a number into none.
///
/// `None` unless `low < high`, both are finite and `bins > 0`.
#[must_use]
pub fn histogram(values: &Array2<f32>, low: f32, high: f32, bins: usize) -> Option<Vec<u64>> {
    let ordered = low.partial_cmp(&high) == Some(Ordering::Less);
    if !ordered || !low.is_finite() || !high.is_finite() || bins == 0 {
        return None;
    }
    let mut counts = vec![0; bins];
    for &value in values.iter().filter(|value| !value.is_nan()) {
        let place = (f64::from(value) - f64::from(low)) / (f64::from(high) - f64::from(low));
        counts[((place * bins as f64).max(0.0) as usize).min(bins - 1)] += 1;
    }
    Some(counts)
}

#[cfg(test)]
mod tests {
    use super::*;
    use ndarray::{Axis, array};
    use proptest::prelude::*;

    fn evidence() -> impl Strategy<Value = Array2<f32>> {
        (1_usize..14, 1_usize..14).prop_flat_map(|shape| {
            proptest::collection::vec(0.0_f32..10.0, shape.0 * shape.1)
                .prop_map(move |values| Array2::from_shape_vec(shape, values).unwrap())
        })
    }

    proptest! {
        #[test]
        fn hysteresis_follows_mirror_flips_and_turns(plane in evidence()) {
            let mask = hysteresis(&plane, 5.0, 8.5);
            for axis in [Axis(0), Axis(1)] {
                let (mut flipped, mut expected) = (plane.clone(), mask.clone());
                flipped.invert_axis(axis);
                expected.invert_axis(axis);
                prop_assert_eq!(hysteresis(&flipped, 5.0, 8.5), expected);
            }
            prop_assert_eq!(hysteresis(&plane.t().to_owned(), 5.0, 8.5), mask.t().to_owned());
        }

        #[test]
        fn hysteresis_lies_between_its_levels(plane in evidence()) {
            let mask = hysteresis(&plane, 5.0, 8.5);
            for (&value, &on) in plane.iter().zip(&mask) {
                prop_assert!(!on || value > 5.0);
                prop_assert!(on || value <= 8.5);
            }
        }

        /// imageproc's labelling is the outside reference.
        #[test]
        fn components_equal_the_library(plane in evidence()) {
            let mask = plane.mapv(|value| value > 6.0);
            let (rows, columns) = mask.dim();
            // One pixel of margin: the library's labelling panics on a picture of a single set pixel.
            let picture = image::GrayImage::from_fn(columns as u32 + 1, rows as u32 + 1, |x, y| {
                image::Luma([u8::from(mask.get((y as usize, x as usize)) == Some(&true))])
            });
            let eight = imageproc::region_labelling::Connectivity::Eight;
            let labels = imageproc::region_labelling::connected_components(&picture, eight, image::Luma([0]));
            let mut sizes = std::collections::BTreeMap::new();
            labels.pixels().filter(|label| label[0] > 0).for_each(|label| *sizes.entry(label[0]).or_insert(0) += 1);
            let mut count = 0;
            for_each_component(mask.view(), |pixels| {
                let label = labels.get_pixel(pixels[0][1] as u32, pixels[0][0] as u32)[0];
                assert!(pixels.iter().all(|at| labels.get_pixel(at[1] as u32, at[0] as u32)[0] == label));
                assert_eq!(sizes[&label], pixels.len());
                count += 1;
            });
            prop_assert_eq!(count, sizes.len());
        }
    }

    #[test]
    fn not_a_number_is_never_foreground() {
        let plane = array![[f32::NAN, 9.0, f32::NAN], [f32::NAN, f32::NAN, 2.0]];
        assert_eq!(hysteresis(&plane, 1.0, 5.0), array![[false, true, false], [false, false, true]]);
    }

    #[test]
    fn clean_keeps_at_the_limit() {
        let mask = array![[true, false, false, true], [false, true, false, false]];
        assert_eq!(clean(&mask, 2), array![[true, false, false, false], [false, true, false, false]]);
        assert_eq!(clean(&mask, 0), mask);
        assert_eq!(clean(&Array2::from_elem((0, 3), true), 1).len(), 0);
    }

    #[test]
    fn thresholds_of_nothing() {
        for counts in [&[][..], &[0, 0], &[0, 5]] {
            assert_eq!(otsu(counts), None);
            assert_eq!(triangle(counts), None);
        }
        assert_eq!(histogram(&array![[1.0]], 1.0, 1.0, 4), None);
        assert_eq!(histogram(&array![[1.0]], 0.0, f32::NAN, 4), None);
        assert_eq!(histogram(&array![[-1.0, 0.0, 0.5, 9.0, f32::NAN]], 0.0, 1.0, 2), Some(vec![2, 2]));
    }
}
