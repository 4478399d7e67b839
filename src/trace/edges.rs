//! The two electrode edges as polylines: depth, remaining gap, and which side is electrolyte.
//!
//! Method: Euclidean distance to the nearest point of a polyline; the electrolyte is the side of an
//! edge on which the other edge lies, decided at the nearest segment.
//! Limit: an edge that folds back on itself has no clear side there.

use super::centreline::unit;

/// Longest way to the edge along a line's own direction, in nearest distances, before the nearest point is taken instead: a
/// slant of 65° off the edge's normal.
const MOST_ASIDE: f64 = 2.4;

/// A polyline in pixels (x right, y down), at least two points.
#[derive(Debug, Clone, PartialEq)]
pub struct Polyline {
    points: Vec<[f64; 2]>,
}

/// The nearest point of a polyline to a given point.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Nearest {
    /// Distance, px.
    pub distance: f64,
    /// The foot, px.
    pub foot: [f64; 2],
    /// Unit direction of the segment it lies on.
    pub direction: [f64; 2],
    /// Which side of the segment the point is on: the sign of direction × (point − foot).
    pub side: f64,
}

impl Polyline {
    /// `None` with fewer than two points or where all points coincide.
    #[must_use]
    pub fn new(points: Vec<[f64; 2]>) -> Option<Self> {
        let first = *points.first()?;
        let spread = points.iter().any(|p| libm::hypot(p[0] - first[0], p[1] - first[1]) > 0.0);
        spread.then_some(Self { points })
    }

    /// The points it was made from.
    #[must_use]
    pub fn points(&self) -> &[[f64; 2]] {
        &self.points
    }

    /// The point of the polyline nearest to `p`.
    #[must_use]
    pub fn nearest(&self, p: [f64; 2]) -> Nearest {
        let mut best: Option<Nearest> = None;
        for pair in self.points.windows(2) {
            let (a, b) = (pair[0], pair[1]);
            let d = [b[0] - a[0], b[1] - a[1]];
            let length = libm::hypot(d[0], d[1]);
            if length <= 0.0 {
                continue;
            }
            let u = [d[0] / length, d[1] / length];
            let along = ((p[0] - a[0]) * u[0] + (p[1] - a[1]) * u[1]).clamp(0.0, length);
            let foot = [a[0] + along * u[0], a[1] + along * u[1]];
            let off = [p[0] - foot[0], p[1] - foot[1]];
            let distance = libm::hypot(off[0], off[1]);
            let side = u[0] * (p[1] - a[1]) - u[1] * (p[0] - a[0]);
            if best.is_none_or(|n| distance < n.distance) {
                best = Some(Nearest { distance, foot, direction: u, side });
            }
        }
        best.unwrap_or(Nearest {
            distance: libm::hypot(p[0] - self.points[0][0], p[1] - self.points[0][1]),
            foot: self.points[0],
            direction: [1.0, 0.0],
            side: 0.0,
        })
    }

    /// Where a line that runs from `first` to `aim`, carried on backwards, meets the polyline; the nearest point of the
    /// polyline where that would lead far aside.
    #[must_use]
    pub(crate) fn carried_back(&self, first: [f64; 2], aim: [f64; 2]) -> [f64; 2] {
        let near = self.nearest(first);
        let Some(back) = unit([first[0] - aim[0], first[1] - aim[1]]) else {
            return near.foot;
        };
        let across = [near.direction[1], -near.direction[0]];
        let off = (first[0] - near.foot[0]) * across[0] + (first[1] - near.foot[1]) * across[1];
        let closing = back[0] * across[0] + back[1] * across[1];
        if off.abs() < 1e-9 || off * closing >= 0.0 || -off / closing > MOST_ASIDE * near.distance {
            return near.foot;
        }
        let run = -off / closing;
        [first[0] + run * back[0], first[1] + run * back[1]]
    }

    /// The middle of the polyline by arc length.
    #[must_use]
    pub fn middle(&self) -> [f64; 2] {
        let lengths: Vec<f64> =
            self.points.windows(2).map(|w| libm::hypot(w[1][0] - w[0][0], w[1][1] - w[0][1])).collect();
        let mut left = 0.5 * lengths.iter().sum::<f64>();
        for (pair, length) in self.points.windows(2).zip(&lengths) {
            if *length > 0.0 && left <= *length {
                let t = left / length;
                return [pair[0][0] + t * (pair[1][0] - pair[0][0]), pair[0][1] + t * (pair[1][1] - pair[0][1])];
            }
            left -= length;
        }
        self.points[self.points.len() - 1]
    }
}

/// The plating edge and the far edge.
#[derive(Debug, Clone, PartialEq)]
pub struct Edges {
    /// Where metal deposits and filaments start.
    pub plating: Polyline,
    /// The opposite electrode.
    pub far: Polyline,
    plating_side: f64,
    far_side: f64,
}

impl Edges {
    /// Joins the two edges and finds the electrolyte's side of each.
    #[must_use]
    pub fn new(plating: Polyline, far: Polyline) -> Self {
        let plating_side = plating.nearest(far.middle()).side.signum();
        let far_side = far.nearest(plating.middle()).side.signum();
        Self { plating, far, plating_side, far_side }
    }

    /// Depth from the plating edge, px; negative behind it.
    #[must_use]
    pub fn depth(&self, p: [f64; 2]) -> f64 {
        let n = self.plating.nearest(p);
        if n.side * self.plating_side < 0.0 { -n.distance } else { n.distance }
    }

    /// Distance to the far edge, px; negative behind it.
    #[must_use]
    pub fn remaining(&self, p: [f64; 2]) -> f64 {
        let n = self.far.nearest(p);
        if n.side * self.far_side < 0.0 { -n.distance } else { n.distance }
    }

    /// Depth / (depth + remaining distance), within [0, 1].
    #[must_use]
    pub fn fraction(&self, p: [f64; 2]) -> f64 {
        let depth = self.depth(p).max(0.0);
        let remaining = self.remaining(p).max(0.0);
        if depth + remaining > 0.0 { depth / (depth + remaining) } else { 0.0 }
    }

    /// Least distance between the two edges, px.
    #[must_use]
    pub fn gap(&self) -> f64 {
        let to_far = self.plating.points().iter().map(|&p| self.far.nearest(p).distance);
        let to_plating = self.far.points().iter().map(|&p| self.plating.nearest(p).distance);
        to_far.chain(to_plating).fold(f64::INFINITY, f64::min)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn edges() -> Edges {
        let plating = Polyline::new(vec![[10.0, 0.0], [10.0, 99.0]]).unwrap();
        let far = Polyline::new(vec![[110.0, 0.0], [110.0, 99.0]]).unwrap();
        Edges::new(plating, far)
    }

    #[test]
    fn depth_is_signed_and_measured_from_the_plating_edge() {
        let e = edges();
        assert!((e.depth([40.0, 50.0]) - 30.0).abs() < 1e-12);
        assert!((e.depth([5.0, 50.0]) + 5.0).abs() < 1e-12);
        assert!((e.remaining([40.0, 50.0]) - 70.0).abs() < 1e-12);
        assert!(e.remaining([115.0, 50.0]) < 0.0);
        assert!((e.fraction([35.0, 3.0]) - 0.25).abs() < 1e-12);
        assert!((e.gap() - 100.0).abs() < 1e-12);
    }

    #[test]
    fn swapping_the_edges_swaps_depth_and_remaining() {
        let e = edges();
        let s = Edges::new(e.far.clone(), e.plating.clone());
        for p in [[40.0, 50.0], [100.0, 20.0], [0.0, 3.0]] {
            assert!((e.depth(p) - s.remaining(p)).abs() < 1e-12);
        }
    }

    #[test]
    fn a_polyline_needs_two_different_points() {
        assert!(Polyline::new(vec![[1.0, 1.0]]).is_none());
        assert!(Polyline::new(vec![[1.0, 1.0], [1.0, 1.0]]).is_none());
    }
}
