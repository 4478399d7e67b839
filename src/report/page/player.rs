//! The picture of the page: last frame, traced centre-lines, and the frames to scrub through.

use std::fmt::Write;

use serde::Serialize;

use crate::report::Error;
use crate::report::data_uri;
use crate::report::figures::arrival::ArrivalScale;
use crate::report::figures::overlay::scale_bar;
use crate::report::words::{duration, fixed, trimmed};
use crate::results::Results;
use crate::trace::TracePath;

/// Says what is seen where something grew.
const TRACED: &str = "Last usable frame, drift and uneven light removed, with every traced centre-line. What is traced is the visible \
     track (crack, metal or both), as projected on the picture.";

/// Says what is seen where nothing grew.
const BARE: &str = "Last usable frame, drift and uneven light removed. No filament was traced in it.";

/// The player in ready strings.
#[derive(Serialize)]
pub(super) struct Player {
    width: u32,
    height: u32,
    last: String,
    traces: String,
    plating: String,
    far: String,
    /// Label of the scale bar and its width, per cent of the picture's.
    bar: [String; 2],
    ramp_from: String,
    ramp_to: String,
    unit: &'static str,
    film: Vec<Shot>,
    has_axis: bool,
    /// Where the mark of the load axis stands on the picture, px, and its scale.
    mark: [String; 3],
    alt: String,
    caption: &'static str,
}

/// One frame to scrub to; the last is the last usable frame.
#[derive(Serialize)]
struct Shot {
    /// Its number, compared with the arrivals of the traces.
    frame: usize,
    /// Its time, in words.
    time: String,
    /// What was measured in it, in words.
    said: String,
    /// Load axis, degrees.
    axis: Option<f64>,
    /// 1 where the load presses, −1 where it pulls, 0 where the stress is none or not known.
    push: i8,
    /// The picture; empty for the last frame, which the page holds already.
    src: String,
}

/// `None` without a picture.
pub(super) fn of(results: &Results) -> Result<Option<Player>, Error> {
    let last = &results.pictures.last;
    let (width, height) = last.dimensions();
    if width == 0 || height == 0 {
        return Ok(None);
    }
    let film = film(results)?;
    let arrivals = ArrivalScale::of(results);
    let unit = arrivals.unit;
    let (um, px) = scale_bar(results.facts.um_per_px, f64::from(width) * 0.25);
    Ok(Some(Player {
        width,
        height,
        last: data_uri::jpeg(last, data_uri::LARGE)?,
        traces: traces(results, &arrivals, &film),
        plating: corners(&results.facts.plating_edge),
        far: corners(&results.facts.far_edge),
        bar: [format!("{} µm", fixed(um, usize::from(um < 1.0) * 2)), fixed(100.0 * px / f64::from(width), 2)],
        ramp_from: trimmed(arrivals.time.low / unit.seconds, 3),
        ramp_to: trimmed(arrivals.time.high / unit.seconds, 3),
        unit: unit.name,
        mark: mark(width, height),
        has_axis: film.iter().any(|shot| shot.axis.is_some()),
        film,
        caption: if results.trace.filaments.is_empty() { BARE } else { TRACED },
        alt: format!("Last usable frame with {} traced filaments, coloured by arrival", results.trace.filaments.len()),
    }))
}

/// The frames to scrub through, the last usable one at the end.
fn film(results: &Results) -> Result<Vec<Shot>, Error> {
    let end = results.frames.iter().rev().find(|row| row.usable).map_or(0, |row| row.frame);
    let mut shots = Vec::new();
    for shot in results.pictures.film.iter().filter(|shot| shot.frame < end) {
        shots.push(self::shot(results, shot.frame, data_uri::jpeg(&shot.picture, data_uri::SMALL)?));
    }
    shots.push(shot(results, end, String::new()));
    Ok(shots)
}

fn shot(results: &Results, frame: usize, src: String) -> Shot {
    let row = results.frames.get(frame);
    let mut said = Vec::new();
    if let Some(row) = row {
        said.extend(row.depth_um.map(|depth| format!("depth {} µm", fixed(depth, 0))));
        said.extend(row.tips.map(|tips| format!("{tips} tips")));
        said.extend(row.stress_mpa.map(|stress| format!("{} MPa", fixed(stress, 0))));
    }
    Shot {
        frame,
        time: duration(row.map_or(0.0, |row| row.time_s)),
        said: said.join(" · "),
        axis: row.and_then(|row| row.load_direction_deg),
        push: row.and_then(|row| row.stress_mpa).map_or(0, crate::report::figures::overlay::push),
        src,
    }
}

/// The mark of the load axis in the lower right corner; its arrows are drawn 62 long.
fn mark(width: u32, height: u32) -> [String; 3] {
    /// Length of the mark as a share of the picture's width.
    const SHARE: f64 = 0.11;
    let (width, height) = (f64::from(width), f64::from(height));
    let half = 0.5 * SHARE * width;
    let inset = half + 0.02 * width;
    [width - inset, height - inset, half / 31.0].map(|number| fixed(number, 3))
}

/// Corners as SVG wants them, pixel centres at half.
fn corners(edge: &[[f64; 2]]) -> String {
    let list: Vec<String> = edge.iter().map(|[x, y]| format!("{:.1},{:.1}", x + 0.5, y + 0.5)).collect();
    list.join(" ")
}

/// A group a filament: first all dark casings, then the colours, so that no casing covers a colour.
fn traces(results: &Results, arrivals: &ArrivalScale, film: &[Shot]) -> String {
    let mut out = String::new();
    for filament in &results.trace.filaments {
        let number = filament.filament;
        let paths = results.trace.paths.iter().filter(|path| path.filament == number);
        let stretches: Vec<Stretch> = paths.flat_map(|path| stretches(arrivals, film, path)).collect();
        let _infallible =
            write!(out, "<g class=\"filament\" data-filament=\"{number}\"><title>filament {number}</title>");
        for Stretch { shot, points, .. } in &stretches {
            let _infallible = write!(out, "<polyline class=\"casing\" data-shot=\"{shot}\" points=\"{points}\"/>");
        }
        for Stretch { shot, points, colour } in &stretches {
            let _infallible = write!(out, "<polyline data-shot=\"{shot}\" stroke=\"{colour}\" points=\"{points}\"/>");
        }
        out.push_str("</g>\n");
    }
    out
}

/// Neighbouring points of a path that appear in one shot and share a colour.
struct Stretch {
    shot: usize,
    points: String,
    colour: String,
}

/// Stretches overlap by one point, so that no gap shows.
fn stretches(arrivals: &ArrivalScale, film: &[Shot], path: &TracePath) -> Vec<Stretch> {
    let look = |i: usize| {
        let arrival = path.points[i].arrival;
        (film.partition_point(|shot| shot.frame < arrival), arrivals.ink(arrival))
    };
    let mut all = Vec::new();
    let mut from = 0;
    for i in 1..path.points.len() {
        if i + 1 == path.points.len() || look(i) != look(i + 1) {
            let (shot, ink) = look(i);
            let points: Vec<[f64; 2]> = path.points[from..=i].iter().map(|p| [p.x, p.y]).collect();
            all.push(Stretch { shot, points: corners(&points), colour: ink.light().hex() });
            from = i;
        }
    }
    all
}
