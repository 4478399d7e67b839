//! Words as outlines of the typeface in the crate, so that a figure looks the same where that typeface is missing.
//! Method: glyph contours of the font file (quadratic curves) placed one after the other with the font's own widths and
//! kerning. Limit: one line from left to right; a letter that the typeface lacks takes its replacement box.

use std::fmt::Write;
use std::sync::OnceLock;

use ab_glyph::{Font, FontRef, OutlineCurve, Point};

use super::Error;
use super::drawing::Anchor;
use super::raster::{BOLD, DASH, MINUS, REGULAR};

/// Path data of `words` at `size`, anchored at `at` on their base line.
///
/// # Errors
/// [`Error::Made`] when the typeface cannot be read.
pub fn path(words: &str, at: [f64; 2], size: f64, anchor: Anchor, bold: bool) -> Result<String, Error> {
    let font = face(bold)?;
    let scale = size / f64::from(font.units_per_em().unwrap_or(1000.0));
    let words = words.replace(MINUS, DASH);
    let (mut pen, mut before) = (0.0, None);
    let mut placed = Vec::new();
    for letter in words.chars() {
        let glyph = font.glyph_id(letter);
        if let Some(before) = before {
            pen += f64::from(font.kern_unscaled(before, glyph));
        }
        placed.push((glyph, pen));
        pen += f64::from(font.h_advance_unscaled(glyph));
        before = Some(glyph);
    }
    let left = match anchor {
        Anchor::Start => 0.0,
        Anchor::Middle => -0.5 * pen,
        Anchor::End => -pen,
    };
    let mut out = String::new();
    for (glyph, pen) in placed {
        if let Some(outline) = font.outline(glyph) {
            let place = |p: Point| {
                let [x, y] = [at[0] + (left + pen + f64::from(p.x)) * scale, at[1] - f64::from(p.y) * scale];
                [x, y].map(|v| (v * 100.0).round() / 100.0 + 0.0)
            };
            contours(&outline.curves, place, &mut out);
        }
    }
    Ok(out)
}

fn contours(curves: &[OutlineCurve], place: impl Fn(Point) -> [f64; 2], out: &mut String) {
    let mut end: Option<Point> = None;
    for curve in curves {
        let (from, to) = match curve {
            OutlineCurve::Line(a, b) | OutlineCurve::Quad(a, _, b) | OutlineCurve::Cubic(a, _, _, b) => (*a, *b),
        };
        if end != Some(from) {
            let [x, y] = place(from);
            let _infallible = write!(out, "M{x} {y}");
        }
        let [x, y] = place(to);
        let _infallible = match curve {
            OutlineCurve::Line(..) => write!(out, "L{x} {y}"),
            OutlineCurve::Quad(_, c, _) => {
                let [cx, cy] = place(*c);
                write!(out, "Q{cx} {cy} {x} {y}")
            }
            OutlineCurve::Cubic(_, c, d, _) => {
                let ([cx, cy], [dx, dy]) = (place(*c), place(*d));
                write!(out, "C{cx} {cy} {dx} {dy} {x} {y}")
            }
        };
        end = Some(to);
    }
}

fn face(bold: bool) -> Result<&'static FontRef<'static>, Error> {
    static FACES: OnceLock<Option<[FontRef<'static>; 2]>> = OnceLock::new();
    let faces =
        FACES.get_or_init(|| Some([FontRef::try_from_slice(REGULAR).ok()?, FontRef::try_from_slice(BOLD).ok()?]));
    faces
        .as_ref()
        .map(|faces| &faces[usize::from(bold)])
        .ok_or_else(|| Error::made("a figure", "the typeface cannot be read"))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Left and right end of the drawn letters.
    fn span(anchor: Anchor) -> (f64, f64) {
        let path = path("lll", [100.0, 50.0], 20.0, anchor, false).unwrap();
        let numbers: Vec<f64> =
            path.split(|c: char| !(c.is_ascii_digit() || c == '.')).filter_map(|n| n.parse().ok()).collect();
        let xs = numbers.iter().step_by(2);
        (xs.clone().copied().fold(f64::INFINITY, f64::min), xs.copied().fold(0.0, f64::max))
    }

    #[test]
    fn anchored_words_stand_where_they_should() {
        let (start, middle, end) = (span(Anchor::Start), span(Anchor::Middle), span(Anchor::End));
        assert!(start.0 > 100.0 && start.0 < 104.0, "{start:?}");
        assert!(end.1 < 100.0 && end.1 > 96.0, "{end:?}");
        assert!((middle.0 + middle.1 - 200.0).abs() < 1.0, "{middle:?}");
    }

    #[test]
    fn letters_that_are_missing_do_not_stop_it() {
        assert!(path("−5 µm \u{202e}\u{10ffff}", [0.0, 0.0], 10.0, Anchor::Start, true).unwrap().starts_with('M'));
    }
}
