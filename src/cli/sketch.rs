//! A small picture of a frame with its electrodes: as text for the terminal, as PNG for a file.

use image::{Rgb, RgbImage};
use imageproc::drawing::draw_line_segment_mut;
use ndarray::Array2;

use crate::run::block_mean;
use crate::run::manifest::clip;

/// Shades of the text picture, dark to bright.
const SHADES: [char; 8] = [' ', '.', ':', '-', '=', '+', '*', '%'];

/// Largest text picture, columns and rows: it leaves room for the rest of one screen (24 × 80 at least).
const TEXT: (usize, usize) = (64, 14);

/// Width of the PNG at most, px.
const PICTURE: u32 = 800;

/// Colours of the plating and the far edge, told apart by brightness as well as hue.
const PLATING: Rgb<u8> = Rgb([255, 170, 40]);
const FAR: Rgb<u8> = Rgb([40, 120, 230]);

/// A frame and its two electrode edges, px.
pub(super) struct Sketch<'a> {
    pub(super) plane: &'a Array2<f32>,
    pub(super) plating: &'a [[f64; 2]],
    pub(super) far: &'a [[f64; 2]],
}

impl Sketch<'_> {
    /// Lines of text: shades, `P` for the plating edge, `F` for the far edge. A character is about twice as high as wide.
    pub(super) fn text(&self) -> Vec<String> {
        let (height, width) = self.plane.dim();
        let columns = TEXT.0.min(width).min((2 * TEXT.1 * width).div_ceil(height)).max(1);
        let rows = (columns * height).div_ceil(2 * width).clamp(1, TEXT.1.min(height));
        let mut cells: Vec<Vec<char>> = self.cells(columns, rows);
        let mut mark = |edge: &[[f64; 2]], letter: char| {
            for [x, y] in walk(edge, 0.25 * as_f64(width) / as_f64(columns), width, height) {
                let place = |at: f64, size: usize, cells: usize| {
                    let inside = at >= -0.5 && at < as_f64(size) - 0.5;
                    inside.then(|| floor((at + 0.5) * as_f64(cells) / as_f64(size)).min(cells - 1))
                };
                if let (Some(column), Some(row)) = (place(x, width, columns), place(y, height, rows)) {
                    cells[row][column] = letter;
                }
            }
        };
        mark(self.far, 'F');
        mark(self.plating, 'P');
        cells.into_iter().map(|row| row.into_iter().collect()).collect()
    }

    fn cells(&self, columns: usize, rows: usize) -> Vec<Vec<char>> {
        let (height, width) = self.plane.dim();
        let mean = |row: usize, column: usize| {
            let (top, bottom) = (row * height / rows, ((row + 1) * height / rows).max(row * height / rows + 1));
            let (left, right) =
                (column * width / columns, ((column + 1) * width / columns).max(column * width / columns + 1));
            block_mean(self.plane, top..bottom, left..right)
        };
        let (low, span) = self.levels();
        let shade =
            |level: f32| SHADES[floor(f64::from((level - low) / span) * as_f64(SHADES.len())).min(SHADES.len() - 1)];
        (0..rows).map(|row| (0..columns).map(|column| shade(mean(row, column))).collect()).collect()
    }

    /// Grey levels drawn as black, and from there to white: the 1st and 99th percentile.
    fn levels(&self) -> (f32, f32) {
        let mut levels: Vec<f32> = self.plane.iter().copied().collect();
        let count = levels.len();
        let low = *levels.select_nth_unstable_by(count / 100, f32::total_cmp).1;
        let high = *levels.select_nth_unstable_by(count - 1 - count / 100, f32::total_cmp).1;
        (low, (high - low).max(f32::MIN_POSITIVE))
    }

    /// The frame, smaller where it is wide, with both edges drawn.
    pub(super) fn picture(&self) -> RgbImage {
        let (height, width) = self.plane.dim();
        let factor = width.div_ceil(PICTURE as usize).max(1);
        let (low, span) = self.levels();
        let (w, h) = (u32_of(width / factor).max(1), u32_of(height / factor).max(1));
        let mut picture = RgbImage::from_fn(w, h, |x, y| {
            let (left, top) = (x as usize * factor, y as usize * factor);
            let level = (block_mean(self.plane, top..top + factor, left..left + factor) - low) / span;
            Rgb([byte(255.0 * level); 3])
        });
        let scale = as_f64(factor);
        for (edge, colour) in [(self.far, FAR), (self.plating, PLATING)] {
            for ends in inside(edge, width, height) {
                let at = |point: [f64; 2]| (single(point[0] / scale), single(point[1] / scale));
                draw_line_segment_mut(&mut picture, at(ends[0]), at(ends[1]), colour);
            }
        }
        picture
    }
}

/// The segments of a polyline as far as they lie inside a picture.
fn inside(edge: &[[f64; 2]], width: usize, height: usize) -> Vec<[[f64; 2]; 2]> {
    let part = |ends: &[[f64; 2]]| {
        let (enter, leave) = clip(ends[0], ends[1], as_f64(width), as_f64(height))?;
        let at = |share: f64| [0, 1].map(|axis| ends[0][axis] + share * (ends[1][axis] - ends[0][axis]));
        Some([at(enter), at(leave)])
    };
    edge.windows(2).filter_map(part).collect()
}

/// Points along the part of a polyline inside a picture, at most `step` apart.
fn walk(edge: &[[f64; 2]], step: f64, width: usize, height: usize) -> Vec<[f64; 2]> {
    let mut points = Vec::new();
    for [from, to] in inside(edge, width, height) {
        let (dx, dy) = (to[0] - from[0], to[1] - from[1]);
        let count = floor(libm::hypot(dx, dy) / step) + 1;
        points.extend((0..=count).map(|at| {
            let share = as_f64(at) / as_f64(count);
            [from[0] + share * dx, from[1] + share * dy]
        }));
    }
    points
}

#[expect(clippy::cast_precision_loss, reason = "picture sizes are far below 2^53")]
fn as_f64(size: usize) -> f64 {
    size as f64
}

#[expect(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "the cast saturates; the value is a cell number"
)]
fn floor(value: f64) -> usize {
    value as usize
}

#[expect(clippy::cast_possible_truncation, reason = "drawing coordinates")]
fn single(value: f64) -> f32 {
    value as f32
}

#[expect(clippy::cast_possible_truncation, clippy::cast_sign_loss, reason = "the cast saturates, as wanted")]
fn byte(value: f32) -> u8 {
    value as u8
}

fn u32_of(size: usize) -> u32 {
    u32::try_from(size).unwrap_or(u32::MAX)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_edges_stand_where_they_are() {
        let plane = Array2::from_shape_fn((100, 200), |(row, column)| u16::try_from(row + column).unwrap().into());
        let sketch =
            Sketch { plane: &plane, plating: &[[10.0, 0.0], [10.0, 99.0]], far: &[[190.0, -1e9], [190.0, 1e9]] };
        let text = sketch.text();
        assert_eq!(text.len(), 14);
        assert!(text.iter().all(|line| line.chars().count() == text[0].chars().count()));
        assert_eq!(text[5].chars().position(|letter| letter == 'P'), Some(10 * text[0].len() / 200));
        assert!(text[5].contains('F'), "{text:?}");
        assert_eq!(sketch.picture().get_pixel(10, 50), &PLATING);
    }

    #[test]
    fn one_pixel_is_a_picture() {
        let sketch = Sketch {
            plane: &Array2::zeros((1, 1)),
            plating: &[[0.0, 0.0], [0.0, 0.4]],
            far: &[[5.0, 0.0], [5.0, 1.0]],
        };
        assert_eq!(sketch.text(), ["P"]);
        assert_eq!(sketch.picture().dimensions(), (1, 1));
    }
}
