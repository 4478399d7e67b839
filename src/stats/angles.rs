//! Directions without a head: axes in degrees, 0 ≤ a < 180, anticlockwise from +x as displayed.
//! Trigonometry from `libm`, so that tables are the same bytes on one target whatever the system's maths library.

/// Radians in a degree.
pub const RADIANS: f64 = std::f64::consts::PI / 180.0;

/// An angle in degrees as an axis: 0 ≤ a < 180.
///
/// ```
/// assert_eq!(veerlog::stats::angles::fold_axis(-30.0), 150.0);
/// ```
#[must_use]
pub fn fold_axis(degrees: f64) -> f64 {
    fold(degrees, 180.0)
}

/// An angle in degrees as a direction: 0 ≤ a < 360.
#[must_use]
pub fn fold_direction(degrees: f64) -> f64 {
    fold(degrees, 360.0)
}

fn fold(degrees: f64, turn: f64) -> f64 {
    let folded = degrees.rem_euclid(turn);
    // rem_euclid of a tiny negative number rounds up to the turn itself.
    if folded >= turn { 0.0 } else { folded }
}

/// Smallest turn from axis `from` to axis `to`, degrees, −90 < d ≤ 90, anticlockwise positive.
#[must_use]
pub fn turn_between(from: f64, to: f64) -> f64 {
    let d = fold_axis(to - from);
    if d > 90.0 { d - 180.0 } else { d }
}

/// Acute angle between two axes, 0 to 90 degrees.
///
/// ```
/// assert_eq!(veerlog::stats::angles::acute(10.0, 170.0), 20.0);
/// ```
#[must_use]
pub fn acute(a: f64, b: f64) -> f64 {
    turn_between(a, b).abs()
}

/// (cos 2a, sin 2a): the axis as a unit vector, `a` in degrees.
#[must_use]
pub fn doubled(degrees: f64) -> [f64; 2] {
    let (sin, cos) = libm::sincos(2.0 * degrees * RADIANS);
    [cos, sin]
}

/// The axis whose doubled vector points along `v`; `None` for a vector too short to have a direction.
#[must_use]
pub fn halved(v: [f64; 2]) -> Option<f64> {
    (libm::hypot(v[0], v[1]) > 0.0).then(|| fold_axis(0.5 * libm::atan2(v[1], v[0]) / RADIANS))
}

/// The axis along which growth is expected: the load axis in compression (stress > 0), its perpendicular in tension,
/// none without stress.
#[must_use]
pub fn expected_axis(load_axis_deg: f64, stress_mpa: f64) -> Option<f64> {
    if stress_mpa > 0.0 {
        Some(fold_axis(load_axis_deg))
    } else if stress_mpa < 0.0 {
        Some(fold_axis(load_axis_deg + 90.0))
    } else {
        None
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    #[test]
    fn folding_and_turning() {
        assert_abs_diff_eq!(fold_axis(180.0), 0.0);
        assert_abs_diff_eq!(fold_axis(-1e-20), 0.0);
        assert_abs_diff_eq!(fold_direction(-90.0), 270.0);
        assert_abs_diff_eq!(turn_between(170.0, 10.0), 20.0);
        assert_abs_diff_eq!(turn_between(10.0, 170.0), -20.0);
        assert_abs_diff_eq!(turn_between(0.0, 90.0), 90.0);
        assert_abs_diff_eq!(acute(90.0, 0.0), 90.0);
    }

    #[test]
    fn doubling_and_back() {
        for axis in [0.0, 12.5, 90.0, 179.0] {
            assert_abs_diff_eq!(halved(doubled(axis)).unwrap(), axis, epsilon = 1e-10);
        }
        assert_eq!(halved([0.0, 0.0]), None);
    }

    #[test]
    fn tension_expects_the_perpendicular() {
        assert_eq!(expected_axis(10.0, 100.0), Some(10.0));
        assert_eq!(expected_axis(100.0, -5.0), Some(10.0));
        assert_eq!(expected_axis(100.0, 0.0), None);
    }
}
