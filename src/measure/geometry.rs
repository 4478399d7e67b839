//! Directions of centre-lines: local direction, axial means, acute angles.
//!
//! Convention: degrees anticlockwise from +x as displayed (image y runs down), axial, in [0, 180).
//! The local direction at a point is that of the chord over ± max(1.5 widths, 4 px) of arc.

use crate::trace::TracePoint;

/// Least half length of the chord that gives a local direction, px.
const LEAST_REACH: f64 = 4.0;
/// Half length of that chord in widths.
const REACH_WIDTHS: f64 = 1.5;

/// Axial direction of the vector (dx right, dy down), degrees in [0, 180).
#[must_use]
pub fn axial_deg(dx: f64, dy: f64) -> f64 {
    wrap_axial(libm::atan2(-dy, dx).to_degrees())
}

/// An angle brought into [0, 180).
#[must_use]
pub fn wrap_axial(deg: f64) -> f64 {
    let wrapped = deg.rem_euclid(180.0);
    if wrapped >= 180.0 { 0.0 } else { wrapped }
}

/// Acute angle between two axes, degrees in [0, 90].
#[must_use]
pub fn acute_deg(a: f64, b: f64) -> f64 {
    let d = wrap_axial(a - b);
    d.min(180.0 - d)
}

/// Sums of length-weighted doubled-angle vectors: cheap to add, subtract and turn.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct AxialSum {
    /// Σ l, px.
    pub length: f64,
    /// Σ l cos 2θ.
    pub c: f64,
    /// Σ l sin 2θ.
    pub s: f64,
}

impl AxialSum {
    /// Adds a stretch of length `length` at `deg`.
    pub fn add(&mut self, length: f64, deg: f64) {
        let doubled = (2.0 * deg).to_radians();
        self.length += length;
        self.c += length * libm::cos(doubled);
        self.s += length * libm::sin(doubled);
    }

    /// This sum less an earlier one.
    #[must_use]
    pub fn since(&self, earlier: &AxialSum) -> AxialSum {
        AxialSum { length: self.length - earlier.length, c: self.c - earlier.c, s: self.s - earlier.s }
    }

    /// Both together.
    #[must_use]
    pub fn and(&self, other: &AxialSum) -> AxialSum {
        AxialSum { length: self.length + other.length, c: self.c + other.c, s: self.s + other.s }
    }

    /// Length-weighted axial mean, degrees in [0, 180); `None` where the directions cancel.
    #[must_use]
    pub fn mean_deg(&self) -> Option<f64> {
        let size = libm::hypot(self.c, self.s);
        (self.length > 0.0 && size > 1e-9 * self.length)
            .then(|| wrap_axial(0.5 * libm::atan2(self.s, self.c).to_degrees()))
    }

    /// Σ l cos 2Δ with Δ the angle to `axis_deg`; the alignment is this over the length.
    #[must_use]
    pub fn along(&self, axis_deg: f64) -> f64 {
        let doubled = (2.0 * axis_deg).to_radians();
        self.c * libm::cos(doubled) + self.s * libm::sin(doubled)
    }
}

/// Arc length from the first point to each point, px.
#[must_use]
pub fn arc(points: &[TracePoint]) -> Vec<f64> {
    let mut total = 0.0;
    let mut out = Vec::with_capacity(points.len());
    for (i, p) in points.iter().enumerate() {
        if i > 0 {
            total += libm::hypot(p.x - points[i - 1].x, p.y - points[i - 1].y);
        }
        out.push(total);
    }
    out
}

/// Local direction at each point, degrees: the chord over ± max(1.5 widths, 4 px) of arc, cut at the ends.
#[must_use]
pub fn local_directions(points: &[TracePoint]) -> Vec<f64> {
    let arc = arc(points);
    let (mut a, mut b) = (0, 0);
    (0..points.len())
        .map(|i| {
            let reach = (REACH_WIDTHS * points[i].width).max(LEAST_REACH);
            a = arc.partition_point(|&s| s < arc[i] - reach).min(i);
            b = arc.partition_point(|&s| s <= arc[i] + reach).max(i + 1) - 1;
            let (p, q) = (points[a], points[b]);
            axial_deg(q.x - p.x, q.y - p.y)
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn line(n: usize, dx: f64, dy: f64) -> Vec<TracePoint> {
        (0..n)
            .map(|i| TracePoint {
                x: i as f64 * dx,
                y: i as f64 * dy,
                arrival: 0,
                retreat: None,
                width: 2.0,
                u_across: 0.1,
            })
            .collect()
    }

    #[test]
    fn angles_run_anticlockwise_as_displayed() {
        assert!((axial_deg(1.0, -1.0) - 45.0).abs() < 1e-12);
        assert!((axial_deg(1.0, 1.0) - 135.0).abs() < 1e-12);
        assert!((axial_deg(-1.0, 0.0)).abs() < 1e-12);
        assert!((axial_deg(0.0, 5.0) - 90.0).abs() < 1e-12);
    }

    #[test]
    fn acute_angles_are_symmetric_and_at_most_ninety() {
        assert!((acute_deg(170.0, 10.0) - 20.0).abs() < 1e-12);
        assert!((acute_deg(10.0, 170.0) - 20.0).abs() < 1e-12);
        assert!((acute_deg(0.0, 90.0) - 90.0).abs() < 1e-12);
    }

    #[test]
    fn alignment_is_one_along_and_minus_one_across() {
        let mut sum = AxialSum::default();
        sum.add(3.0, 30.0);
        assert!((sum.along(30.0) / sum.length - 1.0).abs() < 1e-12);
        assert!((sum.along(120.0) / sum.length + 1.0).abs() < 1e-12);
        assert!((sum.along(75.0) / sum.length).abs() < 1e-12);
    }

    #[test]
    fn directions_of_a_straight_line_are_its_own() {
        for d in local_directions(&line(30, 0.4, -0.3)) {
            assert!((d - axial_deg(4.0, -3.0)).abs() < 1e-9);
        }
        assert_eq!(local_directions(&line(1, 1.0, 0.0)).len(), 1);
    }
}
