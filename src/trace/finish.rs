//! The final trace: geometry refined from all frames, strands cut into paths at their branchings, numbered.

use super::centreline::{Profile, distance, pooled, smooth};
use super::forest::{SPACING, Strand, Vertex, vertices_in};
use super::growth::Tracer;
use super::{EndsIn, Root, Trace, TracePath, TracePoint, TracedFilament};

/// Length along which profiles are pooled for the final position, to either side, px.
const POOL: f64 = 4.0;
/// How far the final position may move, px.
const SEARCH: f64 = 2.0;
/// Length of a first clear stretch whose direction carries back to the edge, px.
const AIM: f64 = 8.0;
/// Least length of a filament on an edge, px.
const LEAST_ROOTED: f64 = 3.0;
/// Least length of one that starts inside, px.
const LEAST_INSIDE: f64 = 8.0;
/// A child this close to its parent's end goes on from it, px.
const END_SLACK: f64 = 3.0;

struct Refined {
    points: Vec<TracePoint>,
}

/// Builds the trace from what is decided.
#[must_use]
pub(super) fn finish(tracer: &Tracer) -> Trace {
    let kept: Vec<bool> = tracer.forest.strands.iter().map(|s| !s.withdrawn && s.decided > 1).collect();
    let refined: Vec<Refined> = tracer.forest.strands.iter().map(|s| refine(tracer, s)).collect();
    let mut order: Vec<(usize, usize)> = (0..tracer.forest.filaments.len())
        .filter_map(|f| {
            let root = root_strand(tracer, &kept, f)?;
            let long = refined[root].points.len() as f64 * SPACING;
            let least = if tracer.forest.filaments[f].root == Root::Inside { LEAST_INSIDE } else { LEAST_ROOTED };
            let gone = refined[root].points.iter().filter(|p| p.retreat.is_some()).count();
            let passing = tracer.forest.filaments[f].root == Root::Inside && 2 * gone > refined[root].points.len();
            (long >= least && !passing).then_some((f, root))
        })
        .collect();
    order.sort_by_key(|&(f, root)| (refined[root].points.first().map_or(usize::MAX, |p| p.arrival), f));
    let mut trace = Trace { withdrawn: tracer.withdrawn, ..Trace::default() };
    for (number, &(f, root)) in order.iter().enumerate() {
        let filament = number as u32 + 1;
        let mut walk = Walk { tracer, kept: &kept, refined: &refined, filament, trace: &mut trace };
        walk.path(None, Vec::new(), root, 0);
        let bridged = (0..kept.len())
            .filter(|&s| kept[s] && tracer.forest.strands[s].filament == f)
            .filter_map(|s| tracer.forest.strands[s].reached_far)
            .min()
            .map(|ordinal| tracer.frames[ordinal]);
        let root_px = refined[root].points.first().map_or(tracer.forest.filaments[f].root_px, |p| [p.x, p.y]);
        trace.filaments.push(TracedFilament { filament, root: tracer.forest.filaments[f].root, root_px, bridged });
    }
    trace
}

fn root_strand(tracer: &Tracer, kept: &[bool], filament: usize) -> Option<usize> {
    (0..kept.len()).find(|&s| {
        kept[s] && tracer.forest.strands[s].filament == filament && tracer.forest.strands[s].parent.is_none()
    })
}

/// Moves the decided vertices of a strand onto the ridge of their profiles.
fn refine(tracer: &Tracer, strand: &Strand) -> Refined {
    let vertices = &strand.vertices[..strand.decided];
    if vertices.len() < 2 {
        return Refined { points: Vec::new() };
    }
    let profiles: Vec<Profile> = vertices.iter().map(|v| v.profile.clone()).collect();
    let lead = lead_in(tracer, strand);
    let mut positions: Vec<[f64; 2]> = Vec::with_capacity(vertices.len());
    let mut widths: Vec<f64> = Vec::with_capacity(vertices.len());
    for (i, vertex) in vertices.iter().enumerate() {
        let section = pooled(&profiles, i, vertices_in(POOL)).section(SEARCH);
        let shift = section.map_or(0.0, |s| s.offset.clamp(-SEARCH, SEARCH));
        let shift = if i < lead { 0.0 } else { shift };
        positions.push([vertex.p[0] + shift * vertex.n[0], vertex.p[1] + shift * vertex.n[1]]);
        // Without a bare reference no profile is kept: the vertices have their places and widths already.
        let width = if tracer.settings.bare_reference { strand.width } else { vertex.width };
        widths.push(section.map_or(width, |s| s.width));
    }
    plant(tracer, strand, &mut positions, lead);
    straighten(&mut positions, lead);
    let positions = smooth(&positions, vertices_in(POOL));
    let setback = strand.setback(&tracer.tip_shape).min(vertices.len() - 2);
    let last = vertices.len() - 1;
    let shown = if strand.tied() { vertices.len() } else { vertices.len() - setback };
    let arrival = |i: usize| vertices[(i + setback).min(last)].arrival;
    let points = (0..shown).map(|i| trace_point(tracer, &vertices[i], arrival(i), positions[i], widths[i])).collect();
    Refined { points }
}

fn trace_point(tracer: &Tracer, vertex: &Vertex, arrival: Option<usize>, p: [f64; 2], width: f64) -> TracePoint {
    TracePoint {
        x: p[0],
        y: p[1],
        arrival: tracer.frames[arrival.unwrap_or(0)],
        retreat: vertex.retreat.map(|o| tracer.frames[o]),
        width,
        u_across: 0.1,
    }
}

/// Vertices at the start whose profile is not their own: inside the parent's ink or the electrode's blur.
fn lead_in(tracer: &Tracer, strand: &Strand) -> usize {
    match strand.parent {
        Some(joint) => {
            let width = tracer.forest.strands[joint.strand].width;
            vertices_in(0.5 * width + 0.5 * strand.width + 2.0)
        }
        None => strand.vertices.iter().take_while(|v| v.depth < 4.0 || v.remaining < 4.0).count(),
    }
    .min(strand.decided / 2)
}

/// Puts the first point of a rooted strand where its first clear stretch, carried back, meets its edge.
fn plant(tracer: &Tracer, strand: &Strand, points: &mut [[f64; 2]], lead: usize) {
    let edge = match tracer.forest.filaments[strand.filament].root {
        Root::Plating => &tracer.edges.plating,
        Root::Far => &tracer.edges.far,
        Root::Inside => return,
    };
    let aim = lead + vertices_in(AIM);
    if strand.parent.is_none() && lead > 0 && aim < points.len() {
        points[0] = edge.carried_back(points[lead], points[aim]);
    }
}

/// Puts the first `lead` points on the straight line from the first to number `lead`.
fn straighten(points: &mut [[f64; 2]], lead: usize) {
    let (Some(&a), Some(&b)) = (points.first(), points.get(lead)) else {
        return;
    };
    for (i, p) in points.iter_mut().enumerate().take(lead) {
        let t = i as f64 / lead as f64;
        *p = [a[0] + t * (b[0] - a[0]), a[1] + t * (b[1] - a[1])];
    }
}

struct Walk<'a> {
    tracer: &'a Tracer,
    kept: &'a [bool],
    refined: &'a [Refined],
    filament: u32,
    trace: &'a mut Trace,
}

impl Walk<'_> {
    /// Emits the path that starts with `points` and goes on along strand `s` from vertex `from`.
    fn path(&mut self, parent: Option<u32>, mut points: Vec<TracePoint>, s: usize, from: usize) {
        let all = &self.refined[s].points;
        let children = self.children(s);
        let last = all.len() - 1;
        let at_end = |v: usize| v + vertices_in(END_SLACK) > last;
        let node = children.iter().map(|&(v, _)| v).filter(|&v| v > from && !at_end(v)).min();
        if let Some(node) = node {
            points.extend_from_slice(&all[from..=node]);
            let number = self.emit(parent, points, EndsIn::Branch);
            let here: Vec<usize> = children.iter().filter(|&&(v, _)| v == node).map(|&(_, c)| c).collect();
            self.path(Some(number), vec![all[node]], s, node + 1);
            for child in here {
                self.path(Some(number), vec![all[node]], child, 1);
            }
            return;
        }
        points.extend_from_slice(&all[from.min(last)..]);
        let here: Vec<usize> = children.iter().filter(|&&(v, _)| v > from && at_end(v)).map(|&(_, c)| c).collect();
        match here[..] {
            [only] => self.path(parent, points, only, 1),
            [] => {
                let ends_in = self.end_of(s);
                self.emit(parent, points, ends_in);
            }
            _ => {
                let end = all[last];
                let number = self.emit(parent, points, EndsIn::Branch);
                for child in here {
                    self.path(Some(number), vec![end], child, 1);
                }
            }
        }
    }

    /// Kept children of a strand with the vertex they leave from.
    fn children(&self, s: usize) -> Vec<(usize, usize)> {
        let last = self.refined[s].points.len() - 1;
        let mut out: Vec<(usize, usize)> = (0..self.kept.len())
            .filter(|&c| self.kept[c])
            .filter_map(|c| {
                self.tracer.forest.strands[c].parent.filter(|j| j.strand == s).map(|j| (j.vertex.min(last), c))
            })
            .collect();
        out.sort_unstable();
        out
    }

    fn end_of(&self, s: usize) -> EndsIn {
        let strand = &self.tracer.forest.strands[s];
        if strand.reached_far.is_some() {
            EndsIn::Far
        } else if strand.meets.is_some() {
            EndsIn::Meeting
        } else {
            EndsIn::Tip
        }
    }

    fn emit(&mut self, parent: Option<u32>, points: Vec<TracePoint>, ends_in: EndsIn) -> u32 {
        let number = self.trace.paths.len() as u32 + 1;
        self.trace.paths.push(TracePath {
            path: number,
            filament: self.filament,
            parent,
            points: arrivals_rise(points),
            ends_in,
        });
        number
    }
}

/// Arrivals never fall along a path; a child's first points wait for their joint.
fn arrivals_rise(mut points: Vec<TracePoint>) -> Vec<TracePoint> {
    let mut floor = 0;
    for p in &mut points {
        p.arrival = p.arrival.max(floor);
        floor = p.arrival;
    }
    points.dedup_by(|b, a| distance([a.x, a.y], [b.x, b.y]) < 1e-6);
    points
}
