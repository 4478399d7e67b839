//! Uneven light at scales larger than any filament, and a frame's own smooth background.
//! Method: means of small blocks, the median over a window of blocks, bilinear in between. Block means carry little
//! noise, so that the few blocks a filament crosses stand out and move the median by next to nothing.
//! Limit: what covers more than about a third of the window is taken for background.

use ndarray::Array2;
use rayon::prelude::*;

use super::plane::{blur, median, rows_mut};

/// Size of a background window.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Window {
    /// Side of a block, px.
    pub(crate) block: usize,
    /// Blocks on each side of the middle one.
    pub(crate) reach: usize,
}

/// Light that changes over about a hundred px: wider than any filament or bundle of them.
pub(crate) const UNEVEN_LIGHT: Window = Window { block: 8, reach: 6 };
/// A frame's own background: 104 px wide, so that a line of 25 px covers a quarter of it.
pub(crate) const OWN_BACKGROUND: Window = Window { block: 8, reach: 6 };
/// Least reach to which a window shrinks at the picture's border to stay centred, blocks.
const LEAST_REACH: usize = 2;
/// Share of a block's pixels that must be left for its mean to count.
const LEAST_SHARE: f32 = 0.25;

/// Smooth background of a plane, finite everywhere unless nothing in the plane is. NaN and `excluded` pixels do not
/// count.
pub(crate) fn background(plane: &Array2<f32>, excluded: Option<&Array2<bool>>, window: Window) -> Array2<f32> {
    let means = block_means(plane, excluded, window.block);
    let mut nodes = window_medians(&means, window.reach);
    fill_gaps(&mut nodes);
    spread(&blur(&nodes, 1.0), plane.dim(), window.block)
}

/// Means of blocks (the last ones may be smaller); NaN where too little is left.
fn block_means(plane: &Array2<f32>, excluded: Option<&Array2<bool>>, block: usize) -> Array2<f32> {
    let (height, width) = plane.dim();
    let mut means = Array2::<f32>::zeros((height.div_ceil(block), width.div_ceil(block)));
    rows_mut(&mut means).for_each(|(by, row)| {
        let rows = by * block..((by + 1) * block).min(height);
        for (bx, mean) in row.iter_mut().enumerate() {
            let (mut sum, mut count, mut all) = (0.0_f32, 0.0_f32, 0.0_f32);
            for y in rows.clone() {
                for x in bx * block..((bx + 1) * block).min(width) {
                    let value = plane[[y, x]];
                    let counts = value.is_finite() && !excluded.is_some_and(|e| e[[y, x]]);
                    sum += if counts { value } else { 0.0 };
                    count += f32::from(u8::from(counts));
                    all += 1.0;
                }
            }
            *mean = if count > LEAST_SHARE * all { sum / count } else { f32::NAN };
        }
    });
    means
}

/// Median over the window around each block. Towards the border the window shrinks, so that it stays centred and a
/// slope of the light does not tilt it.
fn window_medians(means: &Array2<f32>, reach: usize) -> Array2<f32> {
    let (height, width) = means.dim();
    let around = |at: usize, length: usize| {
        let room = at.min(length - 1 - at).clamp(LEAST_REACH, reach);
        at.saturating_sub(room)..(at + room + 1).min(length)
    };
    let mut out = Array2::<f32>::zeros((height, width));
    rows_mut(&mut out).for_each_init(Vec::new, |values, (y, row)| {
        for (x, value) in row.iter_mut().enumerate() {
            values.clear();
            for yy in around(y, height) {
                values.extend(around(x, width).map(|xx| means[[yy, xx]]));
            }
            *value = median(values).unwrap_or(f32::NAN);
        }
    });
    out
}

/// Gives nodes without any pixel the median of the others (0 when there is none).
fn fill_gaps(nodes: &mut Array2<f32>) {
    let mut finite: Vec<f32> = nodes.iter().copied().collect();
    let middle = median(&mut finite).unwrap_or(0.0);
    nodes.mapv_inplace(|v| if v.is_finite() { v } else { middle });
}

/// Bilinear interpolation of block values to every pixel; flat beyond the outermost block centres.
fn spread(nodes: &Array2<f32>, shape: (usize, usize), block: usize) -> Array2<f32> {
    let place = |at: usize, length: usize| {
        let position = ((at as f32 + 0.5) / block as f32 - 0.5).clamp(0.0, (length - 1) as f32);
        let low = position.floor();
        (low as usize, (low as usize + 1).min(length - 1), position - low)
    };
    let columns: Vec<_> = (0..shape.1).map(|x| place(x, nodes.ncols())).collect();
    let mut out = Array2::<f32>::zeros(shape);
    rows_mut(&mut out).for_each(|(y, row)| {
        let (y0, y1, fy) = place(y, nodes.nrows());
        for (value, &(x0, x1, fx)) in row.iter_mut().zip(&columns) {
            let across = |r: usize| nodes[[r, x0]] + fx * (nodes[[r, x1]] - nodes[[r, x0]]);
            let (top, bottom) = (across(y0), across(y1));
            *value = top + fy * (bottom - top);
        }
    });
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_slope_comes_back_and_a_line_does_not() {
        let slope = |y: usize, x: usize| 100.0 + 0.1 * x as f32 - 0.05 * y as f32;
        let plane =
            Array2::from_shape_fn((160, 200), |(y, x)| slope(y, x) * if (90..100).contains(&x) { 0.7 } else { 1.0 });
        let found = background(&plane, None, OWN_BACKGROUND);
        for (y, x) in [(20, 20), (80, 95), (100, 60), (140, 180)] {
            assert!((found[[y, x]] / slope(y, x) - 1.0).abs() < 0.02, "{y} {x}: {}", found[[y, x]]);
        }
    }

    #[test]
    fn nothing_left_gives_zero() {
        let found = background(&Array2::from_elem((20, 30), f32::NAN), None, UNEVEN_LIGHT);
        assert!(found.iter().all(|v| v.abs() < f32::EPSILON));
    }
}
