//! Which strands stay in the final trace: ends that lie in the ink of other strands are no metal of their own.
//!
//! Method: the tail of a strand, from its last branching to its end, must lie outside the ink of all others for at least a
//! spur's length; the tail with the least of its own goes first, and what is left is weighed again, so that of two
//! strands in one ink one stays.
//! Limit: ink is taken as wide as it is at the end of the run.

use std::collections::HashMap;

use super::centreline::distance;
use super::forest::{SPACING, Strand};

/// A tail shorter than this many widths (and [`LEAST_BRANCH`]) outside other ink is a spur.
const SPUR_WIDTHS: f64 = 1.0;
/// Least length of a branch outside other ink, px.
const LEAST_BRANCH: f64 = 5.0;
/// Margin about ink within which a tail has not left it, px.
const INK_MARGIN: f64 = 1.0;
/// Side of a cell of the index of vertices, px: the widest ink and its margin reach no further than the next cell.
const CELL: f64 = 16.0;

/// Cuts tails without metal of their own off all strands; strands of which nothing is left are withdrawn.
pub(super) fn prune(strands: &mut [Strand]) {
    let index = Index::new(strands);
    loop {
        let weakest = (0..strands.len())
            .filter_map(|s| tail_start(strands, s).map(|from| (s, from)))
            .map(|(s, from)| (index.outside(strands, s, from), s, from))
            .filter(|&(outside, s, _)| outside < LEAST_BRANCH.max(SPUR_WIDTHS * strands[s].width))
            .min_by(|a, b| a.0.total_cmp(&b.0).then(b.1.cmp(&a.1)));
        let Some((_, s, from)) = weakest else { break };
        cut(&mut strands[s], from);
    }
}

/// The first vertex of the tail of a strand; `None` where it has no end of its own to lose.
fn tail_start(strands: &[Strand], s: usize) -> Option<usize> {
    let strand = &strands[s];
    if strand.withdrawn || strand.decided < 2 || strand.reached_far.is_some() {
        return None;
    }
    let children = strands.iter().filter(|c| !c.withdrawn && c.decided > 1).filter_map(|c| c.parent);
    match children.filter(|j| j.strand == s).map(|j| j.vertex).max() {
        Some(last) => Some(last.max(1) + 1).filter(|&from| from < strand.decided),
        None => strand.parent.map(|_| 0),
    }
}

fn cut(strand: &mut Strand, from: usize) {
    strand.vertices.truncate(from);
    strand.decided = strand.decided.min(from);
    strand.provisional.clear();
    strand.meets = None;
    strand.withdrawn |= from < 2;
}

/// Vertices by cell: [strand, vertex].
struct Index {
    cells: HashMap<(i64, i64), Vec<[usize; 2]>>,
}

impl Index {
    fn new(strands: &[Strand]) -> Self {
        let mut cells: HashMap<(i64, i64), Vec<[usize; 2]>> = HashMap::new();
        for (s, strand) in strands.iter().enumerate().filter(|(_, s)| !s.withdrawn) {
            for (v, vertex) in strand.vertices[..strand.decided].iter().enumerate() {
                cells.entry(cell_of(vertex.p)).or_default().push([s, v]);
            }
        }
        Self { cells }
    }

    /// Length of a strand from vertex `from` on that lies outside the ink of all others, px.
    fn outside(&self, strands: &[Strand], s: usize, from: usize) -> f64 {
        let tail = &strands[s].vertices[from..strands[s].decided];
        tail.iter().filter(|v| !self.in_other_ink(strands, s, v.p)).count() as f64 * SPACING
    }

    fn in_other_ink(&self, strands: &[Strand], s: usize, p: [f64; 2]) -> bool {
        let (col, row) = cell_of(p);
        let near = (-1..=1).flat_map(|dc| (-1..=1).map(move |dr| (col + dc, row + dr)));
        near.filter_map(|cell| self.cells.get(&cell)).flatten().any(|&[other, v]| {
            let strand = &strands[other];
            other != s
                && !strand.withdrawn
                && v < strand.decided
                && distance(strand.vertices[v].p, p) < 0.5 * strand.vertices[v].width + INK_MARGIN
        })
    }
}

fn cell_of(p: [f64; 2]) -> (i64, i64) {
    ((p[0] / CELL).floor() as i64, (p[1] / CELL).floor() as i64)
}
