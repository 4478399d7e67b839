//! The picture of the page: last frame, traced centre-lines, and the frames to scrub through, made small enough that
//! the page stays a file one can send.

use image::GrayImage;
use rayon::prelude::*;
use serde::Serialize;

use super::traces::{self, Clock};
use crate::report::Error;
use crate::report::data_uri;
use crate::report::figures::arrival::ArrivalScale;
use crate::report::figures::overlay::scale_bar;
use crate::report::words::{fixed, trimmed};
use crate::results::{FilmFrame, Results};

/// Says what is seen where something grew.
const TRACED: &str = "Last usable frame, drift and uneven light removed, with every traced centre-line. What is traced is the visible \
     track (crack, metal or both), as projected on the picture.";

/// Says what is seen where nothing grew.
const BARE: &str = "Last usable frame, drift and uneven light removed. No filament was traced in it.";

/// Letters that the frames of the player may take: with all else the page stays below 15 MB.
const ROOM: usize = 9_000_000;

/// Longest sides tried, px, until the frames fit.
const SIDES: [u32; 5] = [data_uri::SMALL, 640, 480, 360, 240];

/// The player in ready strings.
#[derive(Serialize)]
pub(super) struct Player {
    width: u32,
    height: u32,
    last: String,
    traces: String,
    isochrones: String,
    plating: String,
    far: String,
    /// Label of the scale bar, its width, per cent of the picture's, and its length, µm.
    bar: [String; 3],
    ramp_from: String,
    ramp_to: String,
    unit: &'static str,
    film: Vec<Shot>,
    /// Steps of time less one: the last place of the scrubber.
    end: usize,
    has_axis: bool,
    filaments: Vec<u32>,
    alt: String,
    caption: &'static str,
}

/// A frame that the page holds; the last is the last usable frame.
#[derive(Serialize)]
struct Shot {
    /// Its number.
    frame: usize,
    /// Drift and uneven light removed; empty for the last frame, which the page holds already.
    src: String,
    /// As recorded; empty where that is not held.
    recorded: String,
}

/// `None` without a picture. `beside` names the folder next to the page that holds every usable frame.
pub(super) fn of(results: &Results, beside: Option<&str>) -> Result<Option<Player>, Error> {
    let last = &results.pictures.last;
    let (width, height) = last.dimensions();
    if width == 0 || height == 0 {
        return Ok(None);
    }
    let clock = Clock::of(results);
    let arrivals = ArrivalScale::of(results);
    let unit = arrivals.unit;
    let (um, px) = scale_bar(results.facts.um_per_px, f64::from(width) * 0.25);
    let traced = results.trace.filaments.len();
    Ok(Some(Player {
        width,
        height,
        last: data_uri::jpeg(last, data_uri::LARGE)?,
        traces: traces::draw(results, &clock),
        isochrones: traces::isochrones(results, &clock),
        plating: corners(&results.facts.plating_edge),
        far: corners(&results.facts.far_edge),
        bar: [
            format!("{} µm", fixed(um, usize::from(um < 1.0) * 2)),
            fixed(100.0 * px / f64::from(width), 2),
            um.to_string(),
        ],
        ramp_from: trimmed(arrivals.time.low / unit.seconds, 3),
        ramp_to: trimmed(arrivals.time.high / unit.seconds, 3),
        unit: unit.name,
        end: clock.used.len().saturating_sub(1),
        has_axis: results.frames.iter().any(|row| row.load_direction_deg.is_some()),
        filaments: results.trace.filaments.iter().map(|filament| filament.filament).collect(),
        film: film(results, &clock, beside)?,
        caption: if traced == 0 { BARE } else { TRACED },
        alt: format!("Frame of the run with {traced} traced filaments"),
    }))
}

/// The frames to scrub through, the last usable one at the end.
fn film(results: &Results, clock: &Clock, beside: Option<&str>) -> Result<Vec<Shot>, Error> {
    let end = clock.used.last().copied().unwrap_or(0);
    let held: Vec<&FilmFrame> = results.pictures.film.iter().filter(|shot| shot.frame < end).collect();
    let mut shots = if let Some(folder) = beside {
        let all = clock.used.iter().filter(|&&frame| frame < end);
        all.map(|&frame| Shot { frame, src: format!("{folder}/{frame:06}.jpg"), recorded: String::new() }).collect()
    } else {
        held_within(&held, ROOM)?
    };
    let recorded = results.pictures.recorded.as_ref().map(|picture| data_uri::jpeg(picture, data_uri::SMALL));
    shots.push(Shot { frame: end, src: String::new(), recorded: recorded.transpose()?.unwrap_or_default() });
    Ok(shots)
}

/// The frames at the largest size at which all of them take at most `room` letters; the smallest size where none does.
fn held_within(held: &[&FilmFrame], room: usize) -> Result<Vec<Shot>, Error> {
    let mut shots = Vec::new();
    for side in SIDES {
        let jpeg = |picture: &GrayImage| data_uri::jpeg(picture, side);
        shots = held
            .par_iter()
            .map(|shot| {
                let recorded = shot.recorded.as_ref().map(jpeg).transpose()?.unwrap_or_default();
                Ok(Shot { frame: shot.frame, src: jpeg(&shot.picture)?, recorded })
            })
            .collect::<Result<Vec<Shot>, Error>>()?;
        if shots.iter().map(|shot| shot.src.len() + shot.recorded.len()).sum::<usize>() <= room {
            break;
        }
    }
    Ok(shots)
}

/// Corners as SVG wants them, pixel centres at half.
pub(super) fn corners(edge: &[[f64; 2]]) -> String {
    let list: Vec<String> = edge.iter().map(|[x, y]| format!("{:.1},{:.1}", x + 0.5, y + 0.5)).collect();
    list.join(" ")
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Noise does not compress: 60 frames of it must be made smaller to fit.
    #[test]
    fn frames_are_made_smaller_until_they_fit() {
        let noise = |seed: u32| {
            GrayImage::from_fn(400, 300, |x, y| image::Luma([((x * 7919 + y * 104_729 + seed) ^ (x * y)) as u8]))
        };
        let frames: Vec<FilmFrame> = (0..6)
            .map(|i| FilmFrame { frame: i, time_s: 0.0, picture: noise(i as u32), recorded: Some(noise(9)) })
            .collect();
        let frames: Vec<&FilmFrame> = frames.iter().collect();
        let letters = |room| {
            let shots = held_within(&frames, room).unwrap();
            shots.iter().map(|shot| shot.src.len() + shot.recorded.len()).sum::<usize>()
        };
        let whole = letters(usize::MAX);
        assert!(letters(whole / 2) <= whole / 2);
        assert!(letters(1) > 1, "the smallest size is kept where nothing fits");
    }
}
