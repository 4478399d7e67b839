//! A drawing as pixels and as PNG, through plotters' bitmap backend and the typeface in the crate.
//! It is painted at twice the wanted size and averaged down: smooth edges for lines of any slope.

use std::sync::OnceLock;

use image::codecs::png::{CompressionType, FilterType as PngFilter, PngEncoder};
use image::imageops::{FilterType, replace, resize, thumbnail};
use image::{ExtendedColorType, ImageEncoder, RgbImage};
use plotters::prelude::{BitMapBackend, DrawingBackend, FontStyle, RGBColor, TextStyle};
use plotters::style::text_anchor::{HPos, Pos, VPos};
use plotters::style::{Color, IntoFont, register_font};

use super::Error;
use super::drawing::{Anchor, Drawing, Point, Shape};
use super::palette::Ink;

/// Name under which the typeface is registered.
const FACE: &str = "veerlog-sans";

/// How much larger than wanted it is painted.
const OVERSAMPLING: f64 = 2.0;

/// The typeface.
pub(super) const REGULAR: &[u8] = include_bytes!("fonts/NotoSans-Regular.ttf");
pub(super) const BOLD: &[u8] = include_bytes!("fonts/NotoSans-Bold.ttf");

/// The drawing in pixels, `scale` pixels for each of its units, with `margin` units of paper around it.
///
/// # Errors
/// [`Error::Made`] when the typeface cannot be read or a shape cannot be painted.
pub fn paint(drawing: &Drawing, margin: f64, scale: f64) -> Result<RgbImage, Error> {
    let fine = scale * OVERSAMPLING;
    let side = |length: f64, by: f64| (length * by).round().max(1.0) as u32;
    let [w, h] = [drawing.width, drawing.height].map(|length| length + 2.0 * margin);
    let paper = Ink::Paper.light();
    let mut picture = RgbImage::from_pixel(side(w, fine), side(h, fine), image::Rgb([paper.0, paper.1, paper.2]));
    register()?;
    let place = |p: &Point| p.map(|v| ((v + margin) * fine).round() as i32);
    for shape in &drawing.shapes {
        if let Shape::Picture { at, size, image } = shape {
            let enlarged = resize(image, side(size[0], fine), side(size[1], fine), FilterType::Triangle);
            let rgb = image::DynamicImage::ImageLuma8(enlarged).to_rgb8();
            let [x, y] = place(at);
            replace(&mut picture, &rgb, x.into(), y.into());
        } else {
            let size = picture.dimensions();
            let mut backend = BitMapBackend::with_buffer(&mut picture, size);
            element(&mut backend, shape, fine, |p| place(p).into()).map_err(|why| Error::made("a figure", why))?;
        }
    }
    Ok(thumbnail(&picture, side(w, scale), side(h, scale)))
}

/// The drawing as a PNG file for print, `scale` pixels for each of its units, that says how many dots make a metre.
///
/// # Errors
/// As [`paint`].
pub fn png(drawing: &Drawing, margin: f64, scale: f64, dots_per_metre: f64) -> Result<Vec<u8>, Error> {
    let picture = paint(drawing, margin, scale)?;
    let mut file = Vec::new();
    PngEncoder::new_with_quality(&mut file, CompressionType::Default, PngFilter::Adaptive)
        .write_image(&picture, picture.width(), picture.height(), ExtendedColorType::Rgb8)
        .map_err(|why| Error::made("a figure", why))?;
    file.splice(HEAD..HEAD, size_chunk(dots_per_metre.round() as u32));
    Ok(file)
}

/// Bytes of a PNG up to the end of its first chunk: signature and IHDR (PNG specification, third edition, section 5).
const HEAD: usize = 33;

/// The chunk `pHYs`: dots a metre across and down (PNG specification, section 11.3.4.3).
fn size_chunk(dots: u32) -> Vec<u8> {
    let mut body = b"pHYs".to_vec();
    body.extend(dots.to_be_bytes());
    body.extend(dots.to_be_bytes());
    body.push(1);
    let mut chunk = 9_u32.to_be_bytes().to_vec();
    chunk.extend(&body);
    chunk.extend(crc(&body).to_be_bytes());
    chunk
}

/// Cyclic redundancy check of a chunk (PNG specification, annex D).
fn crc(bytes: &[u8]) -> u32 {
    const POLYNOMIAL: u32 = 0xedb8_8320;
    let step = |crc: u32, byte: &u8| {
        (0..8).fold(crc ^ u32::from(*byte), |c, _| if c & 1 == 1 { POLYNOMIAL ^ (c >> 1) } else { c >> 1 })
    };
    !bytes.iter().fold(u32::MAX, step)
}

/// Makes the typeface known to the library, once.
fn register() -> Result<(), Error> {
    static DONE: OnceLock<bool> = OnceLock::new();
    let known = *DONE.get_or_init(|| {
        register_font(FACE, FontStyle::Normal, REGULAR).is_ok() && register_font(FACE, FontStyle::Bold, BOLD).is_ok()
    });
    if known { Ok(()) } else { Err(Error::made("a figure", "the typeface cannot be read")) }
}

fn element<B: DrawingBackend>(
    backend: &mut B,
    shape: &Shape,
    scale: f64,
    place: impl Fn(&Point) -> (i32, i32),
) -> Result<(), String> {
    let colour = |ink: Ink, opacity: f64| {
        let rgb = ink.light();
        RGBColor(rgb.0, rgb.1, rgb.2).mix(opacity)
    };
    match shape {
        Shape::Line { points, ink, width, dash, opacity } => {
            let style = colour(*ink, *opacity).stroke_width((width * scale).round().max(1.0) as u32);
            dashes(points, *dash).iter().try_for_each(|piece| backend.draw_path(piece.iter().map(&place), &style))
        }
        Shape::Area { points, ink, opacity } => {
            backend.fill_polygon(points.iter().map(&place), &colour(*ink, *opacity))
        }
        Shape::Disc { at, radius, ink, opacity } => {
            let r = (radius * scale).round().max(1.0) as u32;
            backend.draw_circle(place(at), r, &colour(*ink, *opacity), true)
        }
        Shape::Text { at, words, size, ink, anchor, bold } => {
            let style = if *bold { FontStyle::Bold } else { FontStyle::Normal };
            let h_pos = match anchor {
                Anchor::Start => HPos::Left,
                Anchor::Middle => HPos::Center,
                Anchor::End => HPos::Right,
            };
            let font: TextStyle<'_> = (FACE, size * scale, style).into_font().into();
            let ink = colour(*ink, 1.0);
            let style = font.color(&ink).pos(Pos::new(h_pos, VPos::Bottom));
            let base = [at[0], at[1] + size * DESCENT];
            backend.draw_text(&words.replace(MINUS, DASH), &style, place(&base))
        }
        Shape::Picture { .. } => Ok(()),
    }
    .map_err(|why| why.to_string())
}

/// The typeface holds no minus sign; its en dash is as wide and as high.
pub(super) const MINUS: char = '\u{2212}';
pub(super) const DASH: &str = "\u{2013}";

/// Part of the type's height that hangs below its base line (from the typeface's own metrics).
const DESCENT: f64 = 0.24;

/// The line cut into dashes of length `dash` with gaps as long; whole when `dash` is 0.
fn dashes(points: &[Point], dash: f64) -> Vec<Vec<Point>> {
    if dash <= 0.0 {
        return vec![points.to_vec()];
    }
    let mut pieces = vec![vec![points[0]]];
    let (mut left, mut on) = (dash, true);
    for pair in points.windows(2) {
        let ([ax, ay], [bx, by]) = (pair[0], pair[1]);
        let length = (bx - ax).hypot(by - ay);
        let mut done = 0.0;
        while length - done > left {
            done += left;
            let corner = [ax + (bx - ax) * done / length, ay + (by - ay) * done / length];
            if on && let Some(piece) = pieces.last_mut() {
                piece.push(corner);
            } else {
                pieces.push(vec![corner]);
            }
            (left, on) = (dash, !on);
        }
        left -= length - done;
        if on && let Some(piece) = pieces.last_mut() {
            piece.push(pair[1]);
        }
    }
    pieces.retain(|piece| piece.len() > 1);
    pieces
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn dashes_cover_half_of_a_line() {
        let pieces = dashes(&[[0.0, 0.0], [40.0, 0.0]], 5.0);
        assert_eq!(pieces.len(), 4);
        assert_eq!(pieces[1], [[10.0, 0.0], [15.0, 0.0]]);
    }

    /// Check value of CRC-32 (ISO-HDLC) for the nine digits, as published in the RevEng catalogue (from memory).
    #[test]
    fn the_check_of_a_chunk() {
        assert_eq!(crc(b"123456789"), 0xcbf4_3926);
    }

    #[test]
    fn a_disc_is_painted_where_it_stands() {
        let mut drawing = Drawing::new(20.0, 10.0, "");
        drawing.disc([15.0, 5.0], 3.0, Ink::Black, 1.0);
        let picture = paint(&drawing, 0.0, 2.0).unwrap();
        assert_eq!(picture.dimensions(), (40, 20));
        assert!(picture.get_pixel(30, 10).0[0] < 60);
        assert!(picture.get_pixel(10, 10).0[0] > 240);
    }
}
