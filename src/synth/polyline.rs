//! Electrode edges as polylines: nearest point, signed distance, normals.
//! Plain plane geometry in picture coordinates (x right, y down, pixel centres). Limit: polylines must not cross themselves.

/// A polyline with at least two points.
#[derive(Debug, Clone, PartialEq)]
pub struct Polyline(Vec<[f64; 2]>);

/// The point of a polyline nearest to some other point.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Nearest {
    /// The point.
    pub point: [f64; 2],
    /// Its distance.
    pub distance: f64,
    /// Which side the other point lies on: +1 to the right of the direction of travel as displayed, −1 to its left.
    pub side: f64,
    /// Unit tangent there, along the direction of travel.
    pub tangent: [f64; 2],
}

impl Polyline {
    /// From points; a single point or none gives `None`.
    #[must_use]
    pub fn new(points: &[[f64; 2]]) -> Option<Self> {
        let mut kept: Vec<[f64; 2]> = Vec::with_capacity(points.len());
        for &p in points {
            if kept.last().is_none_or(|&q| distance(p, q) > 0.0) {
                kept.push(p);
            }
        }
        (kept.len() >= 2).then_some(Self(kept))
    }

    /// Total length.
    #[must_use]
    pub fn length(&self) -> f64 {
        self.0.windows(2).map(|s| distance(s[0], s[1])).sum()
    }

    /// The point at `along` × length from the first, with the tangent there.
    #[must_use]
    pub fn at(&self, along: f64) -> ([f64; 2], [f64; 2]) {
        let mut left = along.clamp(0.0, 1.0) * self.length();
        let last = self.0.len() - 2;
        for (i, s) in self.0.windows(2).enumerate() {
            let length = distance(s[0], s[1]);
            if left <= length || i == last {
                let tangent = scaled(minus(s[1], s[0]), 1.0 / length);
                return (plus(s[0], scaled(tangent, left.min(length))), tangent);
            }
            left -= length;
        }
        (self.0[0], [0.0, 1.0])
    }

    /// The nearest point; `extend` prolongs the first and last stretch without end.
    #[must_use]
    pub fn nearest(&self, p: [f64; 2], extend: bool) -> Nearest {
        let last = self.0.len() - 2;
        let mut best = Nearest { point: self.0[0], distance: f64::INFINITY, side: 1.0, tangent: [0.0, 1.0] };
        for (i, s) in self.0.windows(2).enumerate() {
            let length = distance(s[0], s[1]);
            let tangent = scaled(minus(s[1], s[0]), 1.0 / length);
            let low = if extend && i == 0 { f64::NEG_INFINITY } else { 0.0 };
            let high = if extend && i == last { f64::INFINITY } else { length };
            let foot = plus(s[0], scaled(tangent, dot(minus(p, s[0]), tangent).clamp(low, high)));
            let away = distance(p, foot);
            if away < best.distance {
                let side = if cross(tangent, minus(p, foot)) < 0.0 { -1.0 } else { 1.0 };
                best = Nearest { point: foot, distance: away, side, tangent };
            }
        }
        best
    }

    /// Side of `self` on which the middle of `other` lies.
    #[must_use]
    pub fn side_of(&self, other: &Self) -> f64 {
        self.nearest(other.at(0.5).0, true).side
    }

    /// Least distance to `other`, sampled at its points and at `self`'s.
    #[must_use]
    pub fn gap(&self, other: &Self) -> f64 {
        let one_way =
            |a: &Self, b: &Self| a.0.iter().map(|&p| b.nearest(p, false).distance).fold(f64::INFINITY, f64::min);
        one_way(self, other).min(one_way(other, self))
    }
}

/// Distance of two points.
#[must_use]
pub fn distance(a: [f64; 2], b: [f64; 2]) -> f64 {
    length(minus(a, b))
}

/// Length of a vector.
#[must_use]
pub fn length(a: [f64; 2]) -> f64 {
    dot(a, a).sqrt()
}

/// a + b.
#[must_use]
pub fn plus(a: [f64; 2], b: [f64; 2]) -> [f64; 2] {
    [a[0] + b[0], a[1] + b[1]]
}

/// a − b.
#[must_use]
pub fn minus(a: [f64; 2], b: [f64; 2]) -> [f64; 2] {
    [a[0] - b[0], a[1] - b[1]]
}

/// a · k.
#[must_use]
pub fn scaled(a: [f64; 2], k: f64) -> [f64; 2] {
    [a[0] * k, a[1] * k]
}

/// Scalar product.
#[must_use]
pub fn dot(a: [f64; 2], b: [f64; 2]) -> f64 {
    a[0] * b[0] + a[1] * b[1]
}

/// z of the vector product; positive when b lies clockwise of a as displayed (y down).
#[must_use]
pub fn cross(a: [f64; 2], b: [f64; 2]) -> f64 {
    a[0] * b[1] - a[1] * b[0]
}

/// Unit vector of a direction in degrees anticlockwise as displayed.
#[must_use]
pub fn unit(direction_deg: f64) -> [f64; 2] {
    let (sin, cos) = libm::sincos(direction_deg.to_radians());
    [cos, -sin]
}

/// Direction of a vector, degrees anticlockwise as displayed, in [0, 180).
#[must_use]
pub fn axis_deg(v: [f64; 2]) -> f64 {
    let deg = libm::atan2(-v[1], v[0]).to_degrees().rem_euclid(180.0);
    if deg < 180.0 { deg } else { 0.0 }
}

/// Acute angle of two axes, degrees.
#[must_use]
pub fn acute_deg(a: f64, b: f64) -> f64 {
    let d = (a - b).rem_euclid(180.0);
    d.min(180.0 - d)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn nearest_on_a_corner() {
        let line = Polyline::new(&[[0.0, 0.0], [0.0, 10.0], [10.0, 10.0]]).unwrap();
        let near = line.nearest([3.0, 4.0], false);
        assert!((near.distance - 3.0).abs() < 1e-12 && distance(near.point, [0.0, 4.0]) < 1e-12);
        assert!(line.nearest([-3.0, 4.0], false).side * near.side < 0.0);
        assert!((line.nearest([0.0, -4.0], false).distance - 4.0).abs() < 1e-12);
        assert!(line.nearest([0.0, -4.0], true).distance < 1e-12);
        assert!(distance(line.at(0.75).0, [5.0, 10.0]) < 1e-12);
    }

    #[test]
    fn directions_turn_anticlockwise_as_displayed() {
        assert!((axis_deg([1.0, -1.0]) - 45.0).abs() < 1e-12);
        assert!((axis_deg([0.0, 1.0]) - 90.0).abs() < 1e-12);
        assert!(distance(unit(90.0), [0.0, -1.0]) < 1e-12);
        assert!((acute_deg(175.0, 5.0) - 10.0).abs() < 1e-12);
    }

    #[test]
    fn gap_of_parallel_lines() {
        let a = Polyline::new(&[[40.0, 0.0], [40.0, 239.0]]).unwrap();
        let b = Polyline::new(&[[280.0, 0.0], [280.0, 239.0]]).unwrap();
        assert!((a.gap(&b) - 240.0).abs() < 1e-12);
        assert!(Polyline::new(&[[1.0, 1.0], [1.0, 1.0]]).is_none());
    }
}
