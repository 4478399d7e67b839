//! From pixel lines to strands: tied to what they start from, moved onto the ridge, evenly spaced.

use ndarray::Array2;

use super::Root;
use super::centreline::{distance, normal, onto_ridge, resample, sample, smooth, tangents, unit};
use super::edges::Edges;
use super::forest::{Filament, Forest, Joint, Owners, SPACING, Strand, Vertex, disc, vertices_in};
use super::link::{Line, Start};
use super::tip::TipShape;

/// Width of a strand of which nothing is known yet, px.
const FIRST_WIDTH: f64 = 3.5;
/// Length of the old line that guides the new one across the seam, px.
const OVERLAP: f64 = 6.0;
/// How far from a pixel line its ridge is searched, px.
const SEARCH: f64 = 2.5;
/// Length along which positions are averaged, to either side, px.
const ALONG: f64 = 3.0;
/// Length of a first stretch whose direction carries back to the electrode's edge, px.
const AIM: usize = 8;

/// Length over which a strand's heading is taken, px.
const HEADING: f64 = 10.0;
/// Cosine of the largest turn at a crossing: 35°.
const CROSSING_COSINE: f64 = 0.82;
/// How far ahead of its ink a strand is tied to other metal, px.
const MEETING_REACH: f64 = 12.0;
/// Share of the strand's contrast that the way to it must show at every step.
const MEETING_INK: f64 = 0.4;
/// How far beyond a strand's half width a line may start and still go on from its end, px.
const SEAM: f64 = 5.0;
/// How far straight ahead of an end new ink is looked for that makes no line of its own, px.
const LOOK_AHEAD: f64 = 10.0;
/// How far a branch's end must lie from its parent's ink, px.
const BRANCH_CLEAR: f64 = 4.5;
/// Cosine of the largest angle between a strand's heading and what it runs into: 50°.
const MEETING_COSINE: f64 = 0.64;
/// How far ahead other metal is looked for that lies straight ahead, px: strands graze each other.
const STRAIGHT_REACH: f64 = 20.0;
/// Cosine of the largest angle that is straight ahead: 20°.
const STRAIGHT_COSINE: f64 = 0.94;

/// Adds lines to the forest as proposals.
#[derive(Clone, Copy)]
pub(crate) struct Attachment<'a> {
    /// The plane the lines were found in.
    pub plane: &'a Array2<f32>,
    /// The electrodes.
    pub edges: &'a Edges,
}

impl Attachment<'_> {
    /// Adds the lines of one component; gives the indices of the strands that changed.
    pub(crate) fn attach(&self, lines: &[Line], forest: &mut Forest) -> Vec<usize> {
        let mut made: Vec<Option<usize>> = Vec::new();
        for line in lines {
            let index = match line.start {
                Start::Tip(strand) => self.go_on(strand, line, forest),
                Start::Side(joint) => match self.crossing(joint, line, forest) {
                    Some(strand) => self.go_on(strand, line, forest),
                    None => self.branch(joint, line, forest),
                },
                Start::Line(earlier, pixel) => made.get(earlier).copied().flatten().and_then(|strand| {
                    self.branch(nearest_joint(strand, lines[earlier].pixels[pixel], forest)?, line, forest)
                }),
                Start::Plating => self.root(Root::Plating, line, forest),
                Start::Far => self.root(Root::Far, line, forest),
                Start::Inside => self.root(Root::Inside, line, forest),
            };
            made.push(index);
        }
        made.into_iter().flatten().collect()
    }

    /// Goes on from a strand's tip; where another line of this frame has done so already, branches there.
    fn go_on(&self, index: usize, line: &Line, forest: &mut Forest) -> Option<usize> {
        let strand = &forest.strands[index];
        let end = strand.vertices.last()?.p;
        if strand.vertices.len() > strand.decided
            && distance(end, point(*line.pixels.first()?)) > 0.5 * strand.width + SEAM
        {
            return self.branch(nearest_joint(index, *line.pixels.first()?, forest)?, line, forest);
        }
        let from = strand.vertices.len().saturating_sub(vertices_in(OVERLAP));
        let guide: Vec<[f64; 2]> = strand.vertices[from..].iter().map(|v| v.p).collect();
        let new = self.drawn(&guide, &line.pixels, strand.width);
        forest.strands[index].vertices.extend(new);
        Some(index)
    }

    /// The strand that ran into this place from the other side and heads the way the line goes: a crossing, no branch.
    fn crossing(&self, joint: Joint, line: &Line, forest: &Forest) -> Option<usize> {
        let host = &forest.strands[joint.strand];
        let first = point(*line.pixels.first()?);
        let aim = point(line.pixels[AIM.min(line.pixels.len() - 1)]);
        let goes = unit([aim[0] - first[0], aim[1] - first[1]])?;
        let reach = host.width + MEETING_REACH;
        (0..forest.strands.len()).find(|&s| {
            let strand = &forest.strands[s];
            let Some(end) = strand.vertices.last().filter(|_| s != joint.strand && strand.live()) else { return false };
            let straight = |way: [f64; 2]| {
                strand.heading(vertices_in(HEADING)).is_some_and(|h| h[0] * way[0] + h[1] * way[1] > CROSSING_COSINE)
            };
            let over = [first[0] - end.p[0], first[1] - end.p[1]];
            distance(end.p, first) <= reach
                && straight(goes)
                && unit(over).is_some_and(straight)
                && self.inked(end.p, first, MEETING_INK * strand.contrast)
        })
    }

    /// Ties the end of a strand to other metal ahead of it, where the plane shows ink all the way.
    pub(crate) fn meet(&self, index: usize, forest: &mut Forest, owners: &Owners) {
        let strand = &forest.strands[index];
        let (Some(end), Some(heading)) = (strand.vertices.last(), strand.heading(vertices_in(HEADING))) else { return };
        if strand.meets.is_some() || strand.reached_far.is_some() {
            return;
        }
        let (p, n, width) = (end.p, end.n, strand.width);
        let near_own_joint = |j: Joint| {
            strand.parent.is_some_and(|own| own.strand == j.strand && own.vertex.abs_diff(j.vertex) < vertices_in(12.0))
        };
        let met = disc(p, 0.5 * strand.width + STRAIGHT_REACH, owners.strand.dim())
            .filter_map(|pixel| owners.at(pixel))
            .filter(|j| j.strand != index && !near_own_joint(*j))
            .filter_map(|j| forest.strands[j.strand].vertices.get(j.vertex).map(|v| (j, v.p, distance(v.p, p))))
            .filter(|(_, target, gap)| {
                let toward = unit([target[0] - p[0], target[1] - p[1]]).unwrap_or(heading);
                let ahead = toward[0] * heading[0] + toward[1] * heading[1];
                let near = *gap <= 0.5 * strand.width + MEETING_REACH;
                ahead > if near { MEETING_COSINE } else { STRAIGHT_COSINE }
            })
            .min_by(|a, b| a.2.total_cmp(&b.2));
        let Some((joint, target, gap)) = met else {
            return;
        };
        if !self.inked(p, target, MEETING_INK * strand.contrast) {
            return;
        }
        let steps = vertices_in(gap);
        let arrival = end.arrival;
        let bridge = (1..=steps).map(|k| {
            let t = k as f64 / steps as f64;
            let place = [p[0] + t * (target[0] - p[0]), p[1] + t * (target[1] - p[1])];
            Vertex { arrival, ..Vertex::new(place, n, width, self.edges) }
        });
        let strand = &mut forest.strands[index];
        strand.vertices.extend(bridge);
        strand.decided = strand.vertices.len();
        strand.meets = Some(joint);
    }

    /// Looks straight ahead of the end of a strand to which nothing was added: a few px of new ink make no line of their own.
    /// What lies ahead is only proposed; each frame then tells how far it reaches.
    pub(crate) fn look_ahead(&self, index: usize, forest: &mut Forest, owners: &Owners) {
        let strand = &forest.strands[index];
        let (Some(end), Some(heading)) = (strand.vertices.last(), strand.heading(vertices_in(HEADING))) else { return };
        let (p, n, width) = (end.p, normal(heading), strand.width);
        let bare = |v: &Vertex| {
            let pixel = [v.p[1].round().max(0.0) as usize, v.p[0].round().max(0.0) as usize];
            let mine = owners.strand.get(pixel).is_some_and(|&s| s == 0 || s as usize == index + 1);
            mine && v.depth > 0.0 && v.remaining > 0.0
        };
        let ahead: Vec<Vertex> = (1..=vertices_in(LOOK_AHEAD))
            .map(|k| {
                let reach = k as f64 * SPACING;
                Vertex::new([p[0] + reach * heading[0], p[1] + reach * heading[1]], n, width, self.edges)
            })
            .take_while(bare)
            .collect();
        forest.strands[index].vertices.extend(ahead);
    }

    /// Whether every step between two points shows at least `level`.
    fn inked(&self, from: [f64; 2], to: [f64; 2], level: f64) -> bool {
        let steps = distance(from, to).ceil().max(1.0) as usize;
        level > 0.0
            && (0..=steps).all(|k| {
                let t = k as f64 / steps as f64;
                let at = [from[0] + t * (to[0] - from[0]), from[1] + t * (to[1] - from[1])];
                sample(self.plane, at[0], at[1]).is_some_and(|v| f64::from(v) >= level)
            })
    }

    fn branch(&self, joint: Joint, line: &Line, forest: &mut Forest) -> Option<usize> {
        let parent = &forest.strands[joint.strand];
        let at = parent.vertices.get(joint.vertex)?.p;
        let tip = point(*line.pixels.last()?);
        let clear = parent.vertices.iter().all(|v| distance(v.p, tip) > 0.5 * parent.width + BRANCH_CLEAR);
        if !clear {
            return None;
        }
        let (filament, width, contrast) = (parent.filament, parent.width, parent.contrast);
        let mut vertices = self.drawn(&[at], &line.pixels, width);
        vertices.insert(0, Vertex::new(at, vertices.first()?.n, width, self.edges));
        forest.strands.push(strand(filament, Some(joint), vertices, width, contrast));
        Some(forest.strands.len() - 1)
    }

    fn root(&self, root: Root, line: &Line, forest: &mut Forest) -> Option<usize> {
        let pixels: Vec<[f64; 2]> = line.pixels.iter().map(|&p| point(p)).collect();
        let first = *pixels.first()?;
        let aim = pixels[AIM.min(pixels.len() - 1)];
        let foot = match root {
            Root::Inside => first,
            Root::Plating => self.edges.plating.carried_back(first, aim),
            Root::Far => self.edges.far.carried_back(first, aim),
        };
        let vertices = match root {
            Root::Inside => self.drawn(&[], &line.pixels, FIRST_WIDTH),
            _ => {
                let mut vertices = self.drawn(&[foot], &line.pixels, FIRST_WIDTH);
                vertices.insert(0, Vertex::new(foot, vertices.first()?.n, FIRST_WIDTH, self.edges));
                vertices
            }
        };
        if vertices.len() < 3 {
            return None;
        }
        forest.filaments.push(Filament { root, root_px: foot });
        forest.strands.push(strand(forest.filaments.len() - 1, None, vertices, FIRST_WIDTH, 0.0));
        Some(forest.strands.len() - 1)
    }

    /// New vertices along `pixels`, led in by the points of `guide`.
    fn drawn(&self, guide: &[[f64; 2]], pixels: &[[usize; 2]], width: f64) -> Vec<Vertex> {
        let mut points: Vec<[f64; 2]> = guide.to_vec();
        points.extend(pixels.iter().map(|&p| point(p)));
        let seam = guide.last().copied();
        let along = vertices_in(ALONG);
        let rough = smooth(&resample(&points, SPACING), along);
        let ridge = onto_ridge(&onto_ridge(&rough, self.plane, along, SEARCH), self.plane, along, SEARCH);
        let tidy = smooth(&ridge, along);
        let from = seam.map_or(0, |s| nearest_index(&tidy, s, guide.len() + along) + 1);
        let mut line: Vec<[f64; 2]> = seam.into_iter().collect();
        line.extend(tidy.into_iter().skip(from));
        let spaced = resample(&line, SPACING);
        let directions = tangents(&spaced, along);
        let skip = usize::from(seam.is_some());
        spaced.iter().zip(directions).skip(skip).map(|(&p, t)| Vertex::new(p, normal(t), width, self.edges)).collect()
    }
}

fn point(pixel: [usize; 2]) -> [f64; 2] {
    [pixel[1] as f64, pixel[0] as f64]
}

fn nearest_index(points: &[[f64; 2]], to: [f64; 2], within: usize) -> usize {
    let n = points.len().min(within.max(1));
    (0..n).min_by(|&a, &b| distance(points[a], to).total_cmp(&distance(points[b], to))).unwrap_or(0)
}

fn nearest_joint(index: usize, pixel: [usize; 2], forest: &Forest) -> Option<Joint> {
    let vertices = &forest.strands[index].vertices;
    let to = point(pixel);
    let vertex =
        (0..vertices.len()).min_by(|&a, &b| distance(vertices[a].p, to).total_cmp(&distance(vertices[b].p, to)))?;
    Some(Joint { strand: index, vertex })
}

fn strand(filament: usize, parent: Option<Joint>, vertices: Vec<Vertex>, width: f64, contrast: f64) -> Strand {
    Strand {
        filament,
        parent,
        vertices,
        decided: 0,
        meets: None,
        reached_far: None,
        width,
        contrast,
        tip_shape: TipShape::default(),
        withdrawn: false,
        provisional: Vec::new(),
    }
}
