//! The picture of the page: last frame, traced centre-lines, and the frames to scrub through.

use std::fmt::Write;

use serde::Serialize;

use crate::report::Error;
use crate::report::axes::TimeUnit;
use crate::report::data_uri;
use crate::report::figures::overlay::{arrival_step, first_arrival, scale_bar};
use crate::report::palette::Ink;
use crate::report::words::{duration, fixed};
use crate::results::Results;
use crate::trace::TracePath;

/// Says what is seen where something grew.
const TRACED: &str = "Last usable frame, drift and uneven light removed, with every traced centre-line. What is traced is the visible \
     track (crack, metal or both), as projected on the picture.";

/// Says what is seen where nothing grew.
const BARE: &str =
    "Last usable frame, drift and uneven light removed. No filament was traced in it.";

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
    let time = results
        .frames
        .iter()
        .map(|row| row.time_s)
        .fold(0.0, f64::max);
    let unit = TimeUnit::of(time);
    let (um, px) = scale_bar(results.facts.um_per_px, f64::from(width) * 0.25);
    Ok(Some(Player {
        width,
        height,
        last: data_uri::jpeg(last, data_uri::LARGE)?,
        traces: traces(results, &film),
        plating: corners(&results.facts.plating_edge),
        far: corners(&results.facts.far_edge),
        bar: [
            format!("{} µm", fixed(um, usize::from(um < 1.0) * 2)),
            fixed(100.0 * px / f64::from(width), 2),
        ],
        ramp_from: fixed(first_arrival(results) / unit.seconds, 1),
        ramp_to: fixed(time / unit.seconds, 1),
        unit: unit.name,
        has_axis: film.iter().any(|shot| shot.axis.is_some()),
        film,
        caption: if results.trace.filaments.is_empty() {
            BARE
        } else {
            TRACED
        },
        alt: format!(
            "Last usable frame with {} traced filaments, coloured by arrival",
            results.trace.filaments.len()
        ),
    }))
}

/// The frames to scrub through, the last usable one at the end.
fn film(results: &Results) -> Result<Vec<Shot>, Error> {
    let end = results
        .frames
        .iter()
        .rev()
        .find(|row| row.usable)
        .map_or(0, |row| row.frame);
    let mut shots = Vec::new();
    for shot in results.pictures.film.iter().filter(|shot| shot.frame < end) {
        shots.push(self::shot(
            results,
            shot.frame,
            data_uri::jpeg(&shot.picture, data_uri::SMALL)?,
        ));
    }
    shots.push(shot(results, end, String::new()));
    Ok(shots)
}

fn shot(results: &Results, frame: usize, src: String) -> Shot {
    let row = results.frames.get(frame);
    let mut said = Vec::new();
    if let Some(row) = row {
        said.extend(
            row.depth_um
                .map(|depth| format!("depth {} µm", fixed(depth, 0))),
        );
        said.extend(row.tips.map(|tips| format!("{tips} tips")));
        said.extend(
            row.stress_mpa
                .map(|stress| format!("{} MPa", fixed(stress, 0))),
        );
    }
    Shot {
        frame,
        time: duration(row.map_or(0.0, |row| row.time_s)),
        said: said.join(" · "),
        axis: row.and_then(|row| row.load_direction_deg),
        src,
    }
}

fn corners(edge: &[[f64; 2]]) -> String {
    edge.iter()
        .map(|[x, y]| format!("{:.1},{:.1} ", x + 0.5, y + 0.5))
        .collect()
}

/// A group a filament: a dark casing and a stretch for each shot in which it grew and each colour.
fn traces(results: &Results, film: &[Shot]) -> String {
    let mut out = String::new();
    for filament in &results.trace.filaments {
        let number = filament.filament;
        let _infallible = write!(
            out,
            "<g class=\"filament\" data-filament=\"{number}\"><title>filament {number}</title>"
        );
        for path in results
            .trace
            .paths
            .iter()
            .filter(|path| path.filament == number)
        {
            stretches(&mut out, results, film, path);
        }
        out.push_str("</g>\n");
    }
    out
}

fn stretches(out: &mut String, results: &Results, film: &[Shot], path: &TracePath) {
    let shown_from = |i: usize| film.partition_point(|shot| shot.frame < path.points[i].arrival);
    let look = |i: usize| (shown_from(i), arrival_step(results, path.points[i].arrival));
    let mut from = 0;
    for i in 1..path.points.len() {
        if i + 1 == path.points.len() || look(i) != look(i + 1) {
            let (shot, step) = look(i);
            let d: Vec<String> = path.points[from..=i]
                .iter()
                .map(|p| format!("{:.1},{:.1}", p.x + 0.5, p.y + 0.5))
                .collect();
            let d = d.join(" ");
            let colour = Ink::Arrival(step).light().hex();
            let _infallible = write!(
                out,
                "<g data-shot=\"{shot}\"><polyline class=\"casing\" points=\"{d}\"/><polyline points=\"{d}\" stroke=\"{colour}\"/></g>",
            );
            from = i;
        }
    }
}
