//! How far a line stands out from the other lines round about: its evidence over what most crests in its neighbourhood have.
//! Grain boundaries, paper fibres and stains make many lines of like evidence, a filament one that exceeds them.
//!
//! Method: the upper quartile of the evidence on crests, either polarity's own, in windows about the nodes of a grid; bilinear in
//! between. Limit: where filaments make up more than a quarter of all crests within a window they are taken for texture.

use ndarray::Array2;
use rayon::prelude::*;

use crate::scene::plane::{median, quantile};

/// Distance of the grid's nodes, px.
const STEP: usize = 24;
/// Half side of a window, px: wider than any bundle of filaments.
const REACH: usize = 96;
/// Share of crests that are texture.
const USUAL: f64 = 0.75;
/// Crest pixels from which a window tells anything.
const LEAST: usize = 30;

/// Evidence over that of the crests round about; 0 off the crest.
#[must_use]
pub(crate) fn standing_out(z: &Array2<f32>, crest: &Array2<bool>) -> Array2<f32> {
    let (rows, columns) = z.dim();
    let nodes_of = |length: usize| length.div_ceil(STEP) + 1;
    let shape = (nodes_of(rows), nodes_of(columns));
    let levels: Vec<f32> = (0..shape.0 * shape.1)
        .into_par_iter()
        .map(|node| level(z, crest, [node / shape.1 * STEP, node % shape.1 * STEP]))
        .collect();
    let usual = median(&mut levels.clone()).unwrap_or(f32::INFINITY);
    let levels: Vec<f32> = levels.into_iter().map(|v| if v.is_finite() { v } else { usual }).collect();
    let Ok(nodes) = Array2::from_shape_vec(shape, levels) else { return Array2::zeros((rows, columns)) };
    Array2::from_shape_fn((rows, columns), |(row, column)| {
        if !crest[[row, column]] {
            return 0.0;
        }
        let (y, x) = (row as f32 / STEP as f32, column as f32 / STEP as f32);
        let (y0, x0) = (y as usize, x as usize);
        let (fy, fx) = (y - y0 as f32, x - x0 as f32);
        let line = |r: usize| nodes[[r, x0]] + fx * (nodes[[r, x0 + 1]] - nodes[[r, x0]]);
        z[[row, column]] / (line(y0) + fy * (line(y0 + 1) - line(y0)))
    })
}

/// Upper quartile of the evidence on crests in the window about a pixel; infinite where there are too few.
fn level(z: &Array2<f32>, crest: &Array2<bool>, at: [usize; 2]) -> f32 {
    let span = |k: usize, length: usize| k.saturating_sub(REACH).min(length)..(k + REACH + 1).min(length);
    let columns = span(at[1], z.ncols());
    let mut on: Vec<f32> = span(at[0], z.nrows())
        .flat_map(|row| columns.clone().map(move |column| [row, column]))
        .filter(|&p| crest[p])
        .map(|p| z[p])
        .collect();
    if on.len() < LEAST { f32::INFINITY } else { quantile(&mut on, USUAL).unwrap_or(f32::INFINITY) }
}
