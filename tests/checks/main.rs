//! Checks against published values and reference libraries, one file a subject.
//! Each check names its source; expected values come from `fixtures/`, with their provenance.

mod axial;
mod compare;
mod distance;
mod electro;
mod first_passage;
mod mechanics;
mod phase;
mod regress;
mod scoring;
mod survival;
mod thinning;
mod thresholds;
