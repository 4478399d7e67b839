//! The last usable frame with every centre-line, coloured by arrival; edges, scale bar, load axis.

use image::GrayImage;

use super::Format;
use super::arrival::{ArrivalScale, COLOURS, colour};
use super::key::LETTER;
use crate::measure::FrameRow;
use crate::report::axes::{Range, SMALL};
use crate::report::drawing::{Anchor, Drawing, Point, Shape};
use crate::report::palette::Ink;
use crate::report::words::fixed;
use crate::results::Results;
use crate::trace::TracePath;

pub(super) fn draw(results: &Results, format: Format) -> Option<Drawing> {
    let image = &results.pictures.last;
    if image.width() == 0 || image.height() == 0 {
        return None;
    }
    let [w, h] = [image.width(), image.height()].map(f64::from);
    let scale = (format.width() / w).min(TALLEST * format.width() / h);
    let size = [w * scale, h * scale];
    let mut drawing =
        Drawing::new(format.width(), size[1] + 92.0, "Last frame with traced filaments, coloured by arrival");
    drawing.shapes.push(Shape::Picture { at: [0.0, 0.0], size, image: image.clone() });
    on_picture(&mut drawing, results, size, results.frames.iter().rev().find(|row| row.usable));
    foot(&mut drawing, results, &ArrivalScale::of(results), size[0] / w, size[1]);
    Some(drawing)
}

/// Greatest height of the picture, in widths of the drawing: what is taller is made narrower.
const TALLEST: f64 = 1.25;

/// A frame alone, with what had arrived by it: a scene of the animation, as wide as the widest layout. `picture` may be
/// smaller than the recorded frame.
pub(in crate::report) fn scene(results: &Results, picture: &GrayImage, frame: usize) -> Drawing {
    let [w, h] = [picture.width(), picture.height()].map(|side| f64::from(side.max(1)));
    let scale = SCENE / w.max(h);
    let size = [w * scale, h * scale];
    let mut drawing = Drawing::new(size[0], size[1], "Frame with what had grown by it");
    drawing.shapes.push(Shape::Picture { at: [0.0, 0.0], size, image: picture.clone() });
    on_picture(&mut drawing, results, size, results.frames.get(frame));
    drawing
}

/// Longer side of a scene.
const SCENE: f64 = 560.0;

/// Edges, what had arrived by a frame, and the load then in force, on a picture of this size at the origin.
fn on_picture(drawing: &mut Drawing, results: &Results, size: Point, at: Option<&FrameRow>) {
    let [w, _] = results.facts.frame_size.map(f64::from);
    let w = if w > 0.0 { w } else { f64::from(results.pictures.last.width()) };
    let scale = size[0] / w;
    let place = move |p: &Point| [(p[0] + 0.5) * scale, (p[1] + 0.5) * scale];
    edges(drawing, results, place);
    let arrivals = ArrivalScale::of(results);
    let frame = at.map_or(usize::MAX, |row| row.frame);
    for path in &results.trace.paths {
        centre_line(drawing, &arrivals, path, frame, place);
    }
    if let Some(row) = at {
        load_axis(drawing, row, size);
    }
}

/// 1 where a stress presses, −1 where it pulls, 0 where there is none.
pub(in crate::report) fn push(stress_mpa: f64) -> i8 {
    match stress_mpa {
        s if s > 0.0 => 1,
        s if s < 0.0 => -1,
        _ => 0,
    }
}

/// The load axis on the picture, in its lower right corner: arrows inwards where it presses, outwards where it pulls.
fn load_axis(drawing: &mut Drawing, row: &FrameRow, [width, height]: Point) {
    /// Half the length of the mark, as a share of the picture's shorter side.
    const HALF: f64 = 0.07;
    let Some(angle) = row.load_direction_deg else { return };
    let half = HALF * width.min(height);
    let inset = half + 0.02 * width;
    let centre = [width - inset, height - inset];
    let (sin, cos) = (angle.to_radians().sin(), angle.to_radians().cos());
    let place = |along: f64, off: f64| [centre[0] + along * cos + off * sin, centre[1] - along * sin + off * cos];
    let mut lines = vec![vec![place(-half, 0.0), place(half, 0.0)]];
    let (tip, back) = match row.stress_mpa.map_or(0, push) {
        1 => (0.24, 0.60),
        -1 => (1.0, 0.64),
        _ => (0.0, 0.0),
    };
    if tip > 0.0 {
        for side in [-half, half] {
            let barb = 0.24 * half;
            lines.push(vec![place(side * back, -barb), place(side * tip, 0.0), place(side * back, barb)]);
        }
    }
    for (ink, width, opacity) in [(Ink::Black, 5.6, 0.75), (Ink::LoadMark, 2.6, 1.0)] {
        for line in &lines {
            drawing.stroke(line.clone(), ink, width, 0.0, opacity);
        }
    }
}

fn edges(drawing: &mut Drawing, results: &Results, place: impl Fn(&Point) -> Point) {
    for (edge, dash) in [(&results.facts.plating_edge, 0.0), (&results.facts.far_edge, 6.0)] {
        let points: Vec<Point> = edge.iter().map(&place).collect();
        drawing.stroke(points.clone(), Ink::Black, 3.6, 0.0, 0.5);
        drawing.stroke(points, Ink::White, 1.6, dash, 1.0);
    }
}

/// A dark casing, then a stretch in each colour; stretches overlap by one point, so no gap shows.
fn centre_line(
    drawing: &mut Drawing,
    scale: &ArrivalScale,
    path: &TracePath,
    frame: usize,
    place: impl Fn(&Point) -> Point,
) {
    let points: Vec<Point> =
        path.points.iter().take_while(|p| p.arrival <= frame).map(|p| place(&[p.x, p.y])).collect();
    let ink = |i: usize| scale.ink(path.points[i].arrival);
    drawing.stroke(points.clone(), Ink::Black, 3.8, 0.0, 0.55);
    let mut from = 0;
    for i in 1..points.len() {
        if i + 1 == points.len() || ink(i) != ink(i + 1) {
            drawing.line(points[from..=i].to_vec(), ink(i), 2.2);
            from = i;
        }
    }
}

/// Below the picture: colour bar, scale bar, names of the edges, load axis.
fn foot(drawing: &mut Drawing, results: &Results, arrivals: &ArrivalScale, scale: f64, top: f64) {
    let width = drawing.width;
    colour_bar(drawing, arrivals, [0.0, top + 22.0], (width * 0.46).min(300.0));
    let room = (width * 0.30).min(f64::from(results.pictures.last.width()) * scale);
    let (um, px) = scale_bar(results.facts.um_per_px, room / scale);
    let right = width - 2.0;
    let y = top + 27.0;
    drawing.line(vec![[right - px * scale, y], [right, y]], Ink::Text, 3.0);
    drawing.text(
        [right, y + 17.0],
        format!("{} µm", fixed(um, if um < 1.0 { 2 } else { 0 })),
        SMALL,
        Ink::Quiet,
        Anchor::End,
    );
    let y = top + 80.0;
    drawing.line(vec![[0.0, y - 4.0], [24.0, y - 4.0]], Ink::Text, 1.6);
    let mut x = name(drawing, [30.0, y], "plating edge");
    drawing.dashed(vec![[x, y - 4.0], [x + 24.0, y - 4.0]], Ink::Text, 1.6);
    x = name(drawing, [x + 30.0, y], "far edge");
    let last = results.frames.iter().rev().find(|row| row.usable);
    if let Some(angle) = last.and_then(|row| row.load_direction_deg) {
        let (dx, dy) = (10.0 * angle.to_radians().cos(), -10.0 * angle.to_radians().sin());
        let [cx, cy] = [x + 12.0, y - 4.0];
        drawing.line(vec![[cx - dx, cy - dy], [cx + dx, cy + dy]], Ink::Load, 3.0);
        name(drawing, [x + 30.0, y], "load axis");
    }
}

/// Writes the words and gives the x where the next mark may start.
fn name(drawing: &mut Drawing, at: Point, words: &str) -> f64 {
    drawing.text(at, words, SMALL, Ink::Quiet, Anchor::Start);
    at[0] + words.chars().count() as f64 * SMALL * LETTER + 18.0
}

fn colour_bar(drawing: &mut Drawing, arrivals: &ArrivalScale, at: Point, width: f64) {
    for step in 0..COLOURS {
        let [x0, x1] = [step, step + 1].map(|s| at[0] + width * f64::from(s) / f64::from(COLOURS));
        let corners = vec![[x0, at[1]], [x1, at[1]], [x1, at[1] + 10.0], [x0, at[1] + 10.0]];
        drawing.area(corners, colour(step), 1.0);
    }
    let unit = arrivals.unit;
    let range = Range::new(arrivals.time.low / unit.seconds, arrivals.time.high / unit.seconds);
    for tick in range.ticks((width / 60.0) as usize) {
        let x = at[0] + width * (tick - range.low) / (range.high - range.low);
        drawing.line(vec![[x, at[1] + 10.0], [x, at[1] + 14.0]], Ink::Quiet, 1.0);
        let anchor = if x < at[0] + 8.0 { Anchor::Start } else { Anchor::Middle };
        drawing.text(
            [x, at[1] + 26.0],
            fixed(tick, usize::from(range.high - range.low < 4.0)),
            SMALL,
            Ink::Quiet,
            anchor,
        );
    }
    drawing.text([at[0], at[1] - 6.0], format!("arrival ({})", unit.name), SMALL, Ink::Quiet, Anchor::Start);
}

/// The longest round length that fits in `room_px`: its length in µm and in px of the frame.
pub(in crate::report) fn scale_bar(um_per_px: f64, room_px: f64) -> (f64, f64) {
    let room = room_px * um_per_px;
    let power = 10_f64.powf(room.log10().floor());
    let um = [5.0, 2.0, 1.0].into_iter().map(|m| m * power).find(|um| *um <= room).unwrap_or(power);
    (um, um / um_per_px)
}
