//! Frames without a bare reference: lines are found by how they stand out from the frame's own texture.
//!
//! Where no bare frames were filmed ([`super::TraceSettings::bare_reference`] is false) noise tells nothing: grain, stains
//! and pores are in every frame. Each frame (median of the last three) is then searched as a still picture,
//! [`evidence`] → [`crest`](mod@crest) without [`joints`] → [`level`] → [`tree`] → [`find`], and what was not traced yet is added to the forest
//! ([`adopt`]) and dated ([`date`]).
//! Limits: what was there in the first frame arrives with it; retreat is not followed; texture that makes single long lines of the
//! filaments' sign (a stain's rim, a scratch that ends inside) is traced.

mod adopt;
mod crest;
mod date;
mod evidence;
mod find;
mod joints;
mod level;
mod section;
#[cfg(test)]
mod tests;
mod tree;

use super::growth::Tracer;

/// Takes in the latest frame of a run without bare frames.
pub(super) fn push(tracer: &mut Tracer) {
    tracer.forest.truncate();
    tracer.claim_all();
    if let Some((median, _)) = tracer.recent.median() {
        let found = find::find(&median, &tracer.inside);
        adopt::adopt(tracer, &median, &found, false);
    }
    date::date(tracer, tracer.settings.confirm_frames);
}

/// Decides what the last frames show, with the witnesses they have; the very last one tells how far the tips had come, which
/// the median over three does not.
pub(super) fn finish(tracer: &mut Tracer) {
    date::date(tracer, 0);
    if let Some(last) = tracer.recent.frames().back().cloned().filter(|_| tracer.frames.len() > 2) {
        tracer.forest.truncate();
        tracer.claim_all();
        let found = find::find(&last.residual, &tracer.inside);
        adopt::adopt(tracer, &last.residual, &found, true);
        date::date(tracer, 0);
    }
}
