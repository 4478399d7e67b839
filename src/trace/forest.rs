//! The forest of strands: one skeleton that only grows.
//!
//! A strand is a line of vertices [`SPACING`] apart from where it starts to its tip. Its first `decided`
//! vertices have an arrival and stay; the rest is a proposal that the next frame makes anew.

use ndarray::Array2;

use super::Root;
use super::centreline::{Profile, distance};
use super::edges::Edges;
use super::tip::{ROUND, TipShape};

/// Distance between neighbouring vertices of a strand, px: half a pixel, so that a tip is placed within a quarter.
pub(crate) const SPACING: f64 = 0.5;

/// Standard deviation of the blur, px: chosen by hand after synthetic runs, no source. The half level of a blurred disc of radius r
/// lies σ²/2r inside its rim.
const BLUR_PX: f64 = 0.65;

/// Margin ahead of a free end, px.
const AHEAD_MARGIN: f64 = 1.0;

/// A length in pixels as a number of vertices.
#[must_use]
pub(crate) fn vertices_in(px: f64) -> usize {
    (px / SPACING).round() as usize
}

/// One vertex of a strand.
#[derive(Debug, Clone)]
pub(crate) struct Vertex {
    /// Position, px.
    pub p: [f64; 2],
    /// Unit normal of the line here.
    pub n: [f64; 2],
    /// Ordinal of the usable frame at which the ink reached it.
    pub arrival: Option<usize>,
    /// Ordinal of the usable frame from which it is no longer visible.
    pub retreat: Option<usize>,
    /// What the frames since its arrival show across the line.
    pub profile: Profile,
    /// Smoothed contrast of the latest frames, for retreat and withdrawal.
    pub recent: f32,
    /// Full width of the ink here, px.
    pub width: f64,
    /// Depth from the plating edge, px.
    pub depth: f64,
    /// Distance to the far edge, px.
    pub remaining: f64,
}

impl Vertex {
    /// A vertex that has not arrived yet.
    #[must_use]
    pub(crate) fn new(p: [f64; 2], n: [f64; 2], width: f64, edges: &Edges) -> Self {
        Self {
            p,
            n,
            arrival: None,
            retreat: None,
            profile: Profile::default(),
            recent: f32::NAN,
            width,
            depth: edges.depth(p),
            remaining: edges.remaining(p),
        }
    }
}

/// Where a strand's first vertex is tied to.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) struct Joint {
    /// Index of the parent strand.
    pub strand: usize,
    /// Vertex of the parent.
    pub vertex: usize,
}

/// A line from its start to its tip.
#[derive(Debug, Clone)]
pub(crate) struct Strand {
    /// Index of its filament.
    pub filament: usize,
    /// Where it leaves its parent; `None` at a root.
    pub parent: Option<Joint>,
    /// Root to tip.
    pub vertices: Vec<Vertex>,
    /// How many vertices are decided.
    pub decided: usize,
    /// The strand and vertex that its end ran into.
    pub meets: Option<Joint>,
    /// Ordinal of the frame at which its end touched the far edge.
    pub reached_far: Option<usize>,
    /// Full width, px.
    pub width: f64,
    /// Contrast.
    pub contrast: f64,
    /// Mean picture of its own tip.
    pub tip_shape: TipShape,
    /// Withdrawn: it gained no evidence later.
    pub withdrawn: bool,
    /// Vertices reached in the frames after the last decided one, oldest first.
    pub provisional: Vec<usize>,
}

/// A root and its strands.
#[derive(Debug, Clone)]
pub(crate) struct Filament {
    /// Where it starts.
    pub root: Root,
    /// Root position, px.
    pub root_px: [f64; 2],
}

/// All strands.
#[derive(Debug, Clone, Default)]
pub(crate) struct Forest {
    /// In order of discovery.
    pub strands: Vec<Strand>,
    /// In order of discovery.
    pub filaments: Vec<Filament>,
}

/// Which strand owns a pixel.
#[derive(Debug, Clone)]
pub(crate) struct Owners {
    /// Strand index + 1, 0 for bare ceramic.
    pub strand: Array2<u32>,
    /// Vertex of that strand.
    pub vertex: Array2<u32>,
}

impl Owners {
    /// Nobody owns anything.
    #[must_use]
    pub(crate) fn new(shape: (usize, usize)) -> Self {
        Self { strand: Array2::zeros(shape), vertex: Array2::zeros(shape) }
    }

    /// The owner of a pixel.
    #[must_use]
    pub(crate) fn at(&self, pixel: [usize; 2]) -> Option<Joint> {
        let strand = self.strand[pixel];
        (strand > 0).then(|| Joint { strand: strand as usize - 1, vertex: self.vertex[pixel] as usize })
    }

    /// Gives a strand the pixels within `margin` px of its ink, from vertex `from` on. A free end is taken for round, with little
    /// margin ahead of it: what grows next starts there.
    pub(crate) fn claim(&mut self, index: usize, strand: &Strand, from: usize, margin: f64) {
        let open = strand.live();
        for (v, vertex) in strand.vertices.iter().enumerate().skip(from) {
            let half = 0.5 * vertex.width;
            let behind = (strand.vertices.len() - 1 - v) as f64 * SPACING;
            let reach = if open && behind < half {
                let cap = (half * half - (half - behind).powi(2)).max(0.0).sqrt();
                cap + AHEAD_MARGIN + (margin - AHEAD_MARGIN).max(0.0) * behind / half
            } else {
                half + margin
            };
            for pixel in disc(vertex.p, reach, self.strand.dim()) {
                let mine = index as u32 + 1;
                let nearer = match self.at(pixel) {
                    None => true,
                    Some(old) if old.strand == index => {
                        let at = [pixel[1] as f64, pixel[0] as f64];
                        strand.vertices.get(old.vertex).is_none_or(|o| distance(o.p, at) > distance(vertex.p, at))
                    }
                    Some(_) => false,
                };
                if nearer {
                    self.strand[pixel] = mine;
                    self.vertex[pixel] = v as u32;
                }
            }
        }
    }
}

/// Pixels [row, col] whose centres lie within `radius` of `p`, inside a plane of the given shape.
pub fn disc(p: [f64; 2], radius: f64, shape: (usize, usize)) -> impl Iterator<Item = [usize; 2]> {
    let low = |v: f64| (v - radius).ceil().max(0.0) as usize;
    let high = |v: f64, n: usize| ((v + radius).floor() + 1.0).clamp(0.0, n as f64) as usize;
    let (r0, r1) = (low(p[1]), high(p[1], shape.0));
    let (c0, c1) = (low(p[0]), high(p[0], shape.1));
    (r0..r1).flat_map(move |r| (c0..c1).map(move |c| [r, c])).filter(move |&[r, c]| {
        let (dx, dy) = (c as f64 - p[0], r as f64 - p[1]);
        dx * dx + dy * dy <= radius * radius
    })
}

impl Strand {
    /// Lets go of everything that is not decided.
    pub(crate) fn truncate(&mut self) {
        self.vertices.truncate(self.decided);
        self.provisional.clear();
    }

    /// Unit direction at its end, over its last `reach` vertices.
    #[must_use]
    pub(crate) fn heading(&self, reach: usize) -> Option<[f64; 2]> {
        let end = self.vertices.len().checked_sub(1)?;
        let start = end.checked_sub(reach.min(end))?;
        let (a, b) = (self.vertices[start].p, self.vertices[end].p);
        super::centreline::unit([b[0] - a[0], b[1] - a[1]])
    }

    /// Whether its end is tied to other metal or the far edge.
    #[must_use]
    pub(crate) fn tied(&self) -> bool {
        self.meets.is_some() || self.reached_far.is_some()
    }

    /// Vertices by which the centre-line ends behind the ink while the end is free.
    #[must_use]
    pub(crate) fn setback(&self, usual: &TipShape) -> usize {
        let shape = self.tip_shape.setback().or_else(|| usual.setback()).unwrap_or(ROUND);
        let radius = 0.5 * self.width;
        // The change point lies half a spacing beyond the last vertex reached, and blur draws a convex end back.
        let seen_short = 0.5 * SPACING + BLUR_PX * BLUR_PX / (2.0 * radius);
        vertices_in((shape * radius - seen_short).max(0.0))
    }

    /// Whether growth can go on from its end.
    #[must_use]
    pub(crate) fn live(&self) -> bool {
        !self.withdrawn && self.meets.is_none() && self.reached_far.is_none()
    }
}

impl Forest {
    /// Drops all proposals, and strands and filaments of which nothing is decided.
    pub(crate) fn truncate(&mut self) {
        self.strands.iter_mut().for_each(Strand::truncate);
        while self.strands.last().is_some_and(|s| s.vertices.is_empty()) {
            self.strands.pop();
        }
        while self.filaments.len() > self.strands.iter().map(|s| s.filament + 1).max().unwrap_or(0) {
            self.filaments.pop();
        }
    }
}
