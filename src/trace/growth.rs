//! The tracer: takes corrected frames one by one and grows the forest.
//!
//! For each frame: proposals of the last frame are dropped; line evidence is gathered in the median of
//! the last three frames; what is new there is linked to what is traced; each strand's tip is dated by
//! a change point along it; arrivals old enough to have `confirm_frames` witnesses are decided for good.
//! Memory: the window of corrected frames (`WINDOW` planes) and the forest, whatever the length of the run.

use ndarray::{Array2, Zip};

use super::attach::Attachment;
use super::edges::Edges;
use super::forest::{Forest, Owners, Vertex, disc};
use super::graph::{self, SkeletonGraph};
use super::link::{self, Component, Ground, Start};
use super::recent::{Corrected, Recent};
use super::ridge::line_evidence;
use super::settle::{self, EDGE_SHADE};
use super::still;
use super::tip::TipShape;
use super::{prune, shoulders, thin, threshold};

/// Corrected frames held at once: how far back a line that is found late can be dated.
pub const WINDOW: usize = 8;
/// Room left about traced ink in which nothing new is looked for, px.
const CLAIM_MARGIN: f64 = 2.5;
/// Distance ahead of a live tip within which less evidence is asked for, px.
const AHEAD: f64 = 10.0;
/// Contrast over pixel noise from which a tip that makes no new line is looked ahead of: in noise it would creep.
const LOOK_CLARITY: f64 = 3.0;
/// How much less, sd.
const AHEAD_BONUS: f32 = 1.7;
/// Pixels of the frame's rim that are not looked at: the evidence needs a neighbourhood.
const RIM: usize = 3;
/// Evidence down to which a component that holds a sure pixel is followed, sd.
const LOW_Z: f32 = 3.2;
/// Least pixels of a component.
const LEAST_PIXELS: usize = 3;
/// A skeleton's end branch shorter than this many half widths at its junction is a spur.
const SPUR_HALF_WIDTHS: f64 = 1.5;
/// Share of a new branch that must lie outside traced ink.
const NEW_GROUND: f64 = 0.4;
/// Evidence tests that are independent of each other, per pixel: orientations and scales over their correlation.
const TESTS_PER_PIXEL: f64 = 0.5;

/// What the tracer needs to know.
#[derive(Debug, Clone)]
pub struct TraceSettings {
    /// Frames after its arrival from which an arrival is decided.
    pub confirm_frames: usize,
    /// Leading usable frames in which nothing is looked for.
    pub bare: usize,
    /// Whether frames are compared with bare ones; else each is searched against its own background.
    pub bare_reference: bool,
    /// Expected number of false components per frame over the whole cell.
    pub false_alarms_per_frame: f64,
}

impl Default for TraceSettings {
    fn default() -> Self {
        Self { confirm_frames: 2, bare: 0, bare_reference: true, false_alarms_per_frame: 1e-4 }
    }
}

/// Grows the forest frame by frame.
#[derive(Debug)]
pub struct Tracer {
    pub(super) settings: TraceSettings,
    pub(super) edges: Edges,
    pub(super) noise: Array2<f32>,
    pub(super) forest: Forest,
    pub(super) recent: Recent,
    /// Index over all files of each usable frame, by ordinal.
    pub(super) frames: Vec<usize>,
    pub(super) withdrawn: usize,
    pub(super) tip_shape: TipShape,
    pub(super) inside: Array2<bool>,
    pub(super) owners: Owners,
    high_z: f32,
}

impl Tracer {
    /// `noise`: standard deviation of a corrected frame's pixel, [row, col].
    #[must_use]
    pub fn new(settings: TraceSettings, edges: Edges, noise: Array2<f32>) -> Self {
        let shape = noise.dim();
        let inside = Array2::from_shape_fn(shape, |(row, col)| {
            let p = [col as f64, row as f64];
            let in_frame = row.min(shape.0 - 1 - row) >= RIM && col.min(shape.1 - 1 - col) >= RIM;
            in_frame && edges.depth(p) > EDGE_SHADE && edges.remaining(p) > EDGE_SHADE
        });
        let area = inside.iter().filter(|&&b| b).count();
        let high_z = sure_z(area, settings.false_alarms_per_frame);
        let recent = Recent::new(WINDOW.max(settings.confirm_frames + 2));
        Self {
            settings,
            edges,
            noise,
            forest: Forest::default(),
            recent,
            frames: Vec::new(),
            withdrawn: 0,
            tip_shape: TipShape::default(),
            inside,
            owners: Owners::new(shape),
            high_z,
        }
    }

    /// Takes in the next usable frame.
    pub fn push(&mut self, frame: Corrected) {
        self.frames.push(frame.frame);
        self.recent.push(frame);
        if self.frames.len() <= self.settings.bare {
            return;
        }
        if !self.settings.bare_reference {
            still::push(self);
            return;
        }
        self.forest.truncate();
        self.claim_all();
        if let Some((median, sd)) = self.recent.median() {
            self.extend(&median, sd, false);
        }
        settle::date(self, self.settings.confirm_frames);
        settle::observe(self);
        settle::withdraw(self);
    }

    /// Pixels known to be filament (with a margin), for the next frame's correction.
    #[must_use]
    pub fn metal(&self) -> Array2<bool> {
        self.owners.strand.mapv(|s| s > 0)
    }

    pub(super) fn claim_all(&mut self) {
        self.owners = Owners::new(self.noise.dim());
        for (index, strand) in self.forest.strands.iter().enumerate().filter(|(_, s)| !s.withdrawn) {
            self.owners.claim(index, strand, 0, CLAIM_MARGIN);
        }
    }

    /// Marks a strand's surroundings as its own.
    pub(super) fn claim(&mut self, index: usize) {
        self.owners.claim(index, &self.forest.strands[index], 0, CLAIM_MARGIN);
    }

    /// Finds what is new in `plane` and adds it to the forest as proposals; `ahead`: only what goes on from a tip.
    fn extend(&mut self, plane: &Array2<f32>, sd: f32, ahead: bool) {
        let z = self.evidence(plane, sd);
        let ground = Ground { z: &z, low: LOW_Z, inside: &self.inside, edges: &self.edges };
        let mut waiting = self.components(&z);
        for free in [false, false, true] {
            let mut left = Vec::new();
            for component in waiting {
                let mut lines = link::lines(&component, ground, &self.forest, &self.owners, free && !ahead);
                if ahead && !matches!(lines.first().map(|l| l.start), Some(Start::Tip(_))) {
                    continue;
                }
                if ahead {
                    lines.truncate(1);
                }
                if lines.is_empty() {
                    left.push(component);
                    continue;
                }
                let attachment = Attachment { plane, edges: &self.edges };
                for index in attachment.attach(&lines, &mut self.forest) {
                    if !self.breaks_new_ground(index) {
                        self.forest.strands[index].truncate();
                        continue;
                    }
                    self.owners.claim(index, &self.forest.strands[index], 0, CLAIM_MARGIN);
                }
            }
            waiting = left;
        }
        let attachment = Attachment { plane, edges: &self.edges };
        for index in 0..self.forest.strands.len() {
            let strand = &self.forest.strands[index];
            let rests = strand.live() && strand.vertices.len() == strand.decided && strand.decided > 0;
            if rests && settle::clarity(self, strand) >= LOOK_CLARITY {
                attachment.look_ahead(index, &mut self.forest, &self.owners);
            }
        }
    }

    /// Ties free ends to other metal ahead of them, where the latest frames show ink all the way.
    fn meet(&mut self) {
        let Some((plane, _)) = self.recent.median() else { return };
        self.claim_all();
        let attachment = Attachment { plane: &plane, edges: &self.edges };
        for index in 0..self.forest.strands.len() {
            if self.forest.strands[index].live() && self.forest.strands[index].decided > 1 {
                attachment.meet(index, &mut self.forest, &self.owners);
            }
        }
    }

    /// Whether a proposal leaves the ink that is traced already: its end does, and enough of its way. Lines found on the
    /// shoulder of a strong one slide onto its ridge and do not.
    pub(super) fn breaks_new_ground(&self, index: usize) -> bool {
        let strand = &self.forest.strands[index];
        let bare = |v: &Vertex| {
            let pixel = [v.p[1].round().max(0.0) as usize, v.p[0].round().max(0.0) as usize];
            self.owners.strand.get(pixel).is_some_and(|&s| s == 0)
        };
        let new = &strand.vertices[strand.decided..];
        let outside = new.iter().filter(|v| bare(v)).count();
        new.last().is_some_and(bare) && (strand.decided > 0 || outside as f64 >= NEW_GROUND * new.len() as f64)
    }

    fn evidence(&self, median: &Array2<f32>, sd: f32) -> Array2<f32> {
        let whitened = Zip::from(median).and(&self.noise).and(&self.inside).par_map_collect(|&m, &n, &inside| {
            let u = m / (n * sd);
            if inside && u.is_finite() { u.clamp(-30.0, 30.0) } else { 0.0 }
        });
        let wanted = Zip::from(&self.inside).and(&self.owners.strand).par_map_collect(|&i, &o| i && o == 0);
        let mut z = line_evidence(&whitened, &wanted).z;
        shoulders::clear(&mut z, &whitened, LOW_Z);
        z
    }

    /// Connected new pixels that hold at least one sure pixel; ahead of a live tip less is asked for.
    fn components(&self, z: &Array2<f32>) -> Vec<Component> {
        let mut boosted = z.clone();
        for strand in self.forest.strands.iter().filter(|s| s.live()) {
            if let Some(end) = strand.vertices.last() {
                for pixel in disc(end.p, AHEAD + 0.5 * strand.width, z.dim()) {
                    if z[pixel] >= LOW_Z {
                        boosted[pixel] = z[pixel] + AHEAD_BONUS;
                    }
                }
            }
        }
        let mask = threshold::hysteresis(&boosted, LOW_Z, self.high_z);
        let mask = threshold::clean(&mask, LEAST_PIXELS);
        let mut components = skeleton_components(&mask);
        let tips: Vec<[f64; 2]> =
            self.forest.strands.iter().filter(|s| s.live()).filter_map(|s| s.vertices.last()).map(|v| v.p).collect();
        components.sort_by_cached_key(|c| (nearest_square(&c.pixels, &tips), c.pixels[0]));
        components
    }
}

/// Squared distance, px², of a component to the nearest tip: what goes on from a tip is linked first.
fn nearest_square(pixels: &[[usize; 2]], tips: &[[f64; 2]]) -> u64 {
    let square = |p: &[usize; 2], t: &[f64; 2]| ((p[1] as f64 - t[0]).powi(2) + (p[0] as f64 - t[1]).powi(2)) as u64;
    tips.iter().flat_map(|t| pixels.iter().map(move |p| square(p, t))).min().unwrap_or(u64::MAX)
}

/// Evidence that bare ceramic reaches `rate` times a frame over `area` pixels (Bonferroni over independent tests).
fn sure_z(area: usize, rate: f64) -> f32 {
    use statrs::distribution::{ContinuousCDF, Normal};
    let tests = (area as f64 * TESTS_PER_PIXEL).max(1.0);
    let tail = (rate / tests).clamp(1e-15, 0.01);
    (-Normal::standard().inverse_cdf(tail)) as f32
}

/// Components of a mask with the ends of their skeletons, short spurs left out.
fn skeleton_components(mask: &Array2<bool>) -> Vec<Component> {
    let mut out = Vec::new();
    threshold::for_each_component(mask.view(), |pixels| {
        out.push(Component { ends: skeleton_ends(pixels), pixels: pixels.to_vec() });
    });
    out
}

/// Ends of the skeleton of one component; one of its pixels where it is a closed loop or a dot.
fn skeleton_ends(pixels: &[[usize; 2]]) -> Vec<[usize; 2]> {
    let low = |axis: usize| pixels.iter().map(|p| p[axis]).min().unwrap_or(0);
    let high = |axis: usize| pixels.iter().map(|p| p[axis]).max().unwrap_or(0);
    let origin = [low(0), low(1)];
    let mut cut = Array2::from_elem((high(0) - origin[0] + 3, high(1) - origin[1] + 3), false);
    for p in pixels {
        cut[[p[0] - origin[0] + 1, p[1] - origin[1] + 1]] = true;
    }
    let mut graph = SkeletonGraph::from_mask(thin::thin(cut.view()).view());
    graph.prune_short(graph::distance::distance(cut.view()).view(), SPUR_HALF_WIDTHS);
    let degrees = graph.degrees();
    let back = |p: &[usize; 2]| [p[0] + origin[0] - 1, p[1] + origin[1] - 1];
    let mut ends: Vec<[usize; 2]> = graph
        .nodes
        .iter()
        .zip(&degrees)
        .filter(|(_, d)| **d <= 1)
        .flat_map(|(n, _)| n.pixels.first())
        .map(back)
        .collect();
    if ends.is_empty() {
        ends.extend(graph.chains.iter().filter_map(|c| c.pixels.first()).take(1).map(back));
    }
    ends
}

/// How deep a filament had come by each used frame, as decided when asked.
#[derive(Debug, Clone, PartialEq)]
pub struct DepthCourse {
    /// Number of the filament in order of discovery; stays the same from frame to frame.
    pub filament: usize,
    /// Ordinal of the used frame of the first entry.
    pub first: usize,
    /// Depth of its deepest point by frame, px; never falls.
    pub depth_px: Vec<f64>,
    /// Distance of that point to the far edge, px.
    pub remaining_px: Vec<f64>,
    /// Whether its ink touches the far edge.
    pub bridged: bool,
}

impl Tracer {
    /// Depth by frame of every filament rooted on the plating edge, from its first arrival to the latest used frame.
    /// The last `confirm_frames` entries are provisional. Uses nothing later than the latest frame.
    #[must_use]
    pub fn depth_courses(&self) -> Vec<DepthCourse> {
        let count = self.frames.len();
        let sure = count.saturating_sub(self.settings.confirm_frames);
        let mut out = Vec::new();
        for filament in
            (0..self.forest.filaments.len()).filter(|&f| self.forest.filaments[f].root == super::Root::Plating)
        {
            let mut by_frame: Vec<Option<(f64, f64)>> = vec![None; count];
            let mut bridged = false;
            for strand in self.forest.strands.iter().filter(|s| s.filament == filament && !s.withdrawn) {
                let setback = strand.setback(&self.tip_shape);
                bridged |= strand.reached_far.is_some();
                let decided = &strand.vertices[..strand.decided];
                let free = if strand.tied() { decided.len() } else { decided.len().saturating_sub(setback) };
                let ink = |i: usize| decided[(i + setback).min(decided.len() - 1)].arrival;
                let decided = (0..free).filter_map(|i| ink(i).map(|a| (a, &strand.vertices[i])));
                let later = strand.provisional.iter().enumerate().flat_map(|(k, &n)| {
                    let reached = strand.decided.saturating_sub(setback)..n.saturating_sub(setback);
                    strand.vertices[reached.start.min(reached.end)..reached.end].iter().map(move |v| (sure + k, v))
                });
                for (ordinal, vertex) in decided.chain(later) {
                    let best = &mut by_frame[ordinal.min(count - 1)];
                    if best.is_none_or(|b| vertex.depth > b.0) {
                        *best = Some((vertex.depth, vertex.remaining));
                    }
                }
            }
            out.extend(rising(filament, &by_frame, bridged));
        }
        out
    }
}

/// A course from the deepest arrival of each frame; `None` when nothing arrived.
fn rising(filament: usize, by_frame: &[Option<(f64, f64)>], bridged: bool) -> Option<DepthCourse> {
    let first = by_frame.iter().position(Option::is_some)?;
    let mut now = (0.0, f64::INFINITY);
    let (mut depth_px, mut remaining_px) = (Vec::new(), Vec::new());
    for entry in &by_frame[first..] {
        if let Some(deeper) = entry.filter(|e| e.0 > now.0 || now.1.is_infinite()) {
            now = deeper;
        }
        depth_px.push(now.0.max(0.0));
        remaining_px.push(now.1.max(0.0));
    }
    Some(DepthCourse { filament, first, depth_px, remaining_px, bridged })
}

impl Tracer {
    /// The final trace from all frames taken in: the last frames are decided with the witnesses they have.
    #[must_use]
    pub fn finish(mut self) -> super::Trace {
        if !self.settings.bare_reference {
            still::finish(&mut self);
            return super::finish::finish(&self);
        }
        settle::date(&mut self, 0);
        if let Some(last) = self.recent.frames().back().cloned().filter(|_| self.frames.len() > 2) {
            self.forest.truncate();
            self.claim_all();
            self.extend(&last.residual, last.noise_factor, true);
            settle::date(&mut self, 0);
        }
        settle::observe_new(&mut self);
        prune::prune(&mut self.forest.strands);
        self.forest.truncate();
        self.meet();
        super::finish::finish(&self)
    }
}
