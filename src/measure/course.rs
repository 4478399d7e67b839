//! The course of each path: cumulative length, direction, area and depth along it, so that any frame's
//! value is read at the point reached by then.

use crate::trace::edges::Edges;
use crate::trace::{EndsIn, Root, Trace, TracePath, TracePoint};

use super::geometry::{AxialSum, local_directions};

/// A turn at a node below which one path goes straight on from another, degrees.
const STRAIGHT_ON_DEG: f64 = 30.0;
/// Points of the parent that lead in a path that goes straight on from it.
const LEAD_POINTS: usize = 40;

/// One path with everything cumulative along it. All vectors have one entry a point.
#[derive(Debug, Clone)]
pub struct PathCourse {
    /// The path as traced.
    pub path: TracePath,
    /// Where its filament starts.
    pub root: Root,
    /// Length-weighted direction from its start up to the point.
    pub direction: Vec<AxialSum>,
    /// Area from its start up to the point, px².
    pub area: Vec<f64>,
    /// Index of the deepest point up to the point.
    pub deepest: Vec<usize>,
    /// Depth of the point, px.
    pub depth: Vec<f64>,
    /// Distance of the point to the far edge, px.
    pub remaining: Vec<f64>,
    /// Indices of the paths that start at its end.
    pub children: Vec<usize>,
}

impl PathCourse {
    /// Number of points that have arrived by frame `frame`.
    #[must_use]
    pub fn reached(&self, frame: usize) -> usize {
        self.path.points.partition_point(|p| p.arrival <= frame)
    }

    /// Whether any stretch of it has arrived by then.
    #[must_use]
    pub fn begun(&self, frame: usize) -> bool {
        self.reached(frame) >= 2
    }

    /// The sums up to and including the first `reached` points.
    #[must_use]
    pub fn sum(&self, reached: usize) -> AxialSum {
        reached.checked_sub(1).map_or_else(AxialSum::default, |i| self.direction[i])
    }

    /// What its tipward end is at `frame`.
    #[must_use]
    pub fn ends_in(&self, frame: usize, all: &[PathCourse]) -> EndsIn {
        let whole = self.reached(frame) == self.path.points.len();
        let open = self.path.ends_in == EndsIn::Branch && !self.children.iter().any(|&c| all[c].begun(frame));
        if whole && !open { self.path.ends_in } else { EndsIn::Tip }
    }
}

/// The courses of all paths of a trace, in its order.
#[must_use]
pub fn courses(trace: &Trace, edges: &Edges) -> Vec<PathCourse> {
    let mut out: Vec<PathCourse> = trace.paths.iter().map(|p| course(p, trace, edges)).collect();
    for (i, path) in trace.paths.iter().enumerate() {
        if let Some(parent) = path.parent.and_then(|number| trace.paths.iter().position(|p| p.path == number)) {
            out[parent].children.push(i);
        }
    }
    out
}

fn course(path: &TracePath, trace: &Trace, edges: &Edges) -> PathCourse {
    let points = &path.points;
    let angles = directions_with_lead(path, trace);
    let root = trace.filaments.iter().find(|f| f.filament == path.filament).map_or(Root::Inside, |f| f.root);
    let depth: Vec<f64> = points.iter().map(|p| edges.depth([p.x, p.y])).collect();
    let remaining = points.iter().map(|p| edges.remaining([p.x, p.y])).collect();
    let mut sum = AxialSum::default();
    let mut ink = 0.0;
    let (mut direction, mut area, mut deepest) = (vec![sum], vec![0.0], vec![0]);
    for i in 1..points.len() {
        let (a, b) = (points[i - 1], points[i]);
        let length = libm::hypot(b.x - a.x, b.y - a.y);
        sum.add(0.5 * length, angles[i - 1]);
        sum.add(0.5 * length, angles[i]);
        ink += length * 0.5 * (a.width + b.width);
        direction.push(sum);
        area.push(ink);
        let best = deepest[i - 1];
        deepest.push(if depth[i] > depth[best] { i } else { best });
    }
    PathCourse { path: path.clone(), root, direction, area, deepest, depth, remaining, children: Vec::new() }
}

/// Local directions of a path; one that goes straight on from its parent is led in by the parent's end.
fn directions_with_lead(path: &TracePath, trace: &Trace) -> Vec<f64> {
    let own = local_directions(&path.points);
    let Some(parent) = path.parent.and_then(|n| trace.paths.iter().find(|p| p.path == n)) else {
        return own;
    };
    let lead: Vec<TracePoint> = parent.points[parent.points.len().saturating_sub(LEAD_POINTS)..].to_vec();
    let turn = turn_deg(&lead, &path.points);
    if turn.is_none_or(|t| t > STRAIGHT_ON_DEG) {
        return own;
    }
    let skip = lead.len() - 1;
    let joined: Vec<TracePoint> = lead[..skip].iter().chain(&path.points).copied().collect();
    local_directions(&joined).split_off(skip)
}

/// Angle between the end of one line and the start of the next, over about 8 px each.
fn turn_deg(before: &[TracePoint], after: &[TracePoint]) -> Option<f64> {
    let reach = 16;
    let (a, b) = (before.get(before.len().checked_sub(1)?.saturating_sub(reach))?, before.last()?);
    let (c, d) = (after.first()?, after.get(reach.min(after.len() - 1))?);
    let (u, v) = ([b.x - a.x, b.y - a.y], [d.x - c.x, d.y - c.y]);
    let angle = libm::atan2(u[0] * v[1] - u[1] * v[0], u[0] * v[0] + u[1] * v[1]);
    Some(angle.to_degrees().abs())
}
