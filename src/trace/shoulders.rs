//! The shoulders of strong lines: evidence beside ink that is no ink itself.
//!
//! Line evidence reaches as far as its filter does. Beside a strong line what is left there still stands many standard deviations
//! above bare ceramic and would make arms to its sides. A pixel is ink only where the plane itself, averaged over its neighbours,
//! reaches a share of the strongest ink about it.
//! Limit: a line of less than that share of the contrast of another one is not seen within [`REACH`] of it.

use ndarray::Array2;
use rayon::prelude::*;

/// How far strong ink is looked for, px: the reach of the line filter along and across.
const REACH: usize = 7;
/// Share of the strongest ink about it that ink must show: a blurred line falls to a quarter of its height within a pixel of
/// its rim.
const SHARE: f32 = 0.25;

/// Sets to 0 the evidence above `low` of pixels of which `plane` shows that they are no ink.
pub(super) fn clear(z: &mut Array2<f32>, plane: &Array2<f32>, low: f32) {
    let (rows, cols) = plane.dim();
    let ink = averaged(plane);
    let strongest = dilated(&ink, REACH);
    for row in 0..rows {
        for col in 0..cols {
            if z[[row, col]] >= low && ink[[row, col]] < SHARE * strongest[[row, col]] {
                z[[row, col]] = 0.0;
            }
        }
    }
}

/// Weighted mean over 3×3 pixels (1-2-1 along both axes); the border counts as 0.
fn averaged(plane: &Array2<f32>) -> Array2<f32> {
    let (rows, cols) = plane.dim();
    let at = |row: usize, col: usize, dr: isize, dc: isize| {
        let r = row.checked_add_signed(dr).filter(|&r| r < rows);
        let c = col.checked_add_signed(dc).filter(|&c| c < cols);
        r.zip(c).map_or(0.0, |(r, c)| plane[[r, c]])
    };
    let lines: Vec<Vec<f32>> = (0..rows)
        .into_par_iter()
        .map(|row| {
            let weigh = |col: usize| {
                (-1isize..=1)
                    .flat_map(|dr| (-1isize..=1).map(move |dc| (dr, dc)))
                    .map(|(dr, dc)| ((2 - dr.abs()) * (2 - dc.abs())) as f32 / 16.0 * at(row, col, dr, dc))
                    .sum()
            };
            (0..cols).map(weigh).collect()
        })
        .collect();
    from_lines(lines, (rows, cols))
}

/// Largest value within a square of half side `reach`.
fn dilated(plane: &Array2<f32>, reach: usize) -> Array2<f32> {
    let along = |source: &Array2<f32>| {
        let (rows, cols) = source.dim();
        let lines: Vec<Vec<f32>> = (0..rows)
            .into_par_iter()
            .map(|row| {
                let top = |col: usize| {
                    let (a, b) = (col.saturating_sub(reach), (col + reach + 1).min(cols));
                    (a..b).fold(f32::NEG_INFINITY, |m, c| m.max(source[[row, c]]))
                };
                (0..cols).map(top).collect()
            })
            .collect();
        from_lines(lines, (rows, cols))
    };
    let across = along(plane);
    along(&across.t().to_owned()).t().to_owned()
}

fn from_lines(lines: Vec<Vec<f32>>, shape: (usize, usize)) -> Array2<f32> {
    Array2::from_shape_vec(shape, lines.into_iter().flatten().collect()).unwrap_or_else(|_| Array2::zeros(shape))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_side_of_a_strong_line_is_no_ink_and_a_faint_line_further_off_is() {
        let line = |col: usize| {
            if (20..24).contains(&col) {
                30.0
            } else if col == 40 {
                3.0
            } else {
                0.0
            }
        };
        let plane = Array2::from_shape_fn((40, 60), |(_, col)| line(col));
        let mut z = Array2::from_elem(plane.dim(), 5.0f32);
        clear(&mut z, &plane, 3.0);
        assert!(z[[20, 21]] > 0.0 && z[[20, 40]] > 0.0);
        assert!(z[[20, 16]].abs() < 1e-6 && z[[20, 28]].abs() < 1e-6);
    }
}
