//! From evidence to fragments of lines: its crest, thinned, cut into pieces that hang together, and tied end to end over gaps.
//!
//! Method: a pixel is on the crest where the evidence across the line is nowhere greater (Steger 1998, IEEE Trans. Pattern
//! Anal. Mach. Intell. 20, 113–125, in whole pixels). Fragments are tied where one lies straight ahead of another's end
//! (good continuation; Sha'ashua & Ullman 1988, Proc. ICCV, 321–327, from memory).

use ndarray::Array2;

use super::super::graph::SkeletonGraph;
use super::super::thin::thin;
use super::super::threshold::for_each_component;
use super::evidence::{Evidence, ORIENTATIONS};

/// Least pixels of a fragment.
const LEAST: usize = 6;
/// Pixels at an end that tell where it heads.
const HEADING: usize = 9;
/// Gap over which fragments are tied, px, and in scales of the line.
const GAP: f64 = 8.0;
/// In scales.
const GAP_SCALES: f64 = 3.0;
/// Cosine of the greatest turn into and out of a gap: 40°.
const STRAIGHT: f64 = 0.77;
/// And in lengths of the shorter fragment, up to `MOST_GAP`: the longer two lines are, the farther apart they are still
/// seen as one.
const GAP_LENGTHS: f64 = 0.3;
/// Longest gap, px.
const MOST_GAP: f64 = 32.0;
/// Share of the lesser evidence at both sides of a gap that is left over it on average.
const GAP_EVIDENCE: f32 = 0.3;

/// A pixel [row, column].
pub(crate) type Pixel = [usize; 2];

/// Pixels where the evidence is above `low` and greatest across the line.
#[must_use]
pub(crate) fn crest(evidence: &Evidence, low: f32) -> Array2<bool> {
    let z = &evidence.z;
    let at = |row: usize, column: usize, offset: [isize; 2]| {
        z.get([row.wrapping_add_signed(offset[0]), column.wrapping_add_signed(offset[1])]).copied().unwrap_or(0.0)
    };
    Array2::from_shape_fn(z.dim(), |(row, column)| {
        let here = z[[row, column]];
        if here < low {
            return false;
        }
        let n = normal(evidence.angle[[row, column]]);
        here >= at(row, column, n) && here >= at(row, column, n.map(|v| -v))
    })
}

/// The neighbour (row, column) across a line of the given orientation.
fn normal(angle: u8) -> [isize; 2] {
    let angle = std::f64::consts::PI * f64::from(angle) / ORIENTATIONS as f64;
    [libm::round(libm::cos(angle)) as isize, libm::round(-libm::sin(angle)) as isize]
}

/// Fragments of the crest tied together where they continue each other: pixels in order, gaps included, 8-connected.
/// `standing`: how far a crest pixel stands out; it belongs to a fragment from `low` on.
#[must_use]
pub(crate) fn groups(standing: &Array2<f32>, evidence: &Evidence, low: f32) -> Vec<Vec<Pixel>> {
    let skeleton = thin(standing.mapv(|s| s >= low).view());
    let mut fragments: Vec<Vec<Pixel>> = Vec::new();
    for_each_component(skeleton.view(), |pixels| {
        if pixels.len() >= LEAST {
            fragments.push(pixels.to_vec());
        }
    });
    let ties = Ties::new(&fragments, evidence);
    let mut of = Union::new(fragments.len());
    let mut bridges: Vec<(usize, Vec<Pixel>)> = Vec::new();
    for (from, to, bridge) in ties.all(&fragments) {
        of.join(from, to);
        bridges.push((from, bridge));
    }
    let mut groups: Vec<Vec<Pixel>> = vec![Vec::new(); fragments.len()];
    for (index, pixels) in fragments.into_iter().enumerate().chain(bridges) {
        groups[of.find(index)].extend(pixels);
    }
    groups.retain(|g| !g.is_empty());
    for group in &mut groups {
        group.sort_unstable();
        group.dedup();
    }
    groups
}

/// Looks for what lies ahead of fragments' ends.
struct Ties<'a> {
    evidence: &'a Evidence,
    /// Pixels of each fragment.
    lengths: Vec<usize>,
    /// Fragment + 1.
    owner: Array2<u32>,
}

impl<'a> Ties<'a> {
    fn new(fragments: &[Vec<Pixel>], evidence: &'a Evidence) -> Self {
        let mut owner = Array2::zeros(evidence.z.dim());
        for (index, pixels) in fragments.iter().enumerate() {
            pixels.iter().for_each(|&p| owner[p] = index as u32 + 1);
        }
        Self { evidence, owner, lengths: fragments.iter().map(Vec::len).collect() }
    }

    /// (fragment, fragment tied to it, pixels of the gap).
    fn all(&self, fragments: &[Vec<Pixel>]) -> Vec<(usize, usize, Vec<Pixel>)> {
        let mut out = Vec::new();
        for (index, pixels) in fragments.iter().enumerate() {
            for (end, heading) in ends(pixels) {
                out.extend(self.ahead(index, end, heading).map(|(to, bridge)| (index, to, bridge)));
            }
        }
        out
    }

    /// The nearest pixel of another fragment ahead of an end, with the way to it.
    fn ahead(&self, index: usize, end: Pixel, heading: [f64; 2]) -> Option<(usize, Vec<Pixel>)> {
        let least = GAP.max(GAP_SCALES * f64::from(self.evidence.sigma[end]));
        let share = |fragment: usize| GAP_LENGTHS * self.lengths[fragment] as f64;
        let reach = least.max(share(index).min(MOST_GAP));
        let far = reach.ceil() as isize;
        let mut best: Option<(f64, Pixel)> = None;
        for down in -far..=far {
            for right in -far..=far {
                let p = [end[0].wrapping_add_signed(down), end[1].wrapping_add_signed(right)];
                let Some(&owner) = self.owner.get(p) else { continue };
                let gap = libm::hypot(down as f64, right as f64);
                if owner == 0 || owner as usize == index + 1 || gap > least.max(reach.min(share(owner as usize - 1))) {
                    continue;
                }
                let turn = (down as f64 * heading[0] + right as f64 * heading[1]) / gap;
                // The farther aside, the less near.
                let cost = gap * (2.0 - turn);
                if turn >= STRAIGHT && best.is_none_or(|(least, _)| cost < least) {
                    best = Some((cost, p));
                }
            }
        }
        let (_, to) = best?;
        let way = straight(end, to);
        let mean = way.iter().map(|&p| self.evidence.z[p]).sum::<f32>() / way.len().max(1) as f32;
        let wanted = GAP_EVIDENCE * self.evidence.z[end].min(self.evidence.z[to]);
        (way.is_empty() || mean >= wanted).then(|| (self.owner[to] as usize - 1, way))
    }
}

/// Ends of a skeleton's pieces with the direction (row, column) in which they head.
fn ends(pixels: &[Pixel]) -> Vec<(Pixel, [f64; 2])> {
    let low = |axis: usize| pixels.iter().map(|p| p[axis]).min().unwrap_or(0);
    let high = |axis: usize| pixels.iter().map(|p| p[axis]).max().unwrap_or(0);
    let origin = [low(0), low(1)];
    let mut cut = Array2::from_elem((high(0) - origin[0] + 1, high(1) - origin[1] + 1), false);
    pixels.iter().for_each(|p| cut[[p[0] - origin[0], p[1] - origin[1]]] = true);
    let graph = SkeletonGraph::from_mask(cut.view());
    let degrees = graph.degrees();
    let mut out = Vec::new();
    for chain in &graph.chains {
        let mut along: Vec<Pixel> = chain.pixels.iter().map(|p| [p[0] + origin[0], p[1] + origin[1]]).collect();
        for node in [chain.end, chain.start] {
            if degrees[node] == 1
                && let (Some(&end), Some(&back)) = (along.last(), along.get(along.len().saturating_sub(HEADING)))
            {
                let d = [end[0] as f64 - back[0] as f64, end[1] as f64 - back[1] as f64];
                let length = libm::hypot(d[0], d[1]);
                if length > 0.0 {
                    out.push((end, [d[0] / length, d[1] / length]));
                }
            }
            along.reverse();
        }
    }
    out
}

/// Pixels strictly between two pixels.
fn straight(a: Pixel, b: Pixel) -> Vec<Pixel> {
    let d = [b[0] as f64 - a[0] as f64, b[1] as f64 - a[1] as f64];
    let steps = d[0].abs().max(d[1].abs()) as usize;
    (1..steps)
        .map(|k| {
            let t = k as f64 / steps as f64;
            [libm::round(a[0] as f64 + t * d[0]) as usize, libm::round(a[1] as f64 + t * d[1]) as usize]
        })
        .collect()
}

/// Disjoint sets (Tarjan 1975, J. ACM 22, 215–225).
struct Union {
    parent: Vec<usize>,
}

impl Union {
    fn new(count: usize) -> Self {
        Self { parent: (0..count).collect() }
    }

    fn find(&mut self, mut at: usize) -> usize {
        while self.parent[at] != at {
            self.parent[at] = self.parent[self.parent[at]];
            at = self.parent[at];
        }
        at
    }

    fn join(&mut self, a: usize, b: usize) {
        let (a, b) = (self.find(a), self.find(b));
        let (low, high) = (a.min(b), a.max(b));
        self.parent[high] = low;
    }
}
