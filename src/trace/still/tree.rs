//! From a group of crest pixels to lines: the longest way through it, then the longest that leaves what is drawn, and so on.
//!
//! Method: geodesic distance within the group's pixels (Dijkstra 1959, Numer. Math. 1, 269–271); the farthest pixel from the farthest
//! pixel of any ends the longest way, exactly so where the group has no loop. A way's salience is its length in scales of the line,
//! each pixel weighted by how far it stands out. Bushes of short twigs, as stains make them, thus count for their longest way only.

use std::cmp::Reverse;
use std::collections::{BinaryHeap, HashMap};

use ndarray::Array2;

use super::super::thin::NEIGHBOURS;
use super::crest::Pixel;

/// Length of a step to a side, 1/408 px: whole numbers, so that ties are ties.
const SIDE: u64 = 408;
/// And to a corner: 577/408 is √2 to 2·10⁻⁶.
const CORNER: u64 = 577;
/// Pixels this many scales from the line they leave count for a branch.
const CLEAR_SCALES: f64 = 2.0;
/// Most that a pixel counts for, times the texture's evidence: a short dark speck is no long line.
const MOST: f32 = 3.0;
/// Open part of the outline below which a way is a ring: a half circle has 0.39.
const RING: f64 = 0.2;
/// And the least 4π·area/outline² (1 for a circle, 0.79 for a square; pixel steps lengthen an outline by up to 8 %).
const ROUND: f64 = 0.6;

/// What a way starts from.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum From {
    /// Nothing: it is the group's longest.
    Nothing,
    /// Pixel `.1` of way `.0`.
    Way(usize, usize),
    /// A pixel that was traced before.
    Traced(Pixel),
}

/// A way through a group.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Way {
    /// Pixels from its start on, without that of what it leaves.
    pub pixels: Vec<Pixel>,
    /// What it leaves.
    pub from: From,
    /// Salience.
    pub score: f32,
}

/// What ways are weighed by.
#[derive(Clone, Copy)]
pub(crate) struct Weights<'a> {
    /// How far each pixel stands out.
    pub standing: &'a Array2<f32>,
    /// Scale of the line, px.
    pub sigma: &'a Array2<f32>,
}

impl Weights<'_> {
    fn score(&self, pixels: &[Pixel]) -> f32 {
        pixels.iter().map(|&p| self.standing[p].min(MOST) / self.sigma[p].max(1.0)).sum()
    }
}

/// The longest way through a group.
#[must_use]
pub(crate) fn longest(group: &[Pixel], weights: Weights) -> Option<Way> {
    let mut net = Net::new(group);
    let one = net.farthest(group.get(..1)?)?;
    let two = net.farthest(&[one])?;
    let pixels = net.way_to(two);
    Some(Way { score: weights.score(&pixels), pixels, from: From::Nothing })
}

/// Whether a way closes on itself and is round: the outline of a pore, a bubble or a cell.
#[must_use]
pub(crate) fn is_ring(way: &Way) -> bool {
    let (Some(a), Some(b)) = (way.pixels.first(), way.pixels.last()) else { return false };
    let xy = |p: &Pixel| [p[1] as f64, p[0] as f64];
    let pairs = way.pixels.windows(2).map(|w| (&w[0], &w[1])).chain([(b, a)]);
    let (mut around, mut twice_area) = (0.0, 0.0);
    for (p, q) in pairs {
        let (p, q) = (xy(p), xy(q));
        around += libm::hypot(q[0] - p[0], q[1] - p[1]);
        twice_area += p[0] * q[1] - p[1] * q[0];
    }
    let chord = libm::hypot(a[0] as f64 - b[0] as f64, a[1] as f64 - b[1] as f64);
    chord < RING * around && 2.0 * std::f64::consts::PI * twice_area.abs() > ROUND * around * around
}

/// The ways of a group from what of it is `traced` already, or else from its longest way `first`; the longest first. Those
/// that leave pixel p with less salience than `least(p)` are left out.
#[must_use]
pub(crate) fn ways(
    group: &[Pixel],
    first: &Way,
    traced: &[Pixel],
    weights: Weights,
    least: impl Fn(Pixel) -> f32,
) -> Vec<Way> {
    let mut net = Net::new(group);
    let mut ways: Vec<Way> = if traced.is_empty() { vec![first.clone()] } else { Vec::new() };
    let mut place: HashMap<Pixel, From> = traced.iter().map(|&p| (p, From::Traced(p))).collect();
    let mark = |place: &mut HashMap<Pixel, From>, index: usize, way: &Way| {
        for (k, &p) in way.pixels.iter().enumerate() {
            place.entry(p).or_insert(From::Way(index, k));
        }
    };
    if let Some(way) = ways.first() {
        mark(&mut place, 0, way);
    }
    loop {
        let mut drawn: Vec<Pixel> = place.keys().copied().collect();
        drawn.sort_unstable();
        net.spread(&drawn);
        let Some((start, pixels, score)) = next(&mut net, weights, &least) else { return ways };
        let Some(&from) = place.get(&start) else { return ways };
        let way = Way { pixels, from, score };
        mark(&mut place, ways.len(), &way);
        ways.push(way);
    }
}

/// The longest way from what is drawn that is salient enough, after the pixel it starts from; shorter ones than it that are not
/// will not be asked again.
fn next(net: &mut Net, weights: Weights, least: &impl Fn(Pixel) -> f32) -> Option<(Pixel, Vec<Pixel>, f32)> {
    for tip in net.by_distance() {
        if net.is_dropped(tip) {
            continue;
        }
        let mut pixels = net.way_to(tip);
        let start = pixels.remove(0);
        let clear = (CLEAR_SCALES * f64::from(weights.sigma[start])).round() as usize;
        let score = weights.score(&pixels[clear.min(pixels.len())..]);
        if score >= least(start) {
            return Some((start, pixels, score));
        }
        net.drop(&pixels);
    }
    None
}

/// The pixels of a group with distances.
struct Net {
    index: HashMap<Pixel, usize>,
    pixels: Vec<Pixel>,
    distance: Vec<u64>,
    before: Vec<usize>,
    dropped: Vec<bool>,
}

const FAR: u64 = u64::MAX;

impl Net {
    fn new(group: &[Pixel]) -> Self {
        let index = group.iter().enumerate().map(|(k, &p)| (p, k)).collect();
        let n = group.len();
        Self { index, pixels: group.to_vec(), distance: vec![FAR; n], before: vec![n; n], dropped: vec![false; n] }
    }

    /// The farthest pixel from the sources, the first in order among equals.
    fn farthest(&mut self, sources: &[Pixel]) -> Option<Pixel> {
        self.spread(sources);
        self.by_distance().first().copied()
    }

    /// Distances from the sources.
    fn spread(&mut self, sources: &[Pixel]) {
        self.distance.fill(FAR);
        self.before.fill(self.pixels.len());
        let mut heap = BinaryHeap::new();
        for at in sources.iter().filter_map(|p| self.index.get(p).copied()) {
            self.distance[at] = 0;
            heap.push(Reverse((0u64, at)));
        }
        while let Some(Reverse((d, at))) = heap.pop() {
            if d > self.distance[at] {
                continue;
            }
            let [row, column] = self.pixels[at];
            for (down, right) in NEIGHBOURS {
                let p = [row.wrapping_add_signed(down), column.wrapping_add_signed(right)];
                let Some(&near) = self.index.get(&p) else { continue };
                let next = d + if down != 0 && right != 0 { CORNER } else { SIDE };
                if next < self.distance[near] {
                    (self.distance[near], self.before[near]) = (next, at);
                    heap.push(Reverse((next, near)));
                }
            }
        }
    }

    /// Pixels that were reached and are no source, the farthest first.
    fn by_distance(&self) -> Vec<Pixel> {
        let mut reached: Vec<usize> =
            (0..self.pixels.len()).filter(|&k| self.distance[k] > 0 && self.distance[k] < FAR).collect();
        reached.sort_by_key(|&k| (Reverse(self.distance[k]), k));
        reached.into_iter().map(|k| self.pixels[k]).collect()
    }

    fn is_dropped(&self, pixel: Pixel) -> bool {
        self.index.get(&pixel).is_none_or(|&k| self.dropped[k])
    }

    /// The way from the nearest source, which comes first, to a pixel.
    fn way_to(&self, tip: Pixel) -> Vec<Pixel> {
        let mut out = Vec::new();
        let mut at = self.index.get(&tip).copied().unwrap_or(self.pixels.len());
        while let Some(&pixel) = self.pixels.get(at) {
            out.push(pixel);
            at = self.before[at];
        }
        out.reverse();
        out
    }

    fn drop(&mut self, pixels: &[Pixel]) {
        for p in pixels {
            if let Some(&k) = self.index.get(p) {
                self.dropped[k] = true;
            }
        }
    }
}
