//! The stages in order: read, correct, trace, measure, forecast, sum up. [`analyse`] reads as the table of contents.

mod charge;
mod edges;
mod film;
mod forecasts;
mod input;
mod kinks;
mod notes;
mod pictures;
mod review;
mod rows;
mod steering;
mod summary;

use std::path::Path;

use image::GrayImage;

use crate::Error;
use crate::measure::{Scale, measure};
use crate::results::{Results, Summary};

pub use input::Input;
use review::Marks;

/// What the analysis tells while it works.
pub trait Progress: Sync {
    /// A stage begins; `frames` counts what it will work through, where that is known.
    fn stage(&self, name: &str, frames: Option<usize>);
    /// One more frame is done.
    fn frame(&self);
    /// A used frame with drift and light taken out, for whoever keeps pictures; `draw` makes it. Nothing is kept here.
    fn corrected(&self, _frame: usize, _draw: &dyn Fn() -> GrayImage) {}
}

/// Tells nobody.
#[derive(Debug, Clone, Copy, Default)]
pub struct Quiet;

impl Progress for Quiet {
    fn stage(&self, _name: &str, _frames: Option<usize>) {}
    fn frame(&self) {}
}

/// What a user may choose beside `run.toml`.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Choices {
    /// Analyse as if the run ended at this time, s since the first frame.
    pub until_s: Option<f64>,
}

/// Analyses a run folder, and once more with what its `review.toml` rejects, where there is one. Memory: a bounded window
/// of frames, whatever their number.
///
/// # Errors
/// What stops the reading of the run ([`Error`]); a frame that cannot be used stops nothing.
pub fn analyse(run: &Path, choices: Choices, progress: &dyn Progress) -> Result<Results, Error> {
    let input = Input::open(run, choices)?;
    let plain = follow(&input, &Marks::default(), progress)?;
    let Some(review) = input.review.as_ref().filter(|review| !review.reject.is_empty()) else {
        return Ok(plain);
    };
    progress.stage("again, with the review", None);
    let (marks, told) = Marks::of(review, &input, &plain.trace);
    let mut results = follow(&input, &marks, progress)?;
    review::tell(&mut results, &plain, told);
    Ok(results)
}

/// The stages after the input, once.
fn follow(input: &Input, marks: &Marks, progress: &dyn Progress) -> Result<Results, Error> {
    let filmed = film::follow(input, marks, progress)?;
    progress.stage("measuring", None);
    let load = |time_s: f64, px: [f64; 2]| input.load.at(time_s, Some(px));
    let used = filmed.used();
    let scale =
        Scale { um_per_px: input.um_per_px(), edges: &input.edges, used: &used, load: &load, noise: filmed.noise };
    let measured = measure(&filmed.trace, &scale);
    let frames = rows::frame_rows(input, &filmed, &measured);
    let pictures = pictures::finished(&filmed, input);
    let notes = notes::Notes::of(input, &filmed, &frames);
    let steered = steering::Steered::of(input, &measured.growth);
    let charged = charge::Charged::of(input, &frames);
    let summary = Summary {
        turns: steered.summary,
        directions: steering::directions(&measured.growth, input.manifest.settings.seed),
        kink_model: kinks::kink_model(input, &measured.growth),
        charge: charged.summary,
        ..summary::summary(input, &filmed, &measured, &frames, &notes)
    };
    Ok(Results {
        facts: input.facts(),
        frames,
        paths: measured.paths,
        growth: measured.growth,
        filaments: measured.filaments,
        forecasts: filmed.forecasts,
        turns: steered.rows,
        charge: charged.rows,
        half_cycles: charged.half_cycles,
        trace: filmed.trace,
        pictures,
        load: input.load_samples(),
        cell: input.cell_samples(),
        summary,
        cautions: notes.cautions,
    })
}
