//! A drawing as SVG 1.1 text: colours as attributes, so that the file stands alone, and as classes
//! (`s-metal` strokes, `f-metal` fills), so that the page can theme it.

use std::fmt::Write;

use super::Error;
use super::data_uri;
use super::drawing::{Anchor, Drawing, Point, Shape};
use super::outline;
use super::palette::Ink;

/// Typefaces in order of preference; the first is the one the PNG uses.
const FONTS: &str = "Noto Sans, system-ui, Segoe UI, Helvetica, Arial, sans-serif";

/// The drawing as an SVG document with `margin` of paper around it, its words as text: for the page.
///
/// # Errors
/// [`Error::Made`] when an embedded picture cannot be encoded.
pub fn write(drawing: &Drawing, margin: f64) -> Result<String, Error> {
    let size = [drawing.width, drawing.height].map(|side| (side + 2.0 * margin).to_string());
    document(drawing, margin, &size, false)
}

/// The drawing as an SVG document of a width in mm, its words as outlines: for a paper.
///
/// # Errors
/// As [`write()`], and when the typeface cannot be read.
pub fn write_for_print(drawing: &Drawing, margin: f64, width_mm: f64) -> Result<String, Error> {
    let [w, h] = [drawing.width, drawing.height].map(|side| side + 2.0 * margin);
    let size = [format!("{width_mm}mm"), format!("{}mm", short(width_mm * h / w))];
    document(drawing, margin, &size, true)
}

fn document(drawing: &Drawing, margin: f64, [width, height]: &[String; 2], outlined: bool) -> Result<String, Error> {
    let (w, h) = (drawing.width + 2.0 * margin, drawing.height + 2.0 * margin);
    let corner = 0.0 - margin;
    let mut out = format!(
        "<svg xmlns=\"http://www.w3.org/2000/svg\" viewBox=\"{corner} {corner} {w} {h}\" width=\"{width}\" height=\"{height}\" \
         role=\"img\" font-family=\"{FONTS}\">\n<title>{}</title>\n\
         <rect x=\"{corner}\" y=\"{corner}\" width=\"{w}\" height=\"{h}\"{}/>\n",
        escape(&drawing.title),
        paint("fill", Ink::Paper, 1.0),
    );
    for shape in &drawing.shapes {
        out.push_str(&element(shape, outlined)?);
        out.push('\n');
    }
    out.push_str("</svg>\n");
    Ok(out)
}

fn element(shape: &Shape, outlined: bool) -> Result<String, Error> {
    Ok(match shape {
        Shape::Line { points, ink, width, dash, opacity } => {
            let dashes = if *dash > 0.0 { format!(" stroke-dasharray=\"{dash}\"") } else { String::new() };
            format!(
                "<polyline points=\"{}\" fill=\"none\" stroke-width=\"{width}\" stroke-linejoin=\"round\" \
                 stroke-linecap=\"round\"{dashes}{}/>",
                corners(points),
                paint("stroke", *ink, *opacity),
            )
        }
        Shape::Area { points, ink, opacity } => {
            format!("<polygon points=\"{}\"{}/>", corners(points), paint("fill", *ink, *opacity))
        }
        Shape::Disc { at: [x, y], radius, ink, opacity } => {
            format!(
                "<circle cx=\"{}\" cy=\"{}\" r=\"{radius}\"{}/>",
                short(*x),
                short(*y),
                paint("fill", *ink, *opacity)
            )
        }
        Shape::Text { at, words, size, ink, anchor, bold } if outlined => {
            format!("<path d=\"{}\"{}/>", outline::path(words, *at, *size, *anchor, *bold)?, paint("fill", *ink, 1.0))
        }
        Shape::Text { at: [x, y], words, size, ink, anchor, bold } => {
            let anchor = match anchor {
                Anchor::Start => "",
                Anchor::Middle => " text-anchor=\"middle\"",
                Anchor::End => " text-anchor=\"end\"",
            };
            let weight = if *bold { " font-weight=\"700\"" } else { "" };
            format!(
                "<text x=\"{}\" y=\"{}\" font-size=\"{size}\"{anchor}{weight}{}>{}</text>",
                short(*x),
                short(*y),
                paint("fill", *ink, 1.0),
                escape(words),
            )
        }
        Shape::Picture { at: [x, y], size: [w, h], image } => format!(
            "<image x=\"{x}\" y=\"{y}\" width=\"{w}\" height=\"{h}\" preserveAspectRatio=\"none\" href=\"{}\"/>",
            data_uri::jpeg(image, data_uri::LARGE)?,
        ),
    })
}

fn paint(what: &str, ink: Ink, opacity: f64) -> String {
    let mut out = format!(" {what}=\"{}\"", ink.light().hex());
    if let Some(name) = ink.name() {
        let _infallible = write!(out, " class=\"{}-{name}\"", &what[..1]);
    }
    if opacity < 1.0 {
        let _infallible = write!(out, " {what}-opacity=\"{opacity}\"");
    }
    out
}

fn corners(points: &[Point]) -> String {
    let list: Vec<String> = points.iter().map(|[x, y]| format!("{},{}", short(*x), short(*y))).collect();
    list.join(" ")
}

/// A coordinate with two decimals at most: 1/100 of a px is finer than any screen or print.
fn short(v: f64) -> f64 {
    (v * 100.0).round() / 100.0 + 0.0
}

/// Text made inert for XML, for content and attributes alike.
pub(crate) fn escape(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for c in text.chars() {
        match c {
            '&' => out.push_str("&amp;"),
            '<' => out.push_str("&lt;"),
            '>' => out.push_str("&gt;"),
            '"' => out.push_str("&quot;"),
            '\'' => out.push_str("&#39;"),
            '\t' | '\n' => out.push(' '),
            c if c.is_control() => {}
            c => out.push(c),
        }
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn hostile_words_are_inert() {
        let mut drawing = Drawing::new(10.0, 10.0, "</title><script>alert(1)</script>");
        drawing.text([0.0, 0.0], "\" onload=\"x\u{0}", 10.0, Ink::Text, Anchor::Start);
        let svg = write(&drawing, 0.0).unwrap();
        assert!(!svg.contains("<script"));
        assert!(!svg.contains("\" onload"));
        assert!(!svg.contains('\u{0}'));
    }
}
