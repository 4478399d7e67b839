//! Rows of the tables, frame by frame, from the courses of the paths and the load in force.

use crate::load::LoadState;
use crate::trace::edges::Edges;
use crate::trace::{EndsIn, Root, Trace};

use super::course::{PathCourse, courses};
use super::geometry::{AxialSum, acute_deg};
use super::uncertainty;
use super::{FilamentRow, FrameRow, GrowthRow, PathRow};

/// Least length of a growth piece, px (contract of the growth table).
pub(crate) const LEAST_PIECE_PX: f64 = 3.0;
/// The length at a filament's end that tells whether it was turned aside, µm.
pub(crate) const TURN_LENGTH_UM: f64 = 100.0;
/// The angle to the plating edge's normal beyond which it was, degrees.
pub(crate) const TURN_DEG: f64 = 45.0;
/// Pieces at a node that differ by less than this are one stretch, degrees.
const ONE_STRETCH_DEG: f64 = 30.0;

/// A frame that was used.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct UsedFrame {
    /// Index over all files.
    pub frame: usize,
    /// Seconds since the first frame.
    pub time_s: f64,
}

/// Everything measuring reads. `load` gives the state in force at a time and a place.
pub struct Scale<'a> {
    /// Micrometres per pixel.
    pub um_per_px: f64,
    /// The electrodes.
    pub edges: &'a Edges,
    /// The frames used, in order.
    pub used: &'a [UsedFrame],
    /// Load in force at a time (s) and place (px).
    pub load: &'a dyn Fn(f64, [f64; 2]) -> LoadState,
    /// Noise of a pixel, fraction of local brightness (for uncertainties).
    pub noise: f64,
}

/// All rows that come from the trace.
#[derive(Debug, Clone, Default)]
pub struct Measured {
    /// One per used frame, in order; only the columns that come from the trace are filled.
    pub frames: Vec<FrameRow>,
    /// The paths table.
    pub paths: Vec<PathRow>,
    /// The growth table.
    pub growth: Vec<GrowthRow>,
    /// The filaments table.
    pub filaments: Vec<FilamentRow>,
    /// All that was traced by the last used frame, cut into short stretches, each against the load then in force.
    pub final_stretches: Vec<Stretch>,
}

/// A short stretch of centre-line with one direction.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Stretch {
    /// Filament number.
    pub filament: u32,
    /// Direction, degrees in [0, 180).
    pub angle_deg: f64,
    /// Arc length, µm.
    pub length_um: f64,
    /// Load axis it is held against.
    pub load_direction_deg: Option<f64>,
    /// Stress along it, MPa, positive in compression.
    pub stress_mpa: Option<f64>,
}

/// Points of a stretch: 4 px.
const STRETCH_POINTS: usize = 8;

fn stretches(courses: &[PathCourse], scale: &Scale) -> Vec<Stretch> {
    let Some(last) = scale.used.last() else { return Vec::new() };
    let mut out = Vec::new();
    for course in courses {
        let reached = course.reached(last.frame);
        for from in (0..reached.saturating_sub(1)).step_by(STRETCH_POINTS) {
            let to = (from + STRETCH_POINTS).min(reached - 1);
            let part = course.direction[to].since(&course.direction[from]);
            let p = course.path.points[from];
            let load = (scale.load)(last.time_s, [p.x, p.y]);
            out.extend(part.mean_deg().map(|angle_deg| Stretch {
                filament: course.path.filament,
                angle_deg,
                length_um: part.length * scale.um_per_px,
                load_direction_deg: load.direction_deg,
                stress_mpa: load.stress_mpa,
            }));
        }
    }
    out
}

/// Measures a trace.
#[must_use]
pub fn measure(trace: &Trace, scale: &Scale) -> Measured {
    let courses = courses(trace, scale.edges);
    let mut out = Measured::default();
    for (k, used) in scale.used.iter().enumerate() {
        let before = k.checked_sub(1).map(|j| scale.used[j]);
        let growth = growth_rows(&courses, scale, *used, before);
        out.frames.push(frame_row(trace, &courses, scale, *used, &growth, out.frames.last()));
        out.paths.extend(path_rows(&courses, scale, *used));
        out.growth.extend(growth);
    }
    out.filaments = trace.filaments.iter().map(|f| filament_row(f.filament, trace, &courses, scale)).collect();
    out.final_stretches = stretches(&courses, scale);
    out
}

fn is_rooted(course: &PathCourse) -> bool {
    course.root != Root::Inside
}

fn frame_row(
    trace: &Trace,
    courses: &[PathCourse],
    scale: &Scale,
    used: UsedFrame,
    growth: &[GrowthRow],
    last: Option<&FrameRow>,
) -> FrameRow {
    let um = scale.um_per_px;
    let mut row = FrameRow { frame: used.frame, time_s: used.time_s, usable: true, ..FrameRow::default() };
    let (mut sum, mut along, mut axis_length, mut area, mut u_length) = (AxialSum::default(), 0.0, 0.0, 0.0, 0.0);
    let mut tips = 0;
    for course in courses.iter().filter(|c| is_rooted(c) && c.begun(used.frame)) {
        let reached = course.reached(used.frame);
        let here = course.sum(reached);
        sum = sum.and(&here);
        area += course.area[reached - 1];
        let middle = &course.path.points[reached / 2];
        if let Some(axis) = (scale.load)(used.time_s, [middle.x, middle.y]).direction_deg {
            along += here.along(axis);
            axis_length += here.length;
        }
        u_length += uncertainty::length_px(here.length, &course.path.points[..reached], scale.noise).powi(2);
        tips += usize::from(course.ends_in(used.frame, courses) == EndsIn::Tip);
    }
    let first = |f: u32| courses.iter().filter(|c| c.path.filament == f).any(|c| c.begun(used.frame));
    let begun = |inside: bool| {
        trace.filaments.iter().filter(|f| (f.root == Root::Inside) == inside && first(f.filament)).count()
    };
    row.filaments = Some(begun(false));
    row.unrooted = Some(begun(true));
    row.tips = Some(tips);
    row.length_um = Some(sum.length * um);
    row.u_length_um = Some(u_length.sqrt() * um);
    row.area_um2 = Some(area * um * um);
    row.alignment = (axis_length > 0.0).then(|| along / axis_length);
    row.growth_alignment = growth_alignment(growth);
    depth_columns(&mut row, trace, courses, scale, used, last);
    row
}

fn depth_columns(
    row: &mut FrameRow,
    trace: &Trace,
    courses: &[PathCourse],
    scale: &Scale,
    used: UsedFrame,
    last: Option<&FrameRow>,
) {
    let um = scale.um_per_px;
    let plated: Vec<&PathCourse> = courses.iter().filter(|c| c.root == Root::Plating && c.begun(used.frame)).collect();
    let deepest = plated
        .iter()
        .map(|c| (*c, c.deepest[c.reached(used.frame) - 1]))
        .max_by(|(a, i), (b, j)| a.depth[*i].total_cmp(&b.depth[*j]));
    let floor = last.and_then(|r| r.depth_um).unwrap_or(0.0);
    let Some((course, at)) = deepest else {
        row.depth_um = Some(floor);
        row.front_depth_um = Some(0.0);
        row.depth_fraction = Some(0.0);
        return;
    };
    let depth = course.depth[at].max(0.0);
    let point = &course.path.points[at];
    row.depth_um = Some((depth * um).max(floor));
    row.u_depth_um = Some(uncertainty::depth_px(&course.path.points[..=at], scale.noise) * um);
    row.deepest_x_px = Some(point.x);
    row.deepest_y_px = Some(point.y);
    let remaining = course.remaining[at].max(0.0);
    let bridged = trace.filaments.iter().any(|f| f.root == Root::Plating && f.bridged.is_some_and(|b| b <= used.frame));
    row.depth_fraction = Some(if bridged { 1.0 } else { depth / (depth + remaining).max(f64::MIN_POSITIVE) });
    row.front_depth_um = Some(front_depth(&plated, used.frame) * um);
}

/// Depth of the deepest point still visible, px.
fn front_depth(plated: &[&PathCourse], frame: usize) -> f64 {
    let visible = plated.iter().flat_map(|c| {
        let reached = c.reached(frame);
        c.path.points[..reached]
            .iter()
            .zip(&c.depth)
            .filter(move |(p, _)| p.retreat.is_none_or(|r| r > frame))
            .map(|(_, d)| *d)
    });
    visible.fold(0.0, f64::max)
}

fn growth_alignment(growth: &[GrowthRow]) -> Option<f64> {
    let (mut sum, mut length) = (0.0, 0.0);
    for piece in growth {
        if let Some(angle) = piece.angle_to_load_deg {
            sum += piece.length_um * libm::cos((2.0 * angle).to_radians());
            length += piece.length_um;
        }
    }
    (length > 0.0).then(|| sum / length)
}

fn path_rows(courses: &[PathCourse], scale: &Scale, used: UsedFrame) -> Vec<PathRow> {
    let um = scale.um_per_px;
    courses
        .iter()
        .filter(|c| c.begun(used.frame))
        .map(|course| {
            let reached = course.reached(used.frame);
            let points = &course.path.points[..reached];
            let (a, b) = (points[0], points[reached - 1]);
            let sum = course.sum(reached);
            let middle = points[reached / 2];
            let axis = (scale.load)(used.time_s, [middle.x, middle.y]).direction_deg;
            let angle = sum.mean_deg();
            PathRow {
                frame: used.frame,
                time_s: used.time_s,
                filament: course.path.filament,
                path: course.path.path,
                length_um: sum.length * um,
                u_length_um: Some(uncertainty::length_px(sum.length, points, scale.noise) * um),
                chord_um: libm::hypot(b.x - a.x, b.y - a.y) * um,
                width_um: (sum.length > 0.0).then(|| course.area[reached - 1] / sum.length * um),
                u_width_um: Some(uncertainty::width_px(points, scale.noise) * um),
                angle_deg: angle,
                u_angle_deg: angle.map(|_| uncertainty::angle_deg(sum.length, points)),
                angle_to_load_deg: angle.zip(axis).map(|(a, l)| acute_deg(a, l)),
                x0_px: a.x,
                y0_px: a.y,
                x1_px: b.x,
                y1_px: b.y,
                ends_in: course.ends_in(used.frame, courses),
            }
        })
        .collect()
}

/// A part of one path: points `from..=to`.
#[derive(Debug, Clone, Copy)]
struct Part {
    course: usize,
    from: usize,
    to: usize,
}

/// The new stretches at a frame, those that run on through a node joined.
fn growth_rows(courses: &[PathCourse], scale: &Scale, used: UsedFrame, before: Option<UsedFrame>) -> Vec<GrowthRow> {
    let reached_before = |c: &PathCourse| before.map_or(0, |b| c.reached(b.frame));
    let mut joined = vec![false; courses.len()];
    let mut rows = Vec::new();
    for index in 0..courses.len() {
        if joined[index] {
            continue;
        }
        let mut chain = Vec::new();
        let mut next = Some(index);
        while let Some(at) = next {
            let course = &courses[at];
            let (from, to) = (reached_before(course).saturating_sub(1), course.reached(used.frame));
            next = None;
            if to < from + 2 {
                break;
            }
            joined[at] = true;
            chain.push(Part { course: at, from, to: to - 1 });
            if to == course.path.points.len() {
                next = straight_child(courses, at, used.frame, &joined);
            }
        }
        rows.extend(growth_row(courses, scale, used, before, &chain));
    }
    rows
}

/// The child that goes on most nearly straight from a path's end, if one has begun.
fn straight_child(courses: &[PathCourse], at: usize, frame: usize, joined: &[bool]) -> Option<usize> {
    let end = |c: &PathCourse| {
        let n = c.direction.len();
        c.direction[n - 1].since(&c.direction[n - 1 - (n - 1).min(12)]).mean_deg()
    };
    let start = |c: &PathCourse| c.direction[(c.direction.len() - 1).min(12)].mean_deg();
    let heading = end(&courses[at])?;
    courses[at]
        .children
        .iter()
        .copied()
        .filter(|&c| !joined[c] && courses[c].begun(frame))
        .filter_map(|c| start(&courses[c]).map(|s| (acute_deg(s, heading), c)))
        .filter(|&(turn, _)| turn <= ONE_STRETCH_DEG)
        .min_by(|a, b| a.0.total_cmp(&b.0))
        .map(|(_, c)| c)
}

fn growth_row(
    courses: &[PathCourse],
    scale: &Scale,
    used: UsedFrame,
    before: Option<UsedFrame>,
    chain: &[Part],
) -> Option<GrowthRow> {
    let mut sum = AxialSum::default();
    for s in chain {
        let c = &courses[s.course];
        sum = sum.and(&c.direction[s.to].since(&c.direction[s.from]));
    }
    if sum.length < LEAST_PIECE_PX {
        return None;
    }
    let angle = sum.mean_deg()?;
    let (filament, middle) = middle_of(courses, chain, 0.5 * sum.length)?;
    let load_time_s = before.map_or(used.time_s, |b| 0.5 * (b.time_s + used.time_s));
    let load = (scale.load)(load_time_s, middle);
    let first = &courses[chain.first()?.course].path.points;
    Some(GrowthRow {
        frame: used.frame,
        time_s: used.time_s,
        load_time_s,
        filament,
        x_px: middle[0],
        y_px: middle[1],
        length_um: sum.length * scale.um_per_px,
        angle_deg: angle,
        u_angle_deg: Some(uncertainty::angle_deg(sum.length, first)),
        load_direction_deg: load.direction_deg,
        angle_to_load_deg: load.direction_deg.map(|l| acute_deg(angle, l)),
        stress_mpa: load.stress_mpa,
    })
}

/// The point halfway along a chain of stretches.
fn middle_of(courses: &[PathCourse], chain: &[Part], half: f64) -> Option<(u32, [f64; 2])> {
    let mut left = half;
    for s in chain {
        let c = &courses[s.course];
        let base = c.direction[s.from].length;
        let length = c.direction[s.to].length - base;
        if left <= length {
            let at = c.direction.partition_point(|d| d.length < base + left).clamp(s.from, s.to);
            let p = c.path.points[at];
            return Some((c.path.filament, [p.x, p.y]));
        }
        left -= length;
    }
    let s = chain.last()?;
    let p = courses[s.course].path.points[s.to];
    Some((courses[s.course].path.filament, [p.x, p.y]))
}

fn filament_row(number: u32, trace: &Trace, courses: &[PathCourse], scale: &Scale) -> FilamentRow {
    let um = scale.um_per_px;
    let own: Vec<&PathCourse> = courses.iter().filter(|c| c.path.filament == number).collect();
    let (root, root_px, bridged) = trace
        .filaments
        .iter()
        .find(|f| f.filament == number)
        .map_or((Root::Inside, [0.0, 0.0], false), |f| (f.root, f.root_px, f.bridged.is_some()));
    let last = scale.used.last().map_or(0, |u| u.frame);
    let first = own.iter().filter_map(|c| c.path.points.get(1)).map(|p| p.arrival).min();
    let time = first.and_then(|f| scale.used.iter().find(|u| u.frame == f)).map_or(0.0, |u| u.time_s);
    let depth = own.iter().filter_map(|c| c.deepest.last().map(|&i| c.depth[i])).fold(0.0, f64::max);
    FilamentRow {
        filament: number,
        first_time_s: time,
        root,
        root_x_px: root_px[0],
        root_y_px: root_px[1],
        final_depth_um: (root == Root::Plating).then_some(depth * um),
        final_length_um: own.iter().map(|c| c.sum(c.direction.len()).length).sum::<f64>() * um,
        tips: own.iter().filter(|c| c.ends_in(last, courses) == EndsIn::Tip).count(),
        bridged,
        turned: turned(&own, courses, scale, root_px),
    }
}

/// Whether the last 100 µm to the filament's deepest end run more than 45° off the plating edge's normal at its root.
fn turned(own: &[&PathCourse], courses: &[PathCourse], scale: &Scale, root_px: [f64; 2]) -> Option<bool> {
    let normal = {
        let d = scale.edges.plating.nearest(root_px).direction;
        super::geometry::axial_deg(-d[1], d[0])
    };
    let ends = own.iter().filter(|c| c.children.is_empty());
    let mut course = *ends.max_by(|a, b| longest_to(a, courses).total_cmp(&longest_to(b, courses)))?;
    let mut left = TURN_LENGTH_UM / scale.um_per_px;
    let mut sum = AxialSum::default();
    loop {
        let n = course.direction.len();
        let total = course.direction[n - 1].length;
        let from = course.direction.partition_point(|d| d.length < total - left).min(n - 1);
        let part = course.direction[n - 1].since(&course.direction[from]);
        sum = sum.and(&part);
        left -= part.length;
        if left <= 0.5 {
            return sum.mean_deg().map(|a| acute_deg(a, normal) > TURN_DEG);
        }
        course = courses.iter().find(|c| Some(c.path.path) == course.path.parent)?;
    }
}

/// Length from the root to a path's end, px.
fn longest_to(course: &PathCourse, courses: &[PathCourse]) -> f64 {
    let own = course.sum(course.direction.len()).length;
    match courses.iter().find(|c| Some(c.path.path) == course.path.parent) {
        Some(parent) => own + longest_to(parent, courses),
        None => own,
    }
}
