//! What growth leaves behind: tracks, each the whole way of one tip, as points with arrival times.
//! Positions between points go by straight line, times between points likewise.
//! Limit: a pause between two points (at most half a pixel) is spread over that half pixel.

use super::polyline::{distance, dot, minus, scaled};

/// One point of a true centre-line.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct GrownPoint {
    /// Picture x, px.
    pub x: f64,
    /// Picture y, px.
    pub y: f64,
    /// First arrival, s.
    pub time_s: f64,
    /// Full width once grown, px.
    pub width: f64,
}

impl GrownPoint {
    /// Its place.
    #[must_use]
    pub fn place(&self) -> [f64; 2] {
        [self.x, self.y]
    }
}

/// Why a track's end is where it is.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum TrackEnd {
    /// A free end.
    Free,
    /// It ran into another track.
    Met,
    /// It touched the far edge.
    Contact,
}

/// All that one tip left behind, from its root or branching to its end.
#[derive(Debug, Clone, PartialEq)]
pub struct Track {
    /// Filament, from 1.
    pub filament: u32,
    /// Track it branched from, as an index.
    pub parent: Option<usize>,
    /// Root to tip; at most 0.6 px apart.
    pub points: Vec<GrownPoint>,
    /// Arc length at each point, px.
    pub arc: Vec<f64>,
    /// What the end is.
    pub end: TrackEnd,
    /// Arc length filled with metal at each frame, px (below the grown length after stripping).
    pub front: Vec<f64>,
    /// Time at which it stopped for good, s (end of run when it never did).
    pub stopped_s: f64,
}

/// All growth of a run.
#[derive(Debug, Clone, PartialEq)]
pub struct Growth {
    /// In order of appearance; a parent stands before its children.
    pub tracks: Vec<Track>,
    /// First contact with the far edge: (time in s, index of the track).
    pub contact: Option<(f64, usize)>,
}

impl Track {
    /// Arc length grown by `time_s`, px.
    #[must_use]
    pub fn grown(&self, time_s: f64) -> f64 {
        let n = self.points.partition_point(|p| p.time_s <= time_s);
        match n {
            0 => 0.0,
            n if n == self.points.len() => self.arc[n - 1],
            n => {
                let (a, b) = (self.points[n - 1].time_s, self.points[n].time_s);
                self.arc[n - 1] + (self.arc[n] - self.arc[n - 1]) * (time_s - a) / (b - a)
            }
        }
    }

    /// The point at arc length `s`, between points by straight line.
    #[must_use]
    pub fn at(&self, s: f64) -> GrownPoint {
        let n = self.arc.partition_point(|&a| a <= s).clamp(1, self.arc.len().max(2) - 1);
        let (Some(a), Some(b)) = (self.points.get(n - 1), self.points.get(n)) else {
            return self.points[0];
        };
        let span = self.arc[n] - self.arc[n - 1];
        let share = if span > 0.0 { ((s - self.arc[n - 1]) / span).clamp(0.0, 1.0) } else { 0.0 };
        let mix = |p: f64, q: f64| p + share * (q - p);
        GrownPoint { x: mix(a.x, b.x), y: mix(a.y, b.y), time_s: mix(a.time_s, b.time_s), width: mix(a.width, b.width) }
    }

    /// The points up to arc length `s`, the last one between points; empty when s is 0 or nothing has grown.
    #[must_use]
    pub fn until(&self, s: f64) -> Vec<GrownPoint> {
        if s <= 0.0 || self.points.len() < 2 {
            return Vec::new();
        }
        let n = self.arc.partition_point(|&a| a < s);
        let mut points = self.points[..n].to_vec();
        points.push(self.at(s));
        points
    }

    /// Total arc length, px.
    #[must_use]
    pub fn length(&self) -> f64 {
        self.arc.last().copied().unwrap_or(0.0)
    }

    /// A track of one point.
    pub(super) fn new(filament: u32, parent: Option<usize>, first: GrownPoint) -> Self {
        let (points, arc) = (vec![first], vec![0.0]);
        Self { filament, parent, points, arc, end: TrackEnd::Free, front: Vec::new(), stopped_s: f64::INFINITY }
    }

    /// Adds a point, unless it is where the last one is.
    pub(super) fn push(&mut self, point: GrownPoint) {
        let step = self.points.last().map_or(0.0, |p| distance(p.place(), point.place()));
        if step > 0.0 {
            self.arc.push(self.length() + step);
            self.points.push(point);
        }
    }
}

/// Unit direction of `points` at index `i` over ± `reach` px of arc: the chord of that window.
#[must_use]
pub fn direction_at(track: &Track, i: usize, reach: f64) -> [f64; 2] {
    let here = track.arc[i];
    let low = track.arc.partition_point(|&a| a < here - reach);
    let high = track.arc.partition_point(|&a| a <= here + reach).max(1) - 1;
    let (low, high) =
        if low == high { (low.saturating_sub(1), (high + 1).min(track.arc.len() - 1)) } else { (low, high) };
    let chord = minus(track.points[high].place(), track.points[low].place());
    let size = dot(chord, chord).sqrt();
    if size > 0.0 { scaled(chord, 1.0 / size) } else { [1.0, 0.0] }
}
