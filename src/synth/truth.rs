//! The truth of a run, by the contract's definitions, from its growth: a row a frame, paths, the short.
//! Depth is the distance of the deepest centre-line point from the plating edge; local directions are chords over ± max(1.5 widths, 4 px).
//! Limit: a side branch shorter than the width of its parent is not counted as a tip (its end lies inside the parent's ink).

use serde::{Deserialize, Serialize};

use super::history::loading;
use super::polyline::{Polyline, acute_deg, axis_deg, distance};
use super::recorder::Shot;
use super::scenario::Scenario;
use super::track::{Growth, Track, TrackEnd, direction_at};

/// A local direction is taken over ± this many widths of centre-line, and
pub const WINDOW_WIDTHS: f64 = 1.5;
/// at least over ± this many px.
pub const WINDOW_PX: f64 = 4.0;

/// Spacing of the points written, px.
const SPACING_PX: f64 = 0.5;

/// Truth of one frame.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct FrameTruth {
    /// 0-based, over all files.
    pub frame: usize,
    /// Seconds since the first frame.
    pub time_s: f64,
    /// Drift of the scene against the first usable frame, px; absent where the frame shows nothing.
    pub drift_x_px: Option<f64>,
    /// See `drift_x_px`.
    pub drift_y_px: Option<f64>,
    /// Depth of the deepest filament, µm; never falls; 0 before growth.
    pub depth_um: f64,
    /// Depth / (depth + distance of the deepest point to the far edge); 1 from contact on.
    pub depth_fraction: f64,
    /// Depth of what is still filled with metal, µm.
    pub front_depth_um: f64,
    /// Free ends away from roots.
    pub tips: usize,
    /// Length of all tracks, µm.
    pub length_um: f64,
    /// Mean cos 2Δ of what is new since the last usable frame.
    pub growth_alignment: Option<f64>,
    /// Whether the file shows a frame of its own.
    pub usable: bool,
}

/// Truth of one path.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct PathTruth {
    /// Filament, from 1.
    pub filament: u32,
    /// Path, from 1.
    pub path: u32,
    /// Path it branched from.
    pub parent: Option<u32>,
    /// What its end is: `tip`, `meeting` or `far`.
    pub ends_in: String,
    /// Root to tip: x, y (px of the first usable frame), time of first arrival (s), full width (px).
    pub points: Vec<[f64; 4]>,
}

/// Truth of the short.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ShortTruth {
    /// First contact with the far edge, s; `None` when none came within the run.
    pub time_s: Option<f64>,
    /// The filament that made it.
    pub filament: Option<u32>,
}

/// The paths of a growth, a line each.
#[must_use]
pub fn paths(growth: &Growth) -> Vec<PathTruth> {
    let number = |i: usize| i as u32 + 1;
    let grown = growth.tracks.iter().enumerate().filter(|(_, t)| t.points.len() > 1);
    grown
        .map(|(i, track)| PathTruth {
            filament: track.filament,
            path: number(i),
            parent: track.parent.map(number),
            ends_in: match track.end {
                TrackEnd::Free => "tip",
                TrackEnd::Met => "meeting",
                TrackEnd::Contact => "far",
            }
            .to_owned(),
            points: spaced(track),
        })
        .collect()
}

/// Points about `SPACING_PX` apart, the first and the last among them.
fn spaced(track: &Track) -> Vec<[f64; 4]> {
    let to_write = |i: usize| {
        let p = track.points[i];
        [p.x, p.y, p.time_s, p.width].map(|v| (v * 1e4).round() / 1e4)
    };
    let (last, mut written) = (track.points.len() - 1, f64::NEG_INFINITY);
    let kept = (0..=last).filter(|&i| {
        let keep = i == last || track.arc[i] - written >= SPACING_PX;
        if keep {
            written = track.arc[i];
        }
        keep
    });
    kept.map(to_write).collect()
}

/// The short of a growth.
#[must_use]
pub fn short(growth: &Growth) -> ShortTruth {
    let filament = |track: usize| growth.tracks[track].filament;
    ShortTruth {
        time_s: growth.contact.map(|(time, _)| rounded(time)),
        filament: growth.contact.map(|(_, track)| filament(track)),
    }
}

/// A row a frame.
#[must_use]
pub fn frames(scenario: &Scenario, growth: &Growth, shots: &[Shot]) -> Vec<FrameTruth> {
    let (Some(plating), Some(far)) = (Polyline::new(&scenario.plating_edge), Polyline::new(&scenario.far_edge)) else {
        return Vec::new();
    };
    let depths: Vec<Vec<f64>> = growth.tracks.iter().map(|t| running_depth(t, &plating)).collect();
    let mut last_usable = 0.0;
    let mut rows = Vec::with_capacity(shots.len());
    for (k, shot) in shots.iter().enumerate() {
        let (time, usable) = (scenario.time(k), shot.loss.is_none());
        let grown: Vec<f64> = growth.tracks.iter().map(|t| t.grown(time)).collect();
        let deepest = deepest(growth, &depths, &grown, &plating);
        let fronts: Vec<f64> = growth.tracks.iter().map(|t| t.front.get(k).copied().unwrap_or(0.0)).collect();
        let front = self::deepest(growth, &depths, &fronts, &plating).map_or(0.0, |d| d.0);
        let contact = growth.contact.is_some_and(|(at, _)| at <= time);
        rows.push(FrameTruth {
            frame: k,
            time_s: time,
            drift_x_px: usable.then(|| rounded(shot.drift[0])),
            drift_y_px: usable.then(|| rounded(shot.drift[1])),
            depth_um: rounded(deepest.map_or(0.0, |d| d.0) * scenario.um_per_px),
            depth_fraction: deepest.map_or(0.0, |(depth, place)| {
                if contact { 1.0 } else { rounded(depth / (depth + far.nearest(place, false).distance)) }
            }),
            front_depth_um: rounded(front * scenario.um_per_px),
            tips: growth.tracks.iter().filter(|t| is_tip(growth, t, time)).count(),
            length_um: rounded(grown.iter().sum::<f64>() * scenario.um_per_px),
            growth_alignment: new_alignment(scenario, growth, &plating, last_usable, time).map(rounded),
            usable,
        });
        if usable {
            last_usable = time;
        }
    }
    rows
}

/// Greatest depth up to each point, px.
fn running_depth(track: &Track, plating: &Polyline) -> Vec<f64> {
    let mut deepest = 0.0;
    let depth = |p: [f64; 2]| plating.nearest(p, false).distance;
    track
        .points
        .iter()
        .map(|p| {
            deepest = depth(p.place()).max(deepest);
            deepest
        })
        .collect()
}

/// Greatest depth of the tracks up to the arc lengths `until`, and where it is; `None` when nothing has grown.
fn deepest(growth: &Growth, depths: &[Vec<f64>], until: &[f64], plating: &Polyline) -> Option<(f64, [f64; 2])> {
    let mut best: Option<(f64, [f64; 2])> = None;
    for ((track, depths), &s) in growth.tracks.iter().zip(depths).zip(until).filter(|(_, s)| **s > 0.0) {
        let n = track.arc.partition_point(|&a| a <= s);
        let i = depths[..n].partition_point(|&d| d < depths[n - 1]);
        let end = track.at(s).place();
        let candidates = [(depths[n - 1], track.points[i].place()), (plating.nearest(end, false).distance, end)];
        for candidate in candidates {
            if best.is_none_or(|b| candidate.0 > b.0) {
                best = Some(candidate);
            }
        }
    }
    best
}

/// Whether a track shows a free end at `time`.
#[must_use]
pub fn is_tip(growth: &Growth, track: &Track, time: f64) -> bool {
    let hidden = track.parent.map_or(0.0, |p| growth.tracks[p].points.first().map_or(0.0, |q| q.width));
    let free = track.end == TrackEnd::Free || time < track.stopped_s;
    free && track.grown(time) > hidden.max(1.0)
}

/// Length-weighted mean cos 2Δ of the centre-line that arrived in (from, to], against the axis halfway.
fn new_alignment(scenario: &Scenario, growth: &Growth, plating: &Polyline, from: f64, to: f64) -> Option<f64> {
    let (mut sum, mut total) = (0.0, 0.0);
    for track in &growth.tracks {
        for i in 1..track.points.len() {
            let p = track.points[i];
            if p.time_s <= from || p.time_s > to {
                continue;
            }
            let tangent = plating.nearest(p.place(), true).tangent;
            let axis = loading(&scenario.load, 0.5 * (from + to), tangent).axis_deg?;
            let direction = axis_deg(direction_at(track, i, (WINDOW_WIDTHS * p.width).max(WINDOW_PX)));
            let length = distance(p.place(), track.points[i - 1].place());
            sum += length * libm::cos(2.0 * acute_deg(direction, axis).to_radians());
            total += length;
        }
    }
    (total > 0.0).then(|| sum / total)
}

/// Six decimals are enough for px, s and µm, and keep the files small.
fn rounded(value: f64) -> f64 {
    (value * 1e6).round() / 1e6
}

#[cfg(test)]
mod tests {
    use super::super::grow;
    use super::super::recorder::shots;
    use super::*;

    #[test]
    fn depth_never_falls_and_the_fraction_reaches_one_only_at_contact() {
        for seed in 0..6 {
            let mut scenario = Scenario { seed, ..Scenario::default() }.settle().unwrap();
            scenario.growth.speed_px_per_s = [1.2, 2.5];
            let growth = grow(&scenario);
            let rows = frames(&scenario, &growth, &shots(&scenario));
            assert!(rows.windows(2).all(|r| r[0].depth_um <= r[1].depth_um && r[0].length_um <= r[1].length_um));
            for row in &rows {
                let contact = growth.contact.is_some_and(|(t, _)| t <= row.time_s);
                assert_eq!(row.depth_fraction >= 1.0, contact, "seed {seed} frame {}", row.frame);
            }
            assert!(rows[..scenario.bare].iter().all(|r| r.depth_um <= 0.0 && r.tips == 0));
        }
    }

    #[test]
    fn without_load_there_is_no_alignment() {
        let scenario = Scenario { seed: 3, ..Scenario::default() }.settle().unwrap();
        let rows = frames(&scenario, &grow(&scenario), &shots(&scenario));
        assert!(rows.iter().all(|r| r.growth_alignment.is_none()));
    }
}
