//! Frames to trace: decode, set aside, lay on the bare cell, grow the forest, issue the forecast of each frame.
//!
//! Streaming: a batch of at most [`BATCH`] decoded frames is held beside the tracer's window; leading bare frames are
//! held until the reference is made, at most [`MOST_BARE`] of them.

use image::GrayImage;
use ndarray::Array2;
use rayon::prelude::*;

use super::forecasts::{Calibration, Forecasts};
use super::pictures::Tone;
use super::review::Marks;
use super::{Input, Progress};
use crate::Error;
use crate::measure::{ForecastRow, UsedFrame};
use crate::results::FilmFrame;
use crate::run::{Decoded, FrameFault};
use crate::scene::{MOST_BARE, Scene, SceneBuilder, SceneSettings};
use crate::trace::recent::Corrected;
use crate::trace::{Trace, TraceSettings, Tracer};

/// Frames decoded at a time.
const BATCH: usize = 8;
/// Frames of the page's player.
const FILM_FRAMES: usize = 60;

/// What became of a frame.
#[derive(Debug, Clone, Default)]
pub(super) struct Fate {
    /// Why it was set aside; empty when it was used.
    pub(super) reason: String,
    /// Drift of the scene, px.
    pub(super) drift_px: Option<[f64; 2]>,
    /// Turn of the scene, degrees.
    pub(super) rotation_deg: f64,
    /// Exposure against the reference.
    pub(super) exposure: Option<f64>,
    /// Sharpness against the reference.
    pub(super) sharpness: Option<f64>,
    /// Noise factor.
    pub(super) noise_factor: Option<f64>,
    /// SHA-256 of the file or page.
    pub(super) sha256: Option<[u8; 32]>,
}

/// The run followed to its end.
pub(super) struct Filmed {
    /// One a frame.
    pub(super) fates: Vec<Fate>,
    /// Frame times, s.
    pub(super) times_s: Vec<f64>,
    /// The trace.
    pub(super) trace: Trace,
    /// The forecasts as issued.
    pub(super) forecasts: Vec<ForecastRow>,
    /// What the forecasts' own record says.
    pub(super) calibration: Calibration,
    /// Typical noise of a pixel, fraction of local brightness.
    pub(super) noise: f64,
    /// Picture tones and pictures.
    pub(super) tone: Tone,
    /// First usable frame for the eye.
    pub(super) first: Array2<f32>,
    /// Last usable frame for the eye.
    pub(super) last: Array2<f32>,
    /// Last usable frame as it was recorded.
    pub(super) recorded: Option<GrayImage>,
    /// Frames of the player.
    pub(super) film: Vec<FilmFrame>,
}

impl Filmed {
    /// The frames used, in order.
    pub(super) fn used(&self) -> Vec<UsedFrame> {
        self.fates
            .iter()
            .zip(&self.times_s)
            .enumerate()
            .filter(|(_, (fate, _))| fate.reason.is_empty())
            .map(|(frame, (_, &time_s))| UsedFrame { frame, time_s })
            .collect()
    }
}

/// Follows the run from its first frame to its last.
pub(super) fn follow(input: &Input, marks: &Marks, progress: &dyn Progress) -> Result<Filmed, Error> {
    let count = input.sequence.entries.len();
    progress.stage("reading bare frames", None);
    let opening = Opening::read(input, marks)?;
    let mut follower = Follower::new(input, marks, opening, count, progress);
    progress.stage("tracing", Some(count));
    let starts: Vec<usize> = (0..count).step_by(BATCH).collect();
    for start in starts {
        let batch: Vec<usize> = (start..(start + BATCH).min(count)).collect();
        let decoded: Vec<_> =
            batch.par_iter().map(|&i| follower.held(i).map_or_else(|| input.sequence.decode(i), Ok)).collect();
        for (i, frame) in batch.into_iter().zip(decoded) {
            follower.take(i, frame);
            progress.frame();
        }
    }
    follower.refuse_blindness()?;
    Ok(follower.finish())
}

/// The frames read before the first can be corrected, and the scene made of them.
struct Opening {
    scene: Scene,
    held: Vec<(usize, Decoded)>,
}

impl Opening {
    fn read(input: &Input, marks: &Marks) -> Result<Self, Error> {
        let settings = SceneSettings { darker: input.darker() };
        let bare = input.manifest.frames.bare.min(input.sequence.entries.len());
        let mut builder = SceneBuilder::new(settings);
        let mut held: Vec<(usize, Decoded)> = Vec::new();
        for i in (0..bare).filter(|&i| marks.frame(i).is_none()) {
            let Ok(decoded) = input.sequence.decode(i) else { continue };
            if held.last().is_some_and(|(_, before)| before.sha256 == decoded.sha256) {
                continue;
            }
            if held.len() < MOST_BARE {
                builder.push(&decoded.plane);
                held.push((i, decoded));
            }
        }
        if let Some(scene) = builder.finish() {
            return Ok(Self { scene, held });
        }
        let mut first_fault = None;
        for i in (0..input.sequence.entries.len()).filter(|&i| marks.frame(i).is_none()) {
            match input.sequence.decode(i) {
                Ok(decoded) => {
                    let scene = Scene::without_bare(&decoded.plane, settings);
                    return Ok(Self { scene, held: vec![(i, decoded)] });
                }
                Err(fault) => first_fault = first_fault.or(Some(fault)),
            }
        }
        Err(input.sequence.all_broken(first_fault.unwrap_or(FrameFault::Empty)).into())
    }
}

struct Follower<'a> {
    input: &'a Input,
    marks: &'a Marks,
    scene: Scene,
    held: Vec<(usize, Decoded)>,
    tracer: Tracer,
    forecasts: Forecasts<'a>,
    fates: Vec<Fate>,
    guess: [f64; 2],
    noise: f64,
    tone: Tone,
    first: Option<Array2<f32>>,
    last: Option<Array2<f32>>,
    /// Tones of the recorded frames, chosen on the first used one, and the last of them.
    recorded_tone: Option<Tone>,
    recorded: Option<Array2<f32>>,
    film: Vec<FilmFrame>,
    film_step: usize,
    progress: &'a dyn Progress,
}

impl<'a> Follower<'a> {
    fn new(input: &'a Input, marks: &'a Marks, opening: Opening, count: usize, progress: &'a dyn Progress) -> Self {
        let noise = typical(opening.scene.noise());
        let usable_bare = opening.held.iter().filter(|(i, _)| *i < input.manifest.frames.bare).count();
        let settings = TraceSettings {
            confirm_frames: input.manifest.trace.confirm_frames,
            bare: usable_bare,
            bare_reference: usable_bare > 0,
            ..TraceSettings::default()
        };
        let tracer = Tracer::new(settings, input.edges.clone(), opening.scene.noise().clone());
        Self {
            input,
            marks,
            tracer,
            forecasts: Forecasts::new(input, noise),
            fates: Vec::with_capacity(count),
            guess: [0.0, 0.0],
            noise,
            tone: Tone::of(opening.scene.reference()),
            first: None,
            last: None,
            recorded_tone: None,
            recorded: None,
            film: Vec::new(),
            film_step: count.div_ceil(FILM_FRAMES).max(1),
            progress,
            scene: opening.scene,
            held: opening.held,
        }
    }

    /// A frame that was decoded for the reference already.
    fn held(&self, i: usize) -> Option<Decoded> {
        self.held.iter().find(|(k, _)| *k == i).map(|(_, d)| d.clone())
    }

    fn take(&mut self, i: usize, frame: Result<Decoded, FrameFault>) {
        let fate = match frame {
            Err(fault) => Fate { reason: fault.to_string(), ..Fate::default() },
            Ok(decoded) => self.look(i, &decoded),
        };
        self.fates.push(fate);
    }

    fn look(&mut self, i: usize, decoded: &Decoded) -> Fate {
        let sha256 = Some(decoded.sha256);
        let before = i.checked_sub(1).filter(|&k| self.fates[k].sha256 == sha256);
        if let Some(of) = before {
            return Fate { reason: FrameFault::Repeat { of }.to_string(), sha256, ..Fate::default() };
        }
        if let Some(reason) = self.marks.frame(i) {
            return Fate { reason: reason.to_owned(), sha256, ..Fate::default() };
        }
        let metal = self.tracer.metal();
        let mut seen = self.scene.correct(&decoded.plane, Some(&metal), self.guess);
        if let Some(reason) = seen.verdict {
            return Fate { reason, sha256, ..Fate::default() };
        }
        self.guess = seen.drift_px;
        self.picture(i, &decoded.plane, &seen.residual);
        self.marks.hide(&mut seen.residual);
        let fate = Fate {
            reason: String::new(),
            drift_px: Some(seen.drift_px),
            rotation_deg: seen.rotation_deg,
            exposure: Some(seen.exposure),
            sharpness: Some(seen.sharpness),
            noise_factor: Some(f64::from(seen.noise_factor)),
            sha256,
        };
        self.tracer.push(Corrected { frame: i, residual: seen.residual, noise_factor: seen.noise_factor });
        self.forecasts.issue(i, self.input.sequence.entries[i].time_s, &self.tracer);
        fate
    }

    /// Fails where every frame was set aside: there is nothing to report of such a run.
    fn refuse_blindness(&self) -> Result<(), Error> {
        let (Some(first), true) = (self.fates.first(), self.fates.iter().all(|fate| !fate.reason.is_empty())) else {
            return Ok(());
        };
        let (count, file, reason) = (self.fates.len(), &self.input.sequence.entries[0].file, &first.reason);
        let what = format!("none of the {count} frames can be used; the first, {file}, is set aside: {reason}");
        let help =
            "open one of them in an image viewer: correct `files`, or record the run again with other light or focus";
        Err(self.input.manifest.fault("frames", "files", what, help).into())
    }

    /// Keeps what the eye wants to see of a corrected frame.
    fn picture(&mut self, i: usize, recorded: &Array2<f32>, residual: &Array2<f32>) {
        let plane = super::pictures::shown(self.scene.reference(), residual, self.input.darker());
        self.progress.corrected(i, &|| self.tone.picture(&plane));
        let tone = *self.recorded_tone.get_or_insert_with(|| Tone::of(recorded));
        if i.is_multiple_of(self.film_step) {
            let time_s = self.input.sequence.entries[i].time_s;
            let [picture, recorded] = [self.tone.picture(&plane), tone.picture(recorded)].map(super::pictures::small);
            self.film.push(FilmFrame { frame: i, time_s, picture, recorded: Some(recorded) });
        }
        self.recorded = Some(recorded.clone());
        if self.first.is_none() {
            self.first = Some(plane.clone());
        }
        self.last = Some(plane);
    }

    fn finish(self) -> Filmed {
        let empty = || self.scene.reference().clone();
        let calibration = self.forecasts.calibration();
        Filmed {
            times_s: self.input.sequence.times_s(),
            trace: self.tracer.finish(),
            forecasts: self.forecasts.rows,
            calibration,
            noise: self.noise,
            tone: self.tone,
            first: self.first.unwrap_or_else(empty),
            last: self.last.unwrap_or_else(empty),
            recorded: self.recorded_tone.zip(self.recorded).map(|(tone, plane)| tone.picture(&plane)),
            film: self.film,
            fates: self.fates,
        }
    }
}

/// Median over a fixed sub-grid.
fn typical(plane: &Array2<f32>) -> f64 {
    let step = (plane.len() / 50_000).max(1);
    let mut values: Vec<f32> = plane.iter().step_by(step).copied().filter(|v| v.is_finite()).collect();
    values.sort_by(f32::total_cmp);
    values.get(values.len() / 2).map_or(0.0, |&v| f64::from(v))
}
