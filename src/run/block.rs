//! Means over blocks of pixels, for small pictures of large frames.

use std::ops::Range;

use ndarray::{Array2, Axis, Slice};

/// Mean over the rows and columns given, cut to the plane; 0 where nothing is left.
///
/// ```
/// let plane = ndarray::Array2::from_shape_fn((2, 3), |(row, column)| if row == 1 && column > 0 { 4.0 } else { 0.0 });
/// assert_eq!(veerlog::run::block_mean(&plane, 0..2, 1..9), 2.0);
/// ```
#[must_use]
pub fn block_mean(plane: &Array2<f32>, rows: Range<usize>, columns: Range<usize>) -> f32 {
    let (height, width) = plane.dim();
    let (rows, columns) =
        (rows.start.min(height)..rows.end.min(height), columns.start.min(width)..columns.end.min(width));
    let mut block = plane.view();
    block.slice_axis_inplace(Axis(0), Slice::from(rows));
    block.slice_axis_inplace(Axis(1), Slice::from(columns));
    block.mean().unwrap_or(0.0)
}
