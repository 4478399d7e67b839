//! When did each vertex arrive, judged against its own contrast: without a bare reference a line's contrast differs from
//! place to place, so that each vertex is compared with what the latest frames show of it.
//!
//! Method: contrasts over the local final contrast, then the change point along the strand of [`super::super::dating`].
//! Limit: what was there in the first frame of the window arrives with it.

use super::super::dating::{Contrast, positions};
use super::super::forest::vertices_in;
use super::super::growth::Tracer;
use super::super::settle::{EDGE_BLUR, contrast_rows, earliest_arrival};

/// Frames that tell a vertex's own contrast.
const LATEST: usize = 3;
/// Length over which it is averaged to either side, px.
const POOL: f64 = 4.0;

/// Dates the proposals of all strands, parents first, and decides what has `confirm` later frames as witnesses.
pub(super) fn date(tracer: &mut Tracer, confirm: usize) {
    for index in 0..tracer.forest.strands.len() {
        if tracer.forest.strands[index].vertices.len() > tracer.forest.strands[index].decided {
            date_strand(tracer, index, confirm);
        }
    }
}

fn date_strand(tracer: &mut Tracer, index: usize, confirm: usize) {
    let Some(earliest) = earliest_arrival(tracer, index) else { return };
    let now = tracer.frames.len() - 1;
    let first = (now + 1 - tracer.recent.frames().len()).max(earliest);
    let rows = relative(&contrast_rows(tracer, index, first));
    let mut reached = positions(&rows, 1.0);
    let Some(end) = reached.last_mut() else { return };
    // The line was found in the latest frames: all of it is there by now.
    *end = rows[0].len();
    let known = now.checked_sub(confirm).filter(|&k| k >= first).map_or(0, |k| k + 1 - first);
    if known == 0 {
        return;
    }
    let strand = &mut tracer.forest.strands[index];
    let start = strand.decided;
    for i in 0..reached[known - 1] {
        strand.vertices[start + i].arrival = reached[..known].iter().position(|&s| s > i).map(|j| first + j);
    }
    strand.decided = start + reached[known - 1];
    strand.provisional = reached[known..].iter().map(|&s| start + s).collect();
    let end = strand.decided.checked_sub(1).map(|i| &strand.vertices[i]);
    let touching = end.filter(|v| v.remaining <= EDGE_BLUR).and_then(|v| v.arrival);
    strand.reached_far = strand.reached_far.or(touching);
}

/// Contrasts over each vertex's own in the latest frames; unknown where that is nil.
fn relative(rows: &[Vec<Option<Contrast>>]) -> Vec<Vec<Option<Contrast>>> {
    let count = rows.first().map_or(0, Vec::len);
    let latest = &rows[rows.len().saturating_sub(LATEST)..];
    let pool = vertices_in(POOL);
    let own: Vec<f64> = (0..count)
        .map(|i| {
            let near = i.saturating_sub(pool)..(i + pool + 1).min(count);
            let known: Vec<f64> =
                latest.iter().flat_map(|r| r[near.clone()].iter().flatten()).map(|c| c.value).collect();
            known.iter().sum::<f64>() / (known.len() as f64).max(1.0)
        })
        .collect();
    let scaled = |c: Contrast, own: f64| (own > 0.0).then(|| Contrast { value: c.value / own, sd: c.sd / own });
    rows.iter().map(|row| row.iter().zip(&own).map(|(c, &own)| c.and_then(|c| scaled(c, own))).collect()).collect()
}
