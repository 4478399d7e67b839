//! From found groups to strands of the forest: what is traced already is gone on from, the rest is new.

use ndarray::Array2;

use super::super::attach::Attachment;
use super::super::centreline::{normal, smooth, tangents};
use super::super::forest::{Joint, Vertex, vertices_in};
use super::super::growth::Tracer;
use super::super::link::{Line, ROOT_REACH, Start};
use super::crest::Pixel;
use super::find::{BRANCH, Found, Group};
use super::section::section;
use super::tree::{From, Way, ways};

/// Salience that growth from a live tip must show.
const TIP_SALIENCE: f32 = 3.0;
/// Distance from the end of a strand within which a line goes on from it, beyond half its width, px.
const END: f64 = 3.0;
/// First vertex of a strand that a branch may leave: paths are cut behind their first points.
const FIRST_JOINT: usize = 2;
/// Length along which centres are smoothed to either side, px, and scales of the line.
const SMOOTH: f64 = 3.0;
/// In scales.
const SMOOTH_SCALES: f64 = 2.0;
/// Blur of the lens, pixels and profile that widens a line, added in quadrature, px: that of `centreline`.
const INSTRUMENT_PX: f64 = 1.5;

/// Adds what was found to the forest as proposals; `ahead`: only what goes on from a tip.
pub(super) fn adopt(tracer: &mut Tracer, plane: &Array2<f32>, found: &Found, ahead: bool) {
    for group in &found.groups {
        let mut lines = lines_of(tracer, found, group);
        if ahead {
            lines.retain(|line| matches!(line.start, Start::Tip(_)));
        }
        let before: Vec<usize> = tracer.forest.strands.iter().map(|s| s.vertices.len()).collect();
        let attachment = Attachment { plane: &found.evidence.z, edges: &tracer.edges };
        for index in attachment.attach(&lines, &mut tracer.forest) {
            if !tracer.breaks_new_ground(index) {
                tracer.forest.strands[index].truncate();
                continue;
            }
            centre(tracer, plane, found, index, before.get(index).copied().unwrap_or(0));
            tracer.claim(index);
        }
    }
}

/// The lines of a group: those that leave what is traced, or else its tree from the end nearest to an electrode.
fn lines_of(tracer: &Tracer, found: &Found, group: &Group) -> Vec<Line> {
    let traced: Vec<Pixel> = group.pixels.iter().copied().filter(|&p| tracer.owners.at(p).is_some()).collect();
    let least = |p: Pixel| match tracer.owners.at(p) {
        Some(joint) if at_tip(tracer, joint) => TIP_SALIENCE,
        _ => BRANCH * found.salience,
    };
    let mut first = group.longest.clone();
    turn_to_root(tracer, &mut first);
    let ways = ways(&group.pixels, &first, &traced, found.weights(), least);
    ways.into_iter().map(|way| Line { start: start_of(tracer, &way), pixels: way.pixels }).collect()
}

fn at_tip(tracer: &Tracer, joint: Joint) -> bool {
    let strand = &tracer.forest.strands[joint.strand];
    strand.live() && joint.vertex + vertices_in(0.5 * strand.width + END) >= strand.vertices.len()
}

fn start_of(tracer: &Tracer, way: &Way) -> Start {
    match way.from {
        From::Way(line, pixel) => Start::Line(line, pixel),
        From::Traced(pixel) => match tracer.owners.at(pixel) {
            Some(joint) if at_tip(tracer, joint) => Start::Tip(joint.strand),
            Some(joint) => Start::Side(Joint { vertex: joint.vertex.max(FIRST_JOINT), ..joint }),
            None => Start::Inside,
        },
        From::Nothing => {
            let Some(&[row, column]) = way.pixels.first() else { return Start::Inside };
            let p = [column as f64, row as f64];
            if tracer.edges.depth(p) <= ROOT_REACH {
                Start::Plating
            } else if tracer.edges.remaining(p) <= ROOT_REACH {
                Start::Far
            } else {
                Start::Inside
            }
        }
    }
}

/// Turns a way so that it starts at the plating edge, else at the far edge, else at its end nearer to the plating edge.
fn turn_to_root(tracer: &Tracer, way: &mut Way) {
    let (Some(&a), Some(&b)) = (way.pixels.first(), way.pixels.last()) else { return };
    let rank = |[row, column]: Pixel| {
        let p = [column as f64, row as f64];
        let (depth, remaining) = (tracer.edges.depth(p), tracer.edges.remaining(p));
        let class = if depth <= ROOT_REACH {
            0
        } else if remaining <= ROOT_REACH {
            1
        } else {
            2
        };
        (class, depth)
    };
    let (a, b) = (rank(a), rank(b));
    if (b.0, b.1) < (a.0, a.1) {
        way.pixels.reverse();
    }
}

/// Moves the vertices of a strand from `from` on to the middle of the ink and reads their widths.
fn centre(tracer: &mut Tracer, plane: &Array2<f32>, found: &Found, index: usize, from: usize) {
    let strand = &tracer.forest.strands[index];
    let new = &strand.vertices[from..];
    let scale = |v: &Vertex| {
        let pixel = [v.p[1].round().max(0.0) as usize, v.p[0].round().max(0.0) as usize];
        found.evidence.sigma.get(pixel).map_or(1.0, |&s| f64::from(s.max(1.0)))
    };
    let mut scales: Vec<f64> = new.iter().map(scale).collect();
    let sections: Vec<_> = new.iter().zip(&scales).map(|(v, &s)| section(plane, v.p, v.n, s)).collect();
    scales.sort_by(f64::total_cmp);
    let typical = scales.get(scales.len() / 2).copied().unwrap_or(1.0);
    let reach = vertices_in(SMOOTH.max(SMOOTH_SCALES * typical));
    let moved: Vec<[f64; 2]> = new
        .iter()
        .zip(&sections)
        .enumerate()
        .map(|(i, (v, s))| {
            let held = i == 0 && from == 0 && strand.parent.is_some();
            let shift = s.filter(|_| !held).map_or(0.0, |s| s.offset.clamp(-typical.max(1.0), typical.max(1.0)));
            [v.p[0] + shift * v.n[0], v.p[1] + shift * v.n[1]]
        })
        .collect();
    let moved = smooth(&moved, reach);
    let directions = tangents(&moved, reach);
    let mut known: Vec<f64> = sections.iter().flatten().map(|s| s.width).collect();
    known.sort_by(f64::total_cmp);
    let usual = known.get(known.len() / 2).copied().unwrap_or(2.0 * typical);
    let ink = |width: f64| (width * width - INSTRUMENT_PX * INSTRUMENT_PX).max(1.0).sqrt();
    let edges = &tracer.edges;
    let vertices: Vec<Vertex> = moved
        .iter()
        .zip(directions)
        .zip(&sections)
        .map(|((&p, t), s)| Vertex::new(p, normal(t), ink(s.map_or(usual, |s| s.width)), edges))
        .collect();
    let strand = &mut tracer.forest.strands[index];
    strand.vertices.splice(from.., vertices);
    if strand.decided == 0 || from == 0 {
        strand.width = ink(usual);
    }
}
