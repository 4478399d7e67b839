//! The tracer: takes corrected frames one by one and grows the forest.
//!
//! For each frame: proposals of the last frame are dropped; line evidence is gathered in the median of
//! the last three frames; what is new there is linked to what is traced; each strand's tip is dated by
//! a change point along it; arrivals old enough to have `confirm_frames` witnesses are decided for good.
//! Memory: the window of corrected frames (`WINDOW` planes) and the forest, whatever the length of the run.

use ndarray::{Array2, Zip};

use super::attach::Attachment;
use super::edges::Edges;
use super::forest::{Forest, Owners, disc};
use super::link::{self, Component, Ground};
use super::recent::{Corrected, Recent};
use super::ridge::line_evidence;
use super::settle;
use super::{graph, thin, threshold};

/// Corrected frames held at once: how far back a line that is found late can be dated.
pub const WINDOW: usize = 8;
/// Room left about traced ink in which nothing new is looked for, px.
const CLAIM_MARGIN: f64 = 1.75;
/// Distance ahead of a live tip within which less evidence is asked for, px.
const AHEAD: f64 = 10.0;
/// How much less, sd.
const AHEAD_BONUS: f32 = 1.7;
/// Evidence down to which a component that holds a sure pixel is followed, sd.
const LOW_Z: f32 = 3.2;
/// Least pixels of a component.
const LEAST_PIXELS: usize = 3;
/// Evidence tests that are independent of each other, per pixel: orientations and scales over their correlation.
const TESTS_PER_PIXEL: f64 = 0.5;

/// What the tracer needs to know.
#[derive(Debug, Clone)]
pub struct TraceSettings {
    /// Frames after its arrival from which an arrival is decided.
    pub confirm_frames: usize,
    /// Leading usable frames in which nothing is looked for.
    pub bare: usize,
    /// Expected number of false components per frame over the whole cell.
    pub false_alarms_per_frame: f64,
}

impl Default for TraceSettings {
    fn default() -> Self {
        Self {
            confirm_frames: 2,
            bare: 0,
            false_alarms_per_frame: 1e-4,
        }
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
    inside: Array2<bool>,
    owners: Owners,
    high_z: f32,
}

impl Tracer {
    /// `noise`: standard deviation of a corrected frame's pixel, [row, col].
    #[must_use]
    pub fn new(settings: TraceSettings, edges: Edges, noise: Array2<f32>) -> Self {
        let shape = noise.dim();
        let inside = Array2::from_shape_fn(shape, |(row, col)| {
            let p = [col as f64, row as f64];
            edges.depth(p) > 0.5 && edges.remaining(p) > 0.5
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
        self.forest.truncate();
        self.claim_all();
        if let Some((median, sd)) = self.recent.median() {
            self.extend(&median, sd);
        }
        settle::date(self);
        settle::observe(self);
        settle::withdraw(self);
    }

    /// Pixels known to be filament (with a margin), for the next frame's correction.
    #[must_use]
    pub fn metal(&self) -> Array2<bool> {
        self.owners.strand.mapv(|s| s > 0)
    }

    fn claim_all(&mut self) {
        self.owners = Owners::new(self.noise.dim());
        for (index, strand) in self
            .forest
            .strands
            .iter()
            .enumerate()
            .filter(|(_, s)| !s.withdrawn)
        {
            self.owners.claim(index, strand, 0, CLAIM_MARGIN);
        }
    }

    /// Finds what is new in the median plane and adds it to the forest as proposals.
    fn extend(&mut self, median: &Array2<f32>, sd: f32) {
        let z = self.evidence(median, sd);
        let ground = Ground {
            z: &z,
            low: LOW_Z,
            inside: &self.inside,
            edges: &self.edges,
        };
        let mut waiting = self.components(&z);
        for free in [false, false, true] {
            let mut left = Vec::new();
            for component in waiting {
                let lines = link::lines(&component, ground, &self.forest, &self.owners, free);
                if lines.is_empty() {
                    left.push(component);
                    continue;
                }
                let attachment = Attachment {
                    plane: median,
                    edges: &self.edges,
                };
                for index in attachment.attach(&lines, &mut self.forest) {
                    self.owners
                        .claim(index, &self.forest.strands[index], 0, CLAIM_MARGIN);
                }
            }
            waiting = left;
        }
    }

    fn evidence(&self, median: &Array2<f32>, sd: f32) -> Array2<f32> {
        let whitened = Zip::from(median)
            .and(&self.noise)
            .par_map_collect(|&m, &n| {
                let u = m / (n * sd);
                if u.is_finite() {
                    u.clamp(-30.0, 30.0)
                } else {
                    0.0
                }
            });
        let wanted = Zip::from(&self.inside)
            .and(&self.owners.strand)
            .par_map_collect(|&i, &o| i && o == 0);
        line_evidence(&whitened, &wanted).z
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
        skeleton_components(&mask)
    }
}

/// Evidence that bare ceramic reaches `rate` times a frame over `area` pixels (Bonferroni over independent tests).
fn sure_z(area: usize, rate: f64) -> f32 {
    use statrs::distribution::{ContinuousCDF, Normal};
    let tests = (area as f64 * TESTS_PER_PIXEL).max(1.0);
    let tail = (rate / tests).clamp(1e-15, 0.01);
    (-Normal::standard().inverse_cdf(tail)) as f32
}

/// Components of a mask with the ends of their skeletons.
fn skeleton_components(mask: &Array2<bool>) -> Vec<Component> {
    threshold::components(mask)
        .into_iter()
        .map(|pixels| {
            let ends = graph::ends(&thin::thin_pixels(&pixels));
            Component { pixels, ends }
        })
        .collect()
}

impl Tracer {
    /// The final trace from all frames taken in.
    #[must_use]
    pub fn finish(&self) -> super::Trace {
        super::finish::finish(self)
    }
}
