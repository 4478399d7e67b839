//! From new evidence to new lines: cheapest paths from what is traced to the ends of each new component.
//!
//! Method: the cost of a pixel falls with its line evidence, so that the cheapest path (Dijkstra 1959,
//! Numer. Math. 1, 269–271; minimal paths: Cohen & Kimmel 1997, Int. J. Comput. Vis. 24, 57–78) runs along
//! the crest and crosses bare ceramic only where it must. Where it crosses too much, there is no path.
//! Thinning tells which ends a component has; paths tell how they hang together.

use std::cmp::Ordering;
use std::collections::BinaryHeap;

use ndarray::Array2;

use super::edges::Edges;
use super::forest::{Forest, Joint, Owners, vertices_in};

/// Room about a component in which it may be tied to older metal, px.
const ROOM: usize = 18;
/// A line that starts within this depth of an edge is rooted on it (the electrode's blur hides its start), px.
pub(crate) const ROOT_REACH: f64 = 12.0;
/// Cost of starting a branch on the side of a strand rather than going on from its tip.
const SIDE_COST: f32 = 6.0;
/// Cost of starting a filament at an edge.
const EDGE_COST: f32 = 8.0;
/// Cost of each px between an edge and the first pixel of a line rooted on it: dear beside ink, so that a root follows its ink as
/// far as it is seen, and cheaper than bare ceramic.
const EDGE_WAY: f32 = 12.0;
/// Cost of a pixel of bare ceramic; with evidence z it is 1 / (1/BARE_COST + (z/(z+6))²).
const BARE_COST: f32 = 33.0;
/// Bare pixels that a path may cross from the side of a strand.
const SIDE_GAP: usize = 4;
/// Bare pixels that a path may cross going on from a tip.
const TIP_GAP: usize = 9;

/// Where a new line starts.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) enum Start {
    /// It goes on from a strand's tip.
    Tip(usize),
    /// It leaves the side of a strand.
    Side(Joint),
    /// It starts on the plating edge.
    Plating,
    /// It starts on the far edge.
    Far,
    /// It starts inside.
    Inside,
    /// It leaves line number `.0` of the same component at that line's pixel `.1`.
    Line(usize, usize),
}

/// A new line, pixels [row, col] from its start on.
#[derive(Debug, Clone)]
pub(crate) struct Line {
    /// Where it starts.
    pub start: Start,
    /// At least one pixel.
    pub pixels: Vec<[usize; 2]>,
}

#[derive(Clone, Copy, PartialEq)]
struct Item {
    cost: f32,
    at: usize,
}

impl Eq for Item {}
impl Ord for Item {
    fn cmp(&self, other: &Self) -> Ordering {
        other.cost.total_cmp(&self.cost).then(other.at.cmp(&self.at))
    }
}
impl PartialOrd for Item {
    fn partial_cmp(&self, other: &Self) -> Option<Ordering> {
        Some(self.cmp(other))
    }
}

/// What the linking reads.
#[derive(Clone, Copy)]
pub(crate) struct Ground<'a> {
    /// Line evidence.
    pub z: &'a Array2<f32>,
    /// Evidence above which a pixel is no longer bare.
    pub low: f32,
    /// Where a path may run.
    pub inside: &'a Array2<bool>,
    /// The electrodes.
    pub edges: &'a Edges,
}

/// A component to be linked: its pixels and the ends of its skeleton.
#[derive(Debug, Clone)]
pub(crate) struct Component {
    /// Pixels [row, col].
    pub pixels: Vec<[usize; 2]>,
    /// Ends of the skeleton, or one pixel of a closed loop.
    pub ends: Vec<[usize; 2]>,
}

/// The lines of a component; none where nothing ties it to older metal or an edge and `free` is false.
#[must_use]
pub(crate) fn lines(component: &Component, ground: Ground, forest: &Forest, owners: &Owners, free: bool) -> Vec<Line> {
    let Some(field) = Field::new(component, ground, forest, owners, free) else {
        return Vec::new();
    };
    field.lines(component, forest)
}

struct Field<'a> {
    ground: Ground<'a>,
    origin: [usize; 2],
    width: usize,
    cost: Vec<f32>,
    before: Vec<usize>,
    starts: Vec<Option<Start>>,
}

const NONE: usize = usize::MAX;

impl<'a> Field<'a> {
    fn new(component: &Component, ground: Ground<'a>, forest: &Forest, owners: &Owners, free: bool) -> Option<Self> {
        let shape = ground.z.dim();
        let low = |axis: usize| component.pixels.iter().map(|p| p[axis]).min().map(|v| v.saturating_sub(ROOM));
        let high =
            |axis: usize, n: usize| component.pixels.iter().map(|p| p[axis]).max().map(|v| (v + ROOM + 1).min(n));
        let (r0, c0) = (low(0)?, low(1)?);
        let (r1, c1) = (high(0, shape.0)?, high(1, shape.1)?);
        let (height, width) = (r1 - r0, c1 - c0);
        let mut field = Self {
            ground,
            origin: [r0, c0],
            width,
            cost: vec![f32::INFINITY; height * width],
            before: vec![NONE; height * width],
            starts: vec![None; height * width],
        };
        field.seed(component, forest, owners);
        if free && field.starts.iter().all(Option::is_none) {
            field.seed_free(component);
        }
        field.spread(height);
        Some(field)
    }

    fn index(&self, pixel: [usize; 2]) -> usize {
        (pixel[0] - self.origin[0]) * self.width + pixel[1] - self.origin[1]
    }

    fn pixel(&self, at: usize) -> [usize; 2] {
        [at / self.width + self.origin[0], at % self.width + self.origin[1]]
    }

    fn offer(&mut self, at: usize, start: Start, cost: f32) {
        if cost < self.cost[at] {
            self.cost[at] = cost;
            self.starts[at] = Some(start);
        }
    }

    fn seed(&mut self, component: &Component, forest: &Forest, owners: &Owners) {
        for at in 0..self.cost.len() {
            if let Some(joint) = owners.at(self.pixel(at)) {
                let strand = &forest.strands[joint.strand];
                let near_end = joint.vertex + vertices_in(0.5 * strand.width + 3.0) >= strand.vertices.len();
                let (start, cost) = if near_end && strand.live() {
                    (Start::Tip(joint.strand), 0.0)
                } else {
                    (Start::Side(joint), SIDE_COST)
                };
                self.offer(at, start, cost);
            }
        }
        for &pixel in &component.pixels {
            let p = [pixel[1] as f64, pixel[0] as f64];
            let (depth, remaining) = (self.ground.edges.depth(p), self.ground.edges.remaining(p));
            let at = self.index(pixel);
            if depth <= ROOT_REACH {
                self.offer(at, Start::Plating, EDGE_COST + EDGE_WAY * depth.max(0.0) as f32);
            } else if remaining <= ROOT_REACH {
                self.offer(at, Start::Far, EDGE_COST + 20.0 + EDGE_WAY * remaining.max(0.0) as f32);
            }
        }
    }

    /// A component that nothing holds starts at its end nearest to the plating edge.
    fn seed_free(&mut self, component: &Component) {
        let depth = |p: &[usize; 2]| self.ground.edges.depth([p[1] as f64, p[0] as f64]);
        if let Some(&end) = component.ends.iter().min_by(|a, b| depth(a).total_cmp(&depth(b))) {
            let at = self.index(end);
            self.offer(at, Start::Inside, 0.0);
        }
    }

    fn price(&self, pixel: [usize; 2]) -> f32 {
        let z = self.ground.z[pixel].max(0.0);
        let share = z / (z + 6.0);
        1.0 / (1.0 / BARE_COST + share * share)
    }

    fn spread(&mut self, height: usize) {
        let mut heap: BinaryHeap<Item> = (0..self.cost.len())
            .filter(|&at| self.starts[at].is_some())
            .map(|at| Item { cost: self.cost[at], at })
            .collect();
        while let Some(Item { cost, at }) = heap.pop() {
            if cost > self.cost[at] {
                continue;
            }
            for (near, step) in neighbours(at, height, self.width) {
                let pixel = self.pixel(near);
                if !self.ground.inside[pixel] {
                    continue;
                }
                let next = cost + step * self.price(pixel);
                if next < self.cost[near] {
                    self.cost[near] = next;
                    self.before[near] = at;
                    self.starts[near] = None;
                    heap.push(Item { cost: next, at: near });
                }
            }
        }
    }

    /// Lines to all ends, the costliest (farthest) first; later ones leave earlier ones where they part.
    fn lines(&self, component: &Component, forest: &Forest) -> Vec<Line> {
        let mut ends: Vec<usize> =
            component.ends.iter().map(|&p| self.index(p)).filter(|&at| self.cost[at].is_finite()).collect();
        ends.sort_by(|&a, &b| self.cost[b].total_cmp(&self.cost[a]).then(a.cmp(&b)));
        let mut taken: Vec<Option<(usize, usize)>> = vec![None; self.cost.len()];
        let mut lines: Vec<Line> = Vec::new();
        for end in ends {
            if let Some(line) = self.line_to(end, &taken) {
                if !self.supported(&line, forest) {
                    continue;
                }
                for (k, &pixel) in line.pixels.iter().enumerate() {
                    taken[self.index(pixel)] = Some((lines.len(), k));
                }
                lines.push(line);
            }
        }
        lines
    }

    fn line_to(&self, end: usize, taken: &[Option<(usize, usize)>]) -> Option<Line> {
        let mut pixels = Vec::new();
        let mut at = end;
        loop {
            if let Some((line, k)) = taken[at] {
                pixels.reverse();
                return (!pixels.is_empty()).then_some(Line { start: Start::Line(line, k), pixels });
            }
            if let Some(start) = self.starts[at] {
                if matches!(start, Start::Plating | Start::Far | Start::Inside) {
                    pixels.push(self.pixel(at));
                }
                pixels.reverse();
                return (!pixels.is_empty()).then_some(Line { start, pixels });
            }
            pixels.push(self.pixel(at));
            at = self.before[at];
            if at == NONE {
                return None;
            }
        }
    }

    /// Whether the evidence along the line bears it: the bare pixels it crosses are few for its start.
    fn supported(&self, line: &Line, _forest: &Forest) -> bool {
        let bare = line.pixels.iter().filter(|&&p| self.ground.z[p] < self.ground.low).count();
        let allowed = match line.start {
            Start::Tip(_) => TIP_GAP,
            _ => SIDE_GAP,
        };
        bare <= allowed
    }
}

/// The eight neighbours of a cell in a `height` × `width` box with the length of the step.
fn neighbours(at: usize, height: usize, width: usize) -> impl Iterator<Item = (usize, f32)> {
    let (row, col) = ((at / width) as isize, (at % width) as isize);
    (-1isize..=1).flat_map(move |dr| (-1isize..=1).map(move |dc| (dr, dc))).filter_map(move |(dr, dc)| {
        let (r, c) = (row + dr, col + dc);
        let ok = (dr, dc) != (0, 0) && r >= 0 && c >= 0 && (r as usize) < height && (c as usize) < width;
        let step = if dr != 0 && dc != 0 { std::f32::consts::SQRT_2 } else { 1.0 };
        ok.then(|| (r as usize * width + c as usize, step))
    })
}
