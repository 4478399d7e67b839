//! Growth of filaments under a load and current history: tips that step, steer, branch, stall, meet, retreat and bridge.
//!
//! A tip at direction φ moves at the speed of its law times a log-normal factor with memory. Per px of way its direction changes by a wandering
//! curvature (Ornstein & Uhlenbeck 1930, Phys. Rev. 36, 823), by −k·|σ|/100 MPa·sin(2Δ)/2 toward the expected axis and by −f·sin(φ−φₙ) toward the
//! edge's normal. Steering by ½ sin 2Δ is the gradient of alignment cos 2Δ: a common-practice form, not a fit to any record.
//! Limits: no shielding between filaments; after the first contact nothing grows.

use super::dice::{Dice, Stream};
use super::history::{current_ma, loading};
use super::plan::{GrowthPlan, Meeting, RootPlan};
use super::polyline::{Polyline, distance, dot, plus, scaled};
use super::scenario::Scenario;
use super::tip::Tip;
use super::track::{GrownPoint, Growth, Track, TrackEnd};

/// Longest step of a tip, px.
const STEP_PX: f64 = 0.4;
/// A tip this near the picture's border leaves the view and stops, px.
const BORDER_PX: f64 = 6.0;
/// Least way between a root or branching and the next branching, px.
const BRANCH_SPACING_PX: f64 = 15.0;
/// Regrowth along an emptied track is this much faster than new growth (common practice: the crack is there already).
const REFILL: f64 = 3.0;

/// Simulates the growth of a settled scenario.
///
/// # Examples
/// ```
/// use veerlog::synth::{Scenario, grow};
/// let scenario = Scenario { seed: 4, ..Scenario::default() }.settle().unwrap();
/// let growth = grow(&scenario);
/// assert!(growth.tracks.iter().all(|t| t.points[0].time_s > scenario.bare_until_s()));
/// ```
#[must_use]
pub fn grow(scenario: &Scenario) -> Growth {
    match (Polyline::new(&scenario.plating_edge), Polyline::new(&scenario.far_edge)) {
        (Some(plating), Some(far)) => Field::new(scenario, plating, far).run(),
        _ => Growth { tracks: Vec::new(), contact: None },
    }
}

/// The simulation's state.
struct Field<'a> {
    scenario: &'a Scenario,
    plan: &'a GrowthPlan,
    plating: Polyline,
    far: Polyline,
    side: f64,
    growth: Growth,
    tips: Vec<Tip>,
    taken: Vec<Option<(u32, u32)>>,
}

impl<'a> Field<'a> {
    fn new(scenario: &'a Scenario, plating: Polyline, far: Polyline) -> Self {
        let side = plating.side_of(&far);
        let taken = vec![None; scenario.width as usize * scenario.height as usize];
        let growth = Growth { tracks: Vec::new(), contact: None };
        let mut field = Self { scenario, plan: &scenario.growth, plating, far, side, growth, tips: Vec::new(), taken };
        field.plant();
        field
    }

    /// Places the roots, apart from each other, in order of start time.
    fn plant(&mut self) {
        let mut dice = Dice::new(self.scenario.seed, Stream::Roots, 0);
        let mut roots = self.plan.roots.clone();
        let spacing = 0.6 / (self.plan.filaments + roots.len()).max(1) as f64;
        for _ in 0..self.plan.filaments {
            let mut along = dice.between(0.12, 0.88);
            for _ in 0..200 {
                if roots.iter().all(|r| (r.along - along).abs() > spacing) {
                    break;
                }
                along = dice.between(0.12, 0.88);
            }
            roots.push(RootPlan { along, start_s: None, width_px: None, speed_px_per_s: None, lean_deg: None });
        }
        let left = (self.scenario.end_s() - self.scenario.bare_until_s()).max(self.scenario.interval_s);
        let gap = self.plating.gap(&self.far);
        for (i, root) in roots.into_iter().enumerate() {
            let start = root.start_s.unwrap_or_else(|| self.scenario.bare_until_s() + dice.within(self.plan.start_s));
            let width = root.width_px.unwrap_or_else(|| dice.within(self.plan.width_px));
            let speed = root.speed_px_per_s.unwrap_or_else(|| match self.plan.speed_px_per_s {
                [_, high] if high <= 0.0 => gap / (left * dice.between(0.6, 1.8)),
                range => dice.within(range),
            });
            let (place, tangent) = self.plating.at(root.along);
            let normal = scaled([-tangent[1], tangent[0]], self.side);
            let lean = root.lean_deg.unwrap_or_else(|| (self.plan.root_spread_deg * dice.normal()).clamp(-50.0, 50.0));
            // Image angles run clockwise as displayed (y down), leans anticlockwise.
            let angle = libm::atan2(normal[1], normal[0]) - lean.to_radians();
            // A track starts only after the last bare frame, whatever was asked for.
            let start = start.max(self.scenario.bare_until_s() + 1e-3);
            self.sprout(
                i as u32 + 1,
                None,
                GrownPoint { x: place[0], y: place[1], time_s: start, width },
                angle,
                speed,
                i + 1,
            );
        }
    }

    fn sprout(
        &mut self,
        filament: u32,
        parent: Option<usize>,
        first: GrownPoint,
        angle: f64,
        speed: f64,
        stream: usize,
    ) {
        let mut dice = Dice::new(self.scenario.seed, Stream::Growth, stream);
        self.tips.push(Tip {
            track: self.growth.tracks.len(),
            start_s: first.time_s,
            speed,
            width: first.width,
            place: first.place(),
            angle,
            curvature: self.plan.wander_per_px * dice.normal(),
            log_speed: self.plan.speed_noise * dice.normal(),
            width_wave: 0.0,
            toggle_s: first.time_s + dice.wait(0.15 * self.scenario.end_s()),
            branched_at: 0.0,
            running: true,
            front: 0.0,
            alive: true,
            dice,
        });
        self.growth.tracks.push(Track::new(filament, parent, first));
    }

    fn run(mut self) -> Growth {
        let fastest = self.tips.iter().map(|t| t.speed).fold(0.0, f64::max) * 3.0;
        let steps = ((fastest * self.scenario.interval_s / STEP_PX).ceil() as usize).clamp(4, 400);
        let dt = self.scenario.interval_s / steps as f64;
        self.note_fronts();
        for k in 1..self.scenario.frames {
            for step in 0..steps {
                let time = self.scenario.time(k - 1) + step as f64 * dt;
                for i in 0..self.tips.len() {
                    self.advance(i, time, dt);
                }
            }
            self.note_fronts();
        }
        self.growth
    }

    /// Keeps every front's arc length at the end of a frame's interval.
    fn note_fronts(&mut self) {
        let frame = self.growth.tracks.iter().map(|t| t.front.len()).max().unwrap_or(0);
        for tip in &self.tips {
            let track = &mut self.growth.tracks[tip.track];
            track.front.resize(frame, 0.0);
            track.front.push(tip.front);
        }
    }

    /// One tip, one step: stripping, refilling or growing.
    fn advance(&mut self, i: usize, time: f64, dt: f64) {
        let drive = current_ma(&self.scenario.cell, time) / self.scenario.cell.current_ma;
        let shorted = self.growth.contact.is_some();
        let tip = &mut self.tips[i];
        if shorted || time < tip.start_s {
            return;
        }
        let grown = self.growth.tracks[tip.track].length();
        if drive < 0.0 {
            tip.front = (tip.front + self.plan.retreat_px_per_s * drive * dt).max(0.0);
        } else if tip.front < grown {
            tip.front = (tip.front + REFILL * tip.speed * drive * dt).min(grown);
        } else if tip.alive {
            let way = (tip.pace(self.plan, time, dt, self.scenario.end_s()) * drive * dt).min(1.5 * STEP_PX);
            if way > 0.0 {
                self.step(i, time + dt, way);
            }
        }
    }

    /// Moves a tip by `way` px and settles what it runs into.
    fn step(&mut self, i: usize, time: f64, way: f64) {
        self.steer(i, time, way);
        let tip = &mut self.tips[i];
        let (sin, cos) = libm::sincos(tip.angle);
        let ahead = [cos, sin];
        tip.place = plus(tip.place, scaled(ahead, way));
        let memory = libm::exp(-way / 12.0);
        tip.width_wave =
            tip.width_wave * memory + self.plan.width_noise * tip.dice.normal() * (1.0 - memory * memory).sqrt();
        let width = (tip.width * (1.0 + tip.width_wave)).max(1.2);
        let point = GrownPoint { x: tip.place[0], y: tip.place[1], time_s: time, width };
        let (track, place) = (tip.track, tip.place);
        self.growth.tracks[track].push(point);
        self.tips[i].front = self.growth.tracks[track].length();
        if self.touches_far(place, width) {
            self.stop(i, time, TrackEnd::Contact);
            self.growth.contact = Some((time, track));
        } else if let Some(other) = self.met(track, plus(place, scaled(ahead, 0.5 * width + 0.5)), width) {
            self.growth.tracks[track].push(GrownPoint { x: other[0], y: other[1], ..point });
            self.tips[i].front = self.growth.tracks[track].length();
            self.stop(i, time, TrackEnd::Met);
        } else if self.leaves(place) {
            self.stop(i, time, TrackEnd::Free);
        } else {
            self.mark(track, place, width);
            self.maybe_branch(i, time, way);
        }
    }

    /// Turns a tip over `way` px.
    fn steer(&mut self, i: usize, time: f64, way: f64) {
        let near = self.plating.nearest(self.tips[i].place, true);
        let normal = scaled([-near.tangent[1], near.tangent[0]], self.side);
        let load = loading(&self.scenario.load, time, near.tangent);
        let tip = &mut self.tips[i];
        let memory = libm::exp(-way / self.plan.wander_memory_px);
        tip.curvature =
            tip.curvature * memory + self.plan.wander_per_px * tip.dice.normal() * (1.0 - memory * memory).sqrt();
        let mut turn = tip.curvature * way;
        turn -= self.plan.field_per_px * libm::sin(tip.angle - libm::atan2(normal[1], normal[0])) * way;
        if let Some(axis) = load.axis_deg {
            // Image angles run clockwise (y down), load axes anticlockwise; tension turns growth across the axis.
            let expected = if load.stress_mpa < 0.0 { axis + 90.0 } else { axis };
            let off = tip.angle + expected.to_radians();
            turn -= self.plan.steering_per_px * load.stress_mpa.abs() / 100.0 * 0.5 * libm::sin(2.0 * off) * way;
        }
        tip.angle += turn;
    }

    fn touches_far(&self, place: [f64; 2], width: f64) -> bool {
        let near = self.far.nearest(place, false);
        near.distance <= 0.5 * width || (near.distance < 4.0 && near.side * self.far.side_of(&self.plating) < 0.0)
    }

    /// Centre of another track's (or this one's own old) ink at `ahead`, unless it is where the two part.
    fn met(&self, track: usize, ahead: [f64; 2], width: f64) -> Option<[f64; 2]> {
        if self.plan.meeting == Meeting::Cross {
            return None;
        }
        let (other, n) = self.taken[self.cell(ahead)?]?;
        let (other, n) = (other as usize, n as usize);
        let there = self.growth.tracks[other].points[n];
        let own = &self.growth.tracks[track];
        let near_parting = if other == track {
            own.length() - own.arc[n] < 4.0 * width
        } else {
            let theirs = &self.growth.tracks[other];
            let kin = own.parent == Some(other) || theirs.parent == Some(track);
            let parting = if own.parent == Some(other) { own.points[0] } else { theirs.points[0] };
            kin && distance(parting.place(), ahead) < 2.5 * (width + there.width)
        };
        (!near_parting).then_some(there.place())
    }

    fn leaves(&self, place: [f64; 2]) -> bool {
        let (w, h) = (f64::from(self.scenario.width), f64::from(self.scenario.height));
        let outside =
            place[0] < BORDER_PX || place[1] < BORDER_PX || place[0] > w - BORDER_PX || place[1] > h - BORDER_PX;
        let near = self.plating.nearest(place, true);
        outside || near.side * self.side < 0.0
    }

    fn cell(&self, p: [f64; 2]) -> Option<usize> {
        let (x, y) = (p[0].round(), p[1].round());
        let inside = x >= 0.0 && y >= 0.0 && x < f64::from(self.scenario.width) && y < f64::from(self.scenario.height);
        inside.then(|| y as usize * self.scenario.width as usize + x as usize)
    }

    /// Marks the last point's ink as taken.
    fn mark(&mut self, track: usize, place: [f64; 2], width: f64) {
        let index = (track as u32, self.growth.tracks[track].points.len() as u32 - 1);
        let reach = (0.5 * width).ceil() as i32;
        for dy in -reach..=reach {
            for dx in -reach..=reach {
                let off = [f64::from(dx), f64::from(dy)];
                if dot(off, off) <= 0.25 * width * width
                    && let Some(cell) = self.cell(plus(place, off))
                    && self.taken[cell].is_none()
                {
                    self.taken[cell] = Some(index);
                }
            }
        }
    }

    fn stop(&mut self, i: usize, time: f64, end: TrackEnd) {
        self.tips[i].alive = false;
        let track = &mut self.growth.tracks[self.tips[i].track];
        track.end = end;
        track.stopped_s = time;
    }

    fn maybe_branch(&mut self, i: usize, time: f64, way: f64) {
        let tip = &mut self.tips[i];
        let (track, here) = (tip.track, self.growth.tracks[tip.track].length());
        let filament = self.growth.tracks[track].filament;
        let branches = self.growth.tracks.iter().filter(|t| t.filament == filament && t.parent.is_some()).count();
        let ready = here - tip.branched_at > BRANCH_SPACING_PX && branches < self.plan.branch_limit;
        if !ready || !tip.dice.chance(self.plan.branches_per_100_px * way / 100.0) {
            return;
        }
        tip.branched_at = here;
        let side = if tip.dice.chance(0.5) { 1.0 } else { -1.0 };
        let angle = tip.angle + side * tip.dice.within(self.plan.branch_angle_deg).to_radians();
        let width = (tip.width * tip.dice.between(0.6, 0.95)).max(self.plan.width_px[0].min(tip.width));
        let speed = tip.speed * tip.dice.between(0.5, 1.0);
        let first = GrownPoint { x: tip.place[0], y: tip.place[1], time_s: time, width };
        let stream = 1000 + self.growth.tracks.len();
        self.sprout(filament, Some(track), first, angle, speed, stream);
    }
}

#[cfg(test)]
mod tests {
    use super::super::plan::{FixtureKind, LoadPlan, LoadStage};
    use super::super::polyline::{cross, minus};
    use super::*;

    fn loaded(stress_mpa: f64, direction_deg: f64, seed: u64) -> Scenario {
        let stages = vec![LoadStage { at_s: 0.0, stress_mpa, direction_deg, ramp_s: 0.0 }];
        let load = LoadPlan { fixture: FixtureKind::Stress, stages, ..LoadPlan::default() };
        Scenario { seed, load, ..Scenario::default() }.settle().unwrap()
    }

    /// Mean cos 2Δ over all growth against an axis.
    fn alignment(growth: &Growth, axis: [f64; 2]) -> f64 {
        let mut sum = [0.0, 0.0];
        for s in growth.tracks.iter().flat_map(|t| t.points.windows(2)) {
            let step = minus(s[1].place(), s[0].place());
            let (along, across) = (dot(step, axis), cross(step, axis));
            let size = distance(s[1].place(), s[0].place());
            sum = plus(sum, [(along * along - across * across) / size.max(1e-9), size]);
        }
        sum[0] / sum[1]
    }

    #[test]
    fn compression_along_the_plates_turns_growth_and_tension_does_the_opposite() {
        // Common practice: growth follows the axis of in-plane compression.
        let mut mean = 0.0;
        for seed in 0..6 {
            let along = alignment(&grow(&loaded(180.0, 90.0, seed)), [0.0, 1.0]);
            let pulled = alignment(&grow(&loaded(-180.0, 90.0, seed)), [0.0, 1.0]);
            assert!(along > 0.0 && pulled < -0.7, "seed {seed}: {along} {pulled}");
            mean += along / 6.0;
        }
        assert!(mean > 0.35, "{mean}");
    }

    #[test]
    fn tracks_are_ordered_in_time_and_space() {
        for seed in 0..8 {
            for track in grow(&loaded(60.0, 45.0, seed)).tracks {
                assert!(track.points.windows(2).all(|s| s[0].time_s <= s[1].time_s));
                assert!(track.arc.windows(2).all(|a| a[1] > a[0]));
                assert!((track.grown(1e9) - track.length()).abs() < 1e-9);
            }
        }
    }

    #[test]
    fn nothing_grows_after_contact_and_contact_is_at_the_edge() {
        let mut scenario = loaded(150.0, 0.0, 2);
        scenario.growth.speed_px_per_s = [2.5, 3.0];
        let growth = grow(&scenario);
        let (time, track) = growth.contact.expect("fast growth across the gap bridges");
        let end = growth.tracks[track].points.last().unwrap();
        let far = Polyline::new(&scenario.far_edge).unwrap();
        assert!(far.nearest(end.place(), false).distance <= 0.5 * end.width + 1e-9);
        assert!(growth.tracks.iter().flat_map(|t| &t.points).all(|p| p.time_s <= time));
    }

    #[test]
    fn stripping_moves_the_front_back_and_plating_refills_it() {
        use super::super::plan::CurrentStage;
        let mut scenario = Scenario { seed: 5, ..Scenario::default() }.settle().unwrap();
        scenario.growth.retreat_px_per_s = 0.8;
        scenario.cell.stages =
            vec![CurrentStage { at_s: 200.0, current_ma: -0.02 }, CurrentStage { at_s: 240.0, current_ma: 0.02 }];
        let growth = grow(&scenario);
        let track = &growth.tracks[0];
        assert!(track.front[24] < track.front[20] - 10.0);
        assert!(track.front[30] > track.front[24]);
        assert!((track.grown(240.0) - track.grown(200.0)).abs() < STEP_PX);
    }
}
