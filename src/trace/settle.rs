//! Decides what has arrived, keeps watch over what is decided, and withdraws what later frames deny.

use super::Root;
use super::centreline::{Profile, pooled, sample};
use super::dating::{Contrast, contrast, core_of, free_sides, positions, strength};
use super::forest::{SPACING, Strand, Vertex, vertices_in};
use super::growth::Tracer;

/// Evidence that the first stretch of a new filament must show in each of three frames, sd.
const NEW_EACH: f64 = 4.5;
/// And in all three together.
const NEW_ALL: f64 = 11.0;
/// Frames, from the deciding one on, that bear witness to a new line; at the end of a run its last ones.
const WITNESSES: usize = 3;
/// The same for a branch.
const BRANCH_EACH: f64 = 2.0;
/// And in all three together.
const BRANCH_ALL: f64 = 6.0;
/// Evidence that a filament elsewhere than on the plating edge must show in each frame and in all together, sd, and its least length, px.
const INSIDE_EACH: f64 = 6.0;
/// In all together.
const INSIDE_ALL: f64 = 18.0;
/// Least length, px.
const INSIDE_LENGTH: f64 = 20.0;
/// And in widths: specks are round.
const INSIDE_WIDTHS: f64 = 4.0;
/// Frames for which it must have stood.
const INSIDE_FRAMES: usize = 6;
/// Distance from the edge that a filament on it must have reached before it is believed, px: the rough rim of the
/// electrode stays below it.
const ROOT_DEPTH: f64 = 9.0;
/// Length of a filament on the plating edge before it is believed, px, and the frames for which it must have stood.
const NEW_LENGTH: f64 = 10.0;
/// The frames.
const NEW_FRAMES: usize = 4;
/// Share of the usual contrast below which a new line is a shadow of old ones.
const LEAST_CONTRAST: f64 = 0.3;
/// Least first stretch, px.
const LEAST_FIRST: f64 = 4.0;
/// Length over which neighbouring vertices share their noise, px.
const SHARED_NOISE: f64 = 1.6;
/// Length at the tip over which width and contrast are read, px.
const TIP_READ: f64 = 24.0;
/// Half width of the ink that keeps watch over what is decided, px.
const MIDDLE: f64 = 1.25;
/// Greatest width that a profile can show, px.
const WIDEST: f64 = 14.0;
/// Length over which one width is read, px.
const WIDTH_BLOCK: f64 = 6.0;
/// Frames that a profile remembers.
const PROFILE_MEMORY: f32 = 24.0;
/// Share of the contrast below which a vertex is no longer seen.
const GONE: f64 = 0.3;
/// Least length that can retreat or be withdrawn, px.
const GONE_RUN: f64 = 4.0;
/// Frames within which a stretch that fades was never there; later it has retreated.
const YOUNG: usize = 6;
/// Ink this close to the far edge touches it: the edge's own blur, px.
pub(super) const EDGE_BLUR: f64 = 3.6;
/// Contrasts of vertices this close to an edge are not read: the electrode's blur, px.
pub(super) const EDGE_SHADE: f64 = 3.0;
/// How far beyond the shade a first stretch must show, px.
const SHADE_MARGIN: f64 = 2.0;
/// Weight of the newest frame in the running contrast.
const NEWEST: f32 = 0.4;

/// Dates the proposals of all strands, parents first, and decides what has `confirm` later frames as witnesses.
pub(super) fn date(tracer: &mut Tracer, confirm: usize) {
    for index in 0..tracer.forest.strands.len() {
        if tracer.forest.strands[index].vertices.len() > tracer.forest.strands[index].decided {
            date_strand(tracer, index, confirm);
        }
    }
}

fn date_strand(tracer: &mut Tracer, index: usize, confirm: usize) {
    let Some(earliest) = earliest_arrival(tracer, index) else {
        return;
    };
    let now = tracer.frames.len() - 1;
    let held = tracer.recent.frames().len();
    let first = (now + 1 - held).max(earliest);
    let strand = &tracer.forest.strands[index];
    let rows = contrast_rows(tracer, index, first);
    let Some(height) = height_of(strand, &rows) else {
        return;
    };
    let reached = clear_of_shade(&tracer.forest.strands[index], positions(&rows, height));
    let decided_frame = now.checked_sub(confirm).filter(|&k| k >= first);
    let known = decided_frame.map_or(0, |k| k + 1 - first);
    if known == 0 || !confirmed(tracer, index, &rows, reached[known - 1], known, height) {
        return;
    }
    let start = strand.decided;
    let strand = &mut tracer.forest.strands[index];
    for i in 0..reached[known - 1] {
        let arrival = reached[..known].iter().position(|&s| s > i).map(|j| first + j);
        strand.vertices[start + i].arrival = arrival;
    }
    strand.decided = start + reached[known - 1];
    strand.provisional = reached[known..].iter().map(|&s| start + s).collect();
    let end = strand.decided.checked_sub(1).map(|i| &strand.vertices[i]);
    let touching = end.filter(|v| v.remaining <= EDGE_BLUR).and_then(|v| v.arrival);
    strand.reached_far = strand.reached_far.or(touching);
    if reached[known - 1] > 0 {
        picture_tip(tracer, index, first + known - 1);
    }
}

/// Positions of a first stretch that lie in the electrode's shade, where nothing is read, are none: it is dated from the frame that
/// shows it beyond.
fn clear_of_shade(strand: &Strand, mut reached: Vec<usize>) -> Vec<usize> {
    if strand.decided == 0 && strand.parent.is_none() {
        let shaded = |v: &Vertex| v.depth.min(v.remaining) < EDGE_SHADE + SHADE_MARGIN;
        let hidden = strand.vertices.iter().take_while(|v| shaded(v)).count();
        reached.iter_mut().filter(|r| **r <= hidden).for_each(|r| *r = 0);
    }
    reached
}

/// Adds the tip of a strand as the frame of the given ordinal shows it to the run's mean tip.
fn picture_tip(tracer: &mut Tracer, index: usize, ordinal: usize) {
    let strand = &tracer.forest.strands[index];
    let oldest = tracer.frames.len() - tracer.recent.frames().len();
    let settled = strand.decided as f64 * SPACING > 3.0 * strand.width && strand.contrast > 0.0;
    let free = strand.meets.is_none() && strand.reached_far.is_none();
    let Some(frame) = ordinal.checked_sub(oldest).and_then(|k| tracer.recent.frames().get(k)) else { return };
    if !(settled && free) {
        return;
    }
    let end = strand.decided - 1;
    let line: Vec<_> = (0..=end.min(vertices_in(1.2 * strand.width)))
        .map(|back| (strand.vertices[end - back].p, strand.vertices[end - back].n))
        .collect();
    let (width, contrast) = (strand.width, strand.contrast);
    tracer.tip_shape.add(&frame.residual, &line, SPACING, width, contrast);
    tracer.forest.strands[index].tip_shape.add(&frame.residual, &line, SPACING, width, contrast);
}

/// The ordinal before which nothing of this strand's proposal can have arrived; `None` while its parent
/// has not come that far.
pub(super) fn earliest_arrival(tracer: &Tracer, index: usize) -> Option<usize> {
    let strand = &tracer.forest.strands[index];
    let floor = tracer.settings.bare;
    if let Some(last) = strand.decided.checked_sub(1) {
        return strand.vertices[last].arrival.map(|a| a.max(floor));
    }
    match strand.parent {
        None => Some(floor),
        Some(joint) => tracer.forest.strands[joint.strand].vertices.get(joint.vertex)?.arrival.map(|a| a.max(floor)),
    }
}

/// Contrast of each proposed vertex in each frame of the window from ordinal `first` on.
pub(super) fn contrast_rows(tracer: &Tracer, index: usize, first: usize) -> Vec<Vec<Option<Contrast>>> {
    let strand = &tracer.forest.strands[index];
    let now = tracer.frames.len() - 1;
    let oldest = now + 1 - tracer.recent.frames().len();
    let core = core_of(strand.width, clarity(tracer, strand));
    let new = &strand.vertices[strand.decided..];
    let sides: Vec<[bool; 2]> = new.iter().map(|v| free_sides(&tracer.owners, index, v.p, v.n, strand.width)).collect();
    tracer
        .recent
        .frames()
        .iter()
        .enumerate()
        .filter(|(k, _)| oldest + k >= first)
        .map(|(_, frame)| {
            new.iter()
                .zip(&sides)
                .map(|(v, &free)| {
                    let shaded = tracer.edges.depth(v.p) < EDGE_SHADE || tracer.edges.remaining(v.p) < EDGE_SHADE;
                    if shaded { None } else { contrast(frame, &tracer.noise, v.p, v.n, strand.width, core, free) }
                })
                .collect()
        })
        .collect()
}

/// Contrast of a strand over the noise of a pixel at its end; nothing is clear of which nothing is known.
pub(super) fn clarity(tracer: &Tracer, strand: &Strand) -> f64 {
    let place = strand.vertices.get(strand.decided).or(strand.vertices.last());
    let noise = place.and_then(|v| sample(&tracer.noise, v.p[0], v.p[1]));
    noise.filter(|n| *n > 0.0).map_or(0.0, |n| strand.contrast / f64::from(n))
}

/// The strand's contrast, or for one not yet known that of the upper part of its proposal in the latest frames.
fn height_of(strand: &Strand, rows: &[Vec<Option<Contrast>>]) -> Option<f64> {
    if strand.decided >= vertices_in(LEAST_FIRST) && strand.contrast > 0.0 {
        return Some(strand.contrast);
    }
    let last = &rows[rows.len().saturating_sub(3)..];
    let n = last.first()?.len();
    let mut means: Vec<f64> = (0..n)
        .filter_map(|i| {
            let mut known: Vec<f64> = last.iter().filter_map(|r| r[i].map(|c| c.value)).collect();
            known.sort_by(f64::total_cmp);
            known.get(known.len() / 2).copied()
        })
        .collect();
    means.sort_by(f64::total_cmp);
    let height = *means.get(means.len() * 2 / 3)?;
    (height > 0.0).then_some(height)
}

/// Whether the first stretch of a strand is sure enough to be decided; one that goes on always is.
fn confirmed(
    tracer: &Tracer,
    index: usize,
    rows: &[Vec<Option<Contrast>>],
    reached: usize,
    known: usize,
    height: f64,
) -> bool {
    let strand = &tracer.forest.strands[index];
    if strand.decided > 0 {
        return true;
    }
    let demand = demand_on(tracer, strand);
    let deepest = strand.vertices[..reached].iter().map(|v| v.depth.min(v.remaining)).fold(0.0, f64::max);
    if (reached as f64) * SPACING < demand.length || deepest < demand.depth || height < demand.contrast {
        return false;
    }
    // Later frames are witnesses too; a line that nothing holds must have stood for longer.
    let from = (known - 1).min(rows.len().saturating_sub(WITNESSES));
    let from = from.min(rows.len().saturating_sub(demand.frames));
    if rows.len() < demand.frames.min(tracer.frames.len()) {
        return false;
    }
    let witnesses: Vec<f64> = rows[from..].iter().map(|r| strength(&r[..reached], SHARED_NOISE / SPACING)).collect();
    let together = witnesses.iter().sum::<f64>() / (witnesses.len() as f64).sqrt();
    witnesses.iter().all(|&w| w >= demand.each) && together >= demand.all
}

/// What the first stretch of a new line must show.
struct Demand {
    /// Length, px.
    length: f64,
    /// Distance that it gets from the edges, px.
    depth: f64,
    /// Contrast.
    contrast: f64,
    /// Frames in which it must be seen, as far as the run has them.
    frames: usize,
    /// Evidence in each witness frame, sd.
    each: f64,
    /// Evidence in all together, sd.
    all: f64,
}

/// More is asked of a line that nothing holds than of one on an edge, and least of a branch.
fn demand_on(tracer: &Tracer, strand: &Strand) -> Demand {
    let usual = match strand.parent {
        Some(joint) => tracer.forest.strands[joint.strand].contrast,
        None => usual_contrast(&tracer.forest.strands),
    };
    let contrast = LEAST_CONTRAST * usual;
    let elsewhere = tracer.forest.filaments[strand.filament].root != Root::Plating;
    match strand.parent {
        Some(_) => Demand { length: LEAST_FIRST, depth: 0.0, contrast, frames: 1, each: BRANCH_EACH, all: BRANCH_ALL },
        None if elsewhere => Demand {
            length: INSIDE_LENGTH.max(INSIDE_WIDTHS * strand.width),
            depth: 0.0,
            contrast,
            frames: INSIDE_FRAMES,
            each: INSIDE_EACH,
            all: INSIDE_ALL,
        },
        None => {
            Demand { length: NEW_LENGTH, depth: ROOT_DEPTH, contrast, frames: NEW_FRAMES, each: NEW_EACH, all: NEW_ALL }
        }
    }
}

/// Median contrast of the established strands, 0 while there is none.
fn usual_contrast(strands: &[Strand]) -> f64 {
    let established = |s: &&Strand| !s.withdrawn && s.decided >= vertices_in(TIP_READ);
    let mut values: Vec<f64> = strands.iter().filter(established).map(|s| s.contrast).collect();
    values.sort_by(f64::total_cmp);
    values.get(values.len() / 2).copied().unwrap_or(0.0)
}

/// Adds the newest frame to the profiles of all decided vertices and reads width and contrast near the tips.
pub(super) fn observe(tracer: &mut Tracer) {
    let Some(frame) = tracer.recent.frames().back() else {
        return;
    };
    let noise = &tracer.noise;
    for (index, strand) in tracer.forest.strands.iter_mut().enumerate() {
        let decided = strand.decided;
        for vertex in &mut strand.vertices[..decided] {
            let free = free_sides(&tracer.owners, index, vertex.p, vertex.n, vertex.width);
            vertex.profile.add(&frame.residual, vertex.p, vertex.n, PROFILE_MEMORY);
            if let Some(c) = contrast(frame, noise, vertex.p, vertex.n, vertex.width, MIDDLE, free) {
                let value = c.value as f32;
                vertex.recent =
                    if vertex.recent.is_nan() { value } else { vertex.recent + NEWEST * (value - vertex.recent) };
            }
        }
        read_tip(strand);
        read_widths(strand);
    }
}

/// Width of each stretch of decided vertices from its pooled profile; one too short to say takes the strand's.
fn read_widths(strand: &mut Strand) {
    let (decided, usual) = (strand.decided, strand.width);
    for block in strand.vertices[..decided].chunks_mut(vertices_in(WIDTH_BLOCK)) {
        let mut sum = Profile::default();
        block.iter().for_each(|v| sum.merge(&v.profile));
        let width = sum.section(1.5).map_or(usual, |s| s.width.clamp(1.5, WIDEST));
        block.iter_mut().for_each(|v| v.width = width);
    }
}

/// Gives the vertices decided at the very end the frames of the window that show them.
pub(super) fn observe_new(tracer: &mut Tracer) {
    let oldest = tracer.frames.len() - tracer.recent.frames().len();
    for strand in &mut tracer.forest.strands {
        let decided = strand.decided;
        for vertex in strand.vertices[..decided].iter_mut().filter(|v| v.profile.is_empty()) {
            for (k, frame) in tracer.recent.frames().iter().enumerate() {
                if vertex.arrival.is_some_and(|a| oldest + k >= a) {
                    vertex.profile.add(&frame.residual, vertex.p, vertex.n, PROFILE_MEMORY);
                }
            }
        }
        read_tip(strand);
    }
}

/// Width and contrast of a strand from the pooled profile of its last decided vertices.
fn read_tip(strand: &mut Strand) {
    if strand.decided < vertices_in(LEAST_FIRST) {
        return;
    }
    let from = strand.decided.saturating_sub(vertices_in(TIP_READ));
    let profiles: Vec<_> = strand.vertices[from..strand.decided].iter().map(|v| v.profile.clone()).collect();
    if let Some(section) = pooled(&profiles, profiles.len() / 2, profiles.len()).section(1.5) {
        strand.width = section.width.clamp(1.5, WIDEST);
    }
    let mut values: Vec<f32> =
        strand.vertices[from..strand.decided].iter().map(|v| v.recent).filter(|v| !v.is_nan()).collect();
    if values.is_empty() {
        return;
    }
    values.sort_by(f32::total_cmp);
    let middle = f64::from(values[values.len() / 2]);
    // A strand that fades keeps the contrast it was decided with: the track stays.
    if middle > 0.5 * strand.contrast {
        strand.contrast = middle;
    }
}

/// Marks stretches at a free end that are no longer seen: withdrawn when young, else retreated.
pub(super) fn withdraw(tracer: &mut Tracer) {
    let now = tracer.frames.len() - 1;
    let has_children: Vec<usize> = furthest_joints(&tracer.forest.strands);
    for (index, strand) in tracer.forest.strands.iter_mut().enumerate() {
        if strand.withdrawn || strand.decided == 0 {
            continue;
        }
        let seen = |v: &Vertex| v.recent.is_nan() || f64::from(v.recent) > GONE * strand.contrast;
        let visible = strand.vertices[..strand.decided].iter().rposition(seen).map_or(0, |i| i + 1);
        let run = strand.decided - visible;
        if run < vertices_in(GONE_RUN).min(strand.decided) {
            restore(strand);
            continue;
        }
        let born = strand.vertices[visible].arrival.unwrap_or(now);
        let keep = visible.max(has_children[index]);
        if now - born.min(now) <= YOUNG {
            strand.vertices.truncate(keep);
            strand.decided = strand.decided.min(keep);
            strand.provisional.clear();
            strand.meets = None;
            tracer.withdrawn += 1;
            if keep <= 1 {
                strand.withdrawn = true;
                strand.vertices.clear();
                strand.decided = 0;
            }
        } else {
            for vertex in strand.vertices[visible..].iter_mut().filter(|v| v.retreat.is_none() && v.arrival.is_some()) {
                vertex.retreat = Some(now);
            }
        }
    }
}

/// Metal that is seen again has not retreated.
fn restore(strand: &mut Strand) {
    strand.vertices.iter_mut().for_each(|v| v.retreat = None);
}

/// For each strand the number of vertices that its children need.
fn furthest_joints(strands: &[Strand]) -> Vec<usize> {
    let mut need = vec![0; strands.len()];
    for strand in strands.iter().filter(|s| !s.withdrawn && s.decided > 0) {
        if let Some(joint) = strand.parent {
            need[joint.strand] = need[joint.strand].max(joint.vertex + 1);
        }
    }
    need
}
