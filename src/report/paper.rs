//! Figures for papers: each at the width of one column (85 mm) and of two (170 mm), as SVG with its words outlined and
//! as PNG at 300 dots per inch, and the data behind it as CSV beside them.

use std::path::Path;

use rayon::prelude::*;

use super::drawing::{Drawing, Shape};
use super::figures::{FIGURES, Figure, Format, data};
use super::write::put;
use super::{Error, raster, svg};
use crate::results::Results;

/// Paper around a figure, in its units.
const MARGIN: f64 = 14.0;

/// Layout, width in mm and what is added to the name, of each size; two columns keep the plain name.
const SIZES: [(Format, f64, &str); 2] = [(Format::Narrow, 85.0, "-85mm"), (Format::Wide, 170.0, "")];

/// Dots per inch of a plot, and the least of a figure that shows a frame: such a file is no finer than the frame, which
/// would only make it larger (common practice).
const DPI: f64 = 300.0;
const LEAST_DPI: f64 = 150.0;

/// Millimetres of an inch.
const INCH_MM: f64 = 25.4;

/// Writes every figure that has something to show into `folder`.
///
/// # Errors
/// [`Error::Io`] when the disc refuses, [`Error::Made`] when a figure cannot be made.
pub fn write(results: &Results, folder: &Path) -> Result<(), Error> {
    FIGURES.par_iter().try_for_each(|figure| one(figure, results, folder))
}

fn one(figure: &Figure, results: &Results, folder: &Path) -> Result<(), Error> {
    for (format, width_mm, suffix) in SIZES {
        let Some(drawing) = (figure.draw)(results, format) else {
            return Ok(());
        };
        put_drawing(&drawing, width_mm, folder, &format!("{}{suffix}", figure.name))?;
    }
    match data::of(figure.name, results)? {
        Some(csv) => put(&folder.join(format!("{}.csv", figure.name)), &csv),
        None => Ok(()),
    }
}

/// Writes a drawing as `NAME.svg` and `NAME.png`, so many mm wide.
///
/// # Errors
/// As [`write()`].
pub fn put_drawing(drawing: &Drawing, width_mm: f64, folder: &Path, name: &str) -> Result<(), Error> {
    put(&folder.join(format!("{name}.svg")), svg::write_for_print(drawing, MARGIN, width_mm)?.as_bytes())?;
    let dpi = dpi(drawing, width_mm);
    let across = (width_mm / INCH_MM * dpi).round();
    let scale = across / (drawing.width + 2.0 * MARGIN);
    put(&folder.join(format!("{name}.png")), &raster::png(drawing, MARGIN, scale, dpi / INCH_MM * 1000.0)?)
}

/// 300, or as many as the frame shown has pixels for.
fn dpi(drawing: &Drawing, width_mm: f64) -> f64 {
    let frame = drawing.shapes.iter().find_map(|shape| match shape {
        Shape::Picture { size, image, .. } => Some(f64::from(image.width()) / size[0]),
        _ => None,
    });
    let units_an_inch = (drawing.width + 2.0 * MARGIN) * INCH_MM / width_mm;
    frame.map_or(DPI, |pixels_a_unit| (pixels_a_unit * units_an_inch).clamp(LEAST_DPI, DPI))
}

#[cfg(test)]
mod tests {
    use std::fs;

    use super::*;
    use crate::report::example;

    #[test]
    fn each_figure_comes_in_both_widths_with_its_data() {
        let home = tempfile::tempdir().unwrap();
        write(&example::growing(), home.path()).unwrap();
        for figure in &FIGURES {
            for (width_mm, suffix) in [(85.0, "-85mm"), (170.0, "")] {
                let file = |ending: &str| home.path().join(format!("{}{suffix}.{ending}", figure.name));
                let svg = fs::read_to_string(file("svg")).unwrap();
                assert!(svg.contains(&format!("width=\"{width_mm}mm\"")), "{}", figure.name);
                assert!(!svg.contains("<text"), "{}: words are not outlined", figure.name);
                let png = fs::read(file("png")).unwrap();
                let across = u32::from_be_bytes([png[16], png[17], png[18], png[19]]);
                let pictured = figure.name == "overlay";
                if !pictured {
                    assert_eq!(across, (width_mm / 25.4 * 300.0_f64).round() as u32, "{}", figure.name);
                }
                // 300 dots per inch are 11 811 a metre (PNG specification, chunk pHYs).
                let chunk = png.windows(4).position(|four| four == b"pHYs").unwrap();
                let dots = u32::from_be_bytes([png[chunk + 4], png[chunk + 5], png[chunk + 6], png[chunk + 7]]);
                assert!(dots == 11_811 || pictured, "{}: {dots}", figure.name);
                image::load_from_memory(&png).unwrap();
            }
            let csv = fs::read_to_string(home.path().join(format!("{}.csv", figure.name))).unwrap();
            assert!(csv.lines().count() > 1 && csv.lines().next().unwrap().contains(','), "{}: {csv}", figure.name);
        }
    }

    /// A strip of 32 × 2000 px once asked for a picture of 30 000 lines.
    #[test]
    fn a_tall_strip_stays_small() {
        let mut results = example::growing();
        results.pictures.last = image::GrayImage::new(32, 2000);
        let home = tempfile::tempdir().unwrap();
        write(&results, home.path()).unwrap();
        let (width, height) = image::image_dimensions(home.path().join("overlay.png")).unwrap();
        assert!(width <= 2008 && height <= 3500, "{width} × {height}");
    }
}
