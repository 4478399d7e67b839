//! The parts of the page on what the load did and on growth against charge: a sentence, figures, small tables.

use serde::Serialize;

use super::{Shown, drawn, grid};
use crate::report::Error;
use crate::report::effect;
use crate::report::schema::{DIRECTIONS, HALF_CYCLES, TURNS};
use crate::report::words::bind;
use crate::results::Results;

/// Columns of the turns that the page shows.
const TURN_COLUMNS: [&str; 13] = [
    "step",
    "time_s",
    "verdict",
    "axis_before_deg",
    "axis_after_deg",
    "stress_before_mpa",
    "stress_after_mpa",
    "turned_deg",
    "lag_s",
    "lag_um",
    "filaments",
    "followed",
    "p",
];

/// What the load did.
#[derive(Serialize)]
pub(super) struct LoadPart {
    said: String,
    figures: Vec<Shown>,
    not_drawn: String,
    turns: Option<grid::Grid>,
    directions: Option<grid::Grid>,
    claim: &'static str,
}

/// Growth against charge.
#[derive(Serialize)]
pub(super) struct ChargePart {
    said: Option<String>,
    reminder: Option<&'static str>,
    figures: Vec<Shown>,
    half_cycles: Option<grid::Grid>,
}

pub(super) fn load(results: &Results) -> Result<LoadPart, Error> {
    let (figures, not_drawn) = drawn(results, |name| matches!(name, "steering" | "kink" | "speed"))?;
    let (turns, directions) = (&results.turns, &results.summary.directions);
    Ok(LoadPart {
        said: bind(&effect::load(results)),
        figures,
        not_drawn,
        turns: (!turns.is_empty()).then(|| grid::some("Steps of the load", &TURNS, turns, &TURN_COLUMNS)),
        directions: (!directions.is_empty()).then(|| grid::of("Directions by sign of stress", &DIRECTIONS, directions)),
        claim: effect::NO_EFFECT_CLAIMED,
    })
}

pub(super) fn charge(results: &Results) -> Result<ChargePart, Error> {
    let (figures, _) = drawn(results, |name| name == "charge")?;
    let (cycles, summary) = (&results.half_cycles, &results.summary.charge);
    Ok(ChargePart {
        said: effect::charge(results),
        reminder: (summary.visible_um3.is_some() && summary.faraday_um3.is_some()).then_some(effect::EMPTY_CRACK),
        figures,
        half_cycles: (!cycles.is_empty()).then(|| grid::of("Half-cycles", &HALF_CYCLES, cycles)),
    })
}
