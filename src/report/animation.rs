//! `growth.gif`: the frames with what had grown by each, for a slide. GIF89a with one palette for all frames: greys for
//! the ceramic, the colours of arrival for the lines.
//!
//! Size: greys are few and the picture is made smaller until the file fits its room.

use std::borrow::Cow;
use std::collections::HashMap;

use gif::{DisposalMethod, Encoder, Frame, Repeat};
use image::{GrayImage, RgbImage};
use rayon::prelude::*;

use super::Error;
use super::figures::arrival::{COLOURS, colour};
use super::figures::overlay;
use super::palette::{Ink, Rgb};
use super::raster;
use crate::results::Results;

/// Largest file, bytes: what a slide or a message takes without complaint (common practice).
const ROOM: usize = 4_000_000;

/// Frames at most.
const FRAMES: usize = 40;

/// Longest sides tried, px, until the file fits.
const SIDES: [u32; 4] = [480, 380, 300, 220];

/// Greys of the palette: enough for texture, few enough that noise still compresses.
const GREYS: usize = 40;

/// How long a frame and the last of them stand, hundredths of a second.
const STANDS: u16 = 14;
const ENDS: u16 = 220;

/// The animation; `None` where nothing grew or fewer than two frames are held.
///
/// # Errors
/// [`Error::Made`] when a frame cannot be painted or encoded.
pub fn growth(results: &Results) -> Result<Option<Vec<u8>>, Error> {
    let film = scenes(results);
    if film.len() < 2 || results.trace.paths.is_empty() {
        return Ok(None);
    }
    let mut file = Vec::new();
    for side in SIDES {
        file = encoded(results, &film, side)?;
        if file.len() <= ROOM {
            break;
        }
    }
    Ok(Some(file))
}

/// Frame numbers and pictures, evenly chosen from those held, the last one always among them.
fn scenes(results: &Results) -> Vec<(usize, &GrayImage)> {
    let pictures = &results.pictures;
    let end = results.frames.iter().rev().find(|row| row.usable).map_or(0, |row| row.frame);
    let held: Vec<(usize, &GrayImage)> =
        pictures.film.iter().filter(|shot| shot.frame < end).map(|shot| (shot.frame, &shot.picture)).collect();
    let step = held.len().div_ceil(FRAMES).max(1);
    let mut chosen: Vec<(usize, &GrayImage)> = held.into_iter().step_by(step).collect();
    if pictures.last.width() > 0 {
        chosen.push((end, &pictures.last));
    }
    chosen
}

fn encoded(results: &Results, film: &[(usize, &GrayImage)], longest: u32) -> Result<Vec<u8>, Error> {
    let made = |why: gif::EncodingError| Error::made("growth.gif", why);
    let palette = palette();
    let painted: Vec<RgbImage> = film
        .par_iter()
        .map(|&(frame, picture)| {
            let drawing = overlay::scene(results, picture, frame);
            raster::paint(&drawing, 0.0, f64::from(longest) / drawing.width.max(drawing.height))
        })
        .collect::<Result<_, Error>>()?;
    let Some((width, height)) = painted.first().map(RgbImage::dimensions) else { return Ok(Vec::new()) };
    let flat: Vec<u8> = palette.iter().flat_map(|c| [c.0, c.1, c.2]).collect();
    let mut file = Vec::new();
    let mut encoder = Encoder::new(&mut file, width as u16, height as u16, &flat).map_err(made)?;
    encoder.set_repeat(Repeat::Infinite).map_err(made)?;
    let mut known = HashMap::new();
    for (i, picture) in painted.iter().enumerate() {
        let indices: Vec<u8> = picture
            .pixels()
            .map(|p| *known.entry(p.0).or_insert_with(|| nearest(&palette, Rgb(p.0[0], p.0[1], p.0[2]))))
            .collect();
        let delay = if i + 1 == painted.len() { ENDS } else { STANDS };
        let frame = Frame {
            width: width as u16,
            height: height as u16,
            delay,
            dispose: DisposalMethod::Keep,
            buffer: Cow::Owned(indices),
            ..Frame::default()
        };
        encoder.write_frame(&frame).map_err(made)?;
    }
    drop(encoder);
    Ok(file)
}

/// Greys, then the colours of arrival, then those of marks.
fn palette() -> Vec<Rgb> {
    let grey = |i: usize| (i * 255 / (GREYS - 1)) as u8;
    let greys = (0..GREYS).map(|i| Rgb(grey(i), grey(i), grey(i)));
    let arrivals = (0..COLOURS).map(|step| colour(step).light());
    greys.chain(arrivals).chain([Ink::LoadMark.light(), Ink::Black.light()]).collect()
}

/// Index of the palette's colour nearest in red, green and blue.
fn nearest(palette: &[Rgb], wanted: Rgb) -> u8 {
    let square = |a: u8, b: u8| i32::from(a.abs_diff(b)).pow(2);
    let far = |c: &Rgb| square(c.0, wanted.0) + square(c.1, wanted.1) + square(c.2, wanted.2);
    palette.iter().enumerate().min_by_key(|(_, c)| far(c)).map_or(0, |(i, _)| i as u8)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::report::example;

    #[test]
    fn it_holds_every_scene_and_stays_small() {
        let results = example::growing();
        let file = growth(&results).unwrap().unwrap();
        assert!(file.starts_with(b"GIF89a") && file.len() <= ROOM, "{}", file.len());
        let mut decoder = gif::Decoder::new(file.as_slice()).unwrap();
        let (mut frames, mut first, mut last) = (0, Vec::new(), Vec::new());
        while let Some(frame) = decoder.read_next_frame().unwrap() {
            frames += 1;
            last = frame.buffer.to_vec();
            if frames == 1 {
                first.clone_from(&last);
            }
        }
        assert_eq!(frames, scenes(&results).len());
        let coloured = |indices: &[u8]| indices.iter().filter(|&&i| usize::from(i) >= GREYS).count();
        assert!(coloured(&last) > 2 * coloured(&first), "lines grow");
    }

    #[test]
    fn without_growth_there_is_none() {
        assert!(growth(&example::still()).unwrap().is_none());
    }
}
