//! Thinning of a mask to a skeleton one pixel wide.
//!
//! Method: the parallel rule A1 of Guo & Hall (1989), Parallel thinning with two-subiteration algorithms, Comm. ACM 32, 359–373, with
//! the pass that peels the left and top sides first. It keeps 2×2 blocks (as one pixel) and thin diagonals, which the textbook rule
//! of Zhang & Suen (1984) erases; filaments often run at 45°, so that rule is not used.
//!
//! Speed: after one scan only pixels whose neighbourhood changed since they were last tested are tested again, which gives the same
//! pixels as full passes. Memory: one byte a pixel.
//!
//! Limits: the centre of a bar of even width is off by half a pixel, and the result is not invariant under a mirror flip there. A few
//! corners stay 4-connected, and a 2×2 block may stay where three or more branches meet, although one pixel of it could go.

use ndarray::{Array2, ArrayView2};

/// The 8 neighbours as (row, column) offsets, clockwise from the one above; bit i of a code is neighbour i.
pub const NEIGHBOURS: [(isize, isize); 8] = [(-1, 0), (-1, 1), (0, 1), (1, 1), (1, 0), (1, -1), (0, -1), (-1, -1)];

/// The pixel is foreground.
const SET: u8 = 1;
/// Passes of one iteration.
const PASSES: [Pass; 2] = [Pass::LeftTop, Pass::RightBottom];

/// One of the two passes of an iteration.
#[derive(Clone, Copy)]
enum Pass {
    LeftTop,
    RightBottom,
}

/// Thins `mask` (true = foreground) to a skeleton; what lies outside the array is background.
///
/// The result is a subset of the mask and has the same number of 8-connected components. An empty array gives an empty array.
///
/// # Examples
/// ```
/// use ndarray::Array2;
/// use veerlog::trace::thin::thin;
/// let mut mask = Array2::from_elem((5, 9), false);
/// mask.slice_mut(ndarray::s![1..4, 1..8]).fill(true);
/// let skeleton = thin(mask.view());
/// assert!(skeleton.indexed_iter().all(|((row, _), &on)| !on || row == 2));
/// ```
#[must_use]
pub fn thin(mask: ArrayView2<'_, bool>) -> Array2<bool> {
    let mut peel = Peel::new(mask);
    while peel.waiting.iter().any(|waiting| !waiting.is_empty()) {
        PASSES.into_iter().for_each(|pass| peel.pass(pass));
    }
    let (rows, columns) = mask.dim();
    Array2::from_shape_fn((rows, columns), |(row, column)| peel.pixels[(row + 1) * peel.stride + column + 1] & SET != 0)
}

/// A mask with a margin of one background pixel, and for each pass the pixels it has still to test.
struct Peel {
    /// Bit 0: foreground; bits 1 and 2: waiting for pass 0 and 1.
    pixels: Vec<u8>,
    stride: usize,
    steps: [isize; 8],
    waiting: [Vec<usize>; 2],
    deletable: [[bool; 256]; 2],
}

impl Peel {
    fn new(mask: ArrayView2<'_, bool>) -> Self {
        let (rows, columns) = mask.dim();
        let stride = columns + 2;
        let mut peel = Self {
            pixels: vec![0; (rows + 2) * stride],
            stride,
            steps: NEIGHBOURS.map(|(row, column)| row * stride.cast_signed() + column),
            waiting: [Vec::new(), Vec::new()],
            deletable: PASSES.map(|pass| std::array::from_fn(|code| is_deletable(code, pass))),
        };
        for ((row, column), _) in mask.indexed_iter().filter(|(_, on)| **on) {
            peel.pixels[(row + 1) * stride + column + 1] = SET;
        }
        for at in 0..peel.pixels.len() {
            if peel.pixels[at] & SET != 0 && peel.code(at) != 255 {
                peel.wait(at);
            }
        }
        peel
    }

    /// Runs one pass over the pixels that wait for it.
    fn pass(&mut self, pass: Pass) {
        let which = pass as usize;
        let mut tested = std::mem::take(&mut self.waiting[which]);
        for &at in &tested {
            self.pixels[at] &= !(SET << (1 + which));
        }
        tested.retain(|&at| self.pixels[at] & SET != 0 && self.deletable[which][self.code(at)]);
        for &at in &tested {
            self.pixels[at] &= !SET;
        }
        for &at in &tested {
            for step in self.steps {
                self.wait(at.wrapping_add_signed(step));
            }
        }
    }

    /// Makes a foreground pixel wait for both passes.
    fn wait(&mut self, at: usize) {
        for which in 0..PASSES.len() {
            let mark = SET << (1 + which);
            if self.pixels[at] & SET != 0 && self.pixels[at] & mark == 0 {
                self.pixels[at] |= mark;
                self.waiting[which].push(at);
            }
        }
    }

    /// Which neighbours of a foreground pixel are set, one bit each. Such a pixel is never in the margin.
    fn code(&self, at: usize) -> usize {
        let set = |step: isize| usize::from(self.pixels[at.wrapping_add_signed(step)] & SET);
        self.steps.iter().enumerate().fold(0, |code, (bit, &step)| code | set(step) << bit)
    }
}

/// The rule of Guo & Hall for one neighbourhood: one component of neighbours, no end point, and on a side that this pass peels.
fn is_deletable(code: usize, pass: Pass) -> bool {
    let on = |bit: usize| code >> (bit % 8) & 1 == 1;
    let components = (0..8).step_by(2).filter(|&i| !on(i) && (on(i + 1) || on(i + 2))).count();
    let pairs = |first: usize| (0..4).filter(|i| on(first + 2 * i) || on(first + 2 * i + 1)).count();
    let thickness = pairs(7).min(pairs(0));
    let blocked = match pass {
        Pass::LeftTop => (on(4) || on(5) || !on(7)) && on(6),
        Pass::RightBottom => (on(0) || on(1) || !on(3)) && on(2),
    };
    components == 1 && (2..=3).contains(&thickness) && !blocked
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::trace::threshold::for_each_component;
    use proptest::prelude::*;

    /// The same rule by full passes over the image: slow and plain.
    fn thin_by_full_passes(mask: &Array2<bool>) -> Array2<bool> {
        let mut now = mask.clone();
        let on = |image: &Array2<bool>, row: isize, column: isize| {
            let at = (usize::try_from(row), usize::try_from(column));
            matches!(at, (Ok(row), Ok(column)) if image.get((row, column)) == Some(&true))
        };
        loop {
            let before = now.clone();
            for pass in PASSES {
                let image = now.clone();
                for ((row, column), pixel) in now.indexed_iter_mut().filter(|(_, on)| **on) {
                    let code = NEIGHBOURS.iter().enumerate().fold(0, |code, (bit, &(down, right))| {
                        let set = on(&image, row.cast_signed() + down, column.cast_signed() + right);
                        code | usize::from(set) << bit
                    });
                    *pixel = !is_deletable(code, pass);
                }
            }
            if now == before {
                return now;
            }
        }
    }

    fn components(mask: &Array2<bool>) -> usize {
        let mut count = 0;
        for_each_component(mask.view(), |_| count += 1);
        count
    }

    fn holes(mask: &Array2<bool>) -> usize {
        let (rows, columns) = mask.dim();
        let outside = image::GrayImage::from_fn(columns as u32 + 2, rows as u32 + 2, |x, y| {
            let inside = (1..=columns as u32).contains(&x) && (1..=rows as u32).contains(&y);
            image::Luma([u8::from(!(inside && mask[[y as usize - 1, x as usize - 1]]))])
        });
        let four = imageproc::region_labelling::Connectivity::Four;
        let labels = imageproc::region_labelling::connected_components(&outside, four, image::Luma([0]));
        labels.pixels().map(|label| label[0] as usize).max().unwrap() - 1
    }

    prop_compose! {
        /// Random pixels, or random discs: both kinds of mask.
        fn masks()(rows in 1_usize..20, columns in 1_usize..20)
            (pixels in proptest::collection::vec(prop::bool::weighted(0.6), rows * columns),
             discs in proptest::collection::vec((0..rows, 0..columns, 1_usize..5), 0..5),
             dotted in any::<bool>(), shape in Just((rows, columns))) -> Array2<bool> {
            Array2::from_shape_fn(shape, |(row, column)| {
                let in_disc = discs.iter().any(|&(r, c, size)|
                    row.abs_diff(r).pow(2) + column.abs_diff(c).pow(2) <= size * size);
                if dotted { pixels[row * shape.1 + column] } else { in_disc }
            })
        }
    }

    proptest! {
        #[test]
        fn equals_full_passes(mask in masks()) {
            prop_assert_eq!(thin(mask.view()), thin_by_full_passes(&mask));
        }

        #[test]
        fn keeps_components_and_holes_within_the_mask(mask in masks()) {
            let skeleton = thin(mask.view());
            prop_assert!(skeleton.iter().zip(&mask).all(|(&thin, &thick)| thick || !thin));
            prop_assert_eq!(components(&skeleton), components(&mask));
            prop_assert_eq!(holes(&skeleton), holes(&mask));
            for_each_component(mask.view(), |pixels| {
                let mut part = Array2::from_elem(mask.dim(), false);
                pixels.iter().for_each(|&at| part[at] = skeleton[at]);
                assert_eq!(components(&part), 1, "a component was lost or split");
            });
            prop_assert_eq!(thin(skeleton.view()), skeleton);
        }

        #[test]
        fn a_block_of_four_stays_only_where_branches_meet(mask in masks()) {
            let mut skeleton = Array2::from_elem((mask.nrows() + 2, mask.ncols() + 2), false);
            for (at, &on) in thin(mask.view()).indexed_iter() {
                skeleton[[at.0 + 1, at.1 + 1]] = on;
            }
            let middle = [[1, 1], [1, 2], [2, 1], [2, 2]];
            for around in skeleton.windows((4, 4)).into_iter().filter(|around| middle.iter().all(|&at| around[at])) {
                let arms = around.iter().filter(|on| **on).count() - middle.len();
                prop_assert!(arms >= 3, "{} arms", arms);
            }
        }
    }

    #[test]
    fn empty_and_single() {
        assert_eq!(thin(Array2::from_elem((0, 0), false).view()).len(), 0);
        assert!(thin(Array2::from_elem((1, 1), true).view())[[0, 0]]);
        assert_eq!(thin(Array2::from_elem((2, 2), true).view()).iter().filter(|on| **on).count(), 1);
    }
}
