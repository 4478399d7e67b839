//! Pictures for the eye: corrected frames as 8-bit grey, and the map of arrivals.

use image::{GrayImage, Luma};
use ndarray::Array2;

use super::Input;
use super::film::Filmed;
use crate::results::{NEVER, Pictures};
use crate::trace::Trace;

/// Share of pixels left dark and left bright when tones are chosen.
const TAIL: f64 = 0.005;

/// Grey levels shown as black and as white.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Tone {
    black: f32,
    white: f32,
}

impl Tone {
    /// Tones that show all but the extremes of a plane.
    pub(super) fn of(plane: &Array2<f32>) -> Self {
        let step = (plane.len() / 100_000).max(1);
        let mut values: Vec<f32> = plane.iter().step_by(step).copied().filter(|v| v.is_finite()).collect();
        values.sort_by(f32::total_cmp);
        let at = |share: f64| values.get(((values.len().max(1) - 1) as f64 * share) as usize).copied().unwrap_or(0.0);
        let (black, white) = (at(TAIL), at(1.0 - TAIL));
        Self { black, white: white.max(black + 1.0) }
    }

    /// The plane as an 8-bit picture.
    pub(super) fn picture(self, plane: &Array2<f32>) -> GrayImage {
        let (rows, cols) = plane.dim();
        GrayImage::from_fn(cols as u32, rows as u32, |x, y| {
            let v = (plane[[y as usize, x as usize]] - self.black) / (self.white - self.black);
            Luma([(255.0 * v.clamp(0.0, 1.0)).round() as u8])
        })
    }
}

/// Longest side of a picture of the player, px: what a page's column shows (common practice).
const FILM_SIDE_PX: u32 = 800;

/// A picture no larger than the player shows, so that memory holds few pixels of many frames.
pub(super) fn small(picture: GrayImage) -> GrayImage {
    let (w, h) = picture.dimensions();
    let largest = w.max(h);
    if largest <= FILM_SIDE_PX {
        return picture;
    }
    let side = |s: u32| (u64::from(s) * u64::from(FILM_SIDE_PX) / u64::from(largest)).max(1) as u32;
    image::imageops::resize(&picture, side(w), side(h), image::imageops::FilterType::Triangle)
}

/// The frame as it would look without drift, flicker and uneven light: the reference with what differs put back.
pub(super) fn shown(reference: &Array2<f32>, residual: &Array2<f32>, darker: bool) -> Array2<f32> {
    let sign = if darker { -1.0 } else { 1.0 };
    ndarray::Zip::from(reference)
        .and(residual)
        .par_map_collect(|&r, &d| if d.is_nan() { r } else { r * (1.0 + sign * d) })
}

/// The pictures of a finished run.
pub(super) fn finished(filmed: &Filmed, input: &Input) -> Pictures {
    let last_used = filmed.used().last().map_or(0, |u| u.frame);
    Pictures {
        first: filmed.tone.picture(&filmed.first),
        last: filmed.tone.picture(&filmed.last),
        recorded: filmed.recorded.clone(),
        film: filmed.film.iter().filter(|f| f.frame < last_used).cloned().collect(),
        arrivals: Some(arrivals(&filmed.trace, (input.sequence.height as usize, input.sequence.width as usize))),
    }
}

/// The frame at which each pixel became filament: ink is what lies within half a width of the centre-line.
fn arrivals(trace: &Trace, shape: (usize, usize)) -> Array2<u32> {
    let mut map = Array2::from_elem(shape, NEVER);
    for point in trace.paths.iter().flat_map(|p| &p.points) {
        for pixel in crate::trace::disc([point.x, point.y], 0.5 * point.width, shape) {
            map[pixel] = map[pixel].min(point.arrival as u32);
        }
    }
    map
}
