//! Directions of the load in the picture: degrees anticlockwise from +x as displayed, axial, [0, 180).
//! The rig's angle is turned into the picture by its zero and its sense; through the plates the axis is
//! the normal of the plating edge nearest to the point asked for. Definitions: the contract of the tables.

use crate::run::{FixtureName, Manifest, Sense};

/// How the load axis at a point is found.
#[derive(Debug, Clone, PartialEq)]
pub enum AxisRule {
    /// The load has no axis in the picture.
    None,
    /// The logged or given direction.
    Logged {
        /// Image direction of the rig's zero, degrees.
        zero_deg: f64,
        /// Which way the rig counts.
        sense: Sense,
    },
    /// Along the local normal of the plating edge.
    Through {
        /// The plating edge, px.
        plating_edge: Vec<[f64; 2]>,
    },
}

impl AxisRule {
    /// The rule of a run.
    #[must_use]
    pub fn new(manifest: &Manifest) -> Self {
        match manifest.load.fixture {
            FixtureName::Normal | FixtureName::RingOnRing | FixtureName::Film => Self::None,
            FixtureName::Stack => Self::Through { plating_edge: manifest.cell.plating_edge.clone() },
            _ => Self::Logged { zero_deg: manifest.load.zero_deg, sense: manifest.load.sense },
        }
    }

    /// The load axis in the picture. `rig_deg`: the logged direction; `px`: where (of `Through` alone;
    /// without it the mean over the plating edge).
    #[must_use]
    pub fn axis_deg(&self, rig_deg: Option<f64>, px: Option<[f64; 2]>) -> Option<f64> {
        match self {
            Self::None => None,
            Self::Logged { zero_deg, sense } => rig_deg.map(|rig| image_direction_deg(rig, *zero_deg, *sense)),
            Self::Through { plating_edge } => match px {
                Some(px) => nearest_segment(plating_edge, px).map(|ends| normal_deg(ends[0], ends[1])),
                None => mean_normal_deg(plating_edge),
            },
        }
    }
}

/// A direction on the rig as a direction in the picture.
///
/// ```
/// use veerlog::{load::image_direction_deg, run::Sense};
/// assert_eq!(image_direction_deg(30.0, 90.0, Sense::Anticlockwise), 120.0);
/// assert_eq!(image_direction_deg(30.0, 0.0, Sense::Clockwise), 150.0);
/// ```
#[must_use]
pub fn image_direction_deg(rig_deg: f64, zero_deg: f64, sense: Sense) -> f64 {
    let turned = match sense {
        Sense::Anticlockwise => zero_deg + rig_deg,
        Sense::Clockwise => zero_deg - rig_deg,
    };
    axial(turned)
}

/// Where growth is expected: along the load axis while the stress presses, across it while it pulls,
/// nowhere without stress.
///
/// ```
/// use veerlog::load::expected_axis_deg;
/// assert_eq!(expected_axis_deg(100.0, 80.0), Some(100.0));
/// assert_eq!(expected_axis_deg(100.0, -80.0), Some(10.0));
/// assert_eq!(expected_axis_deg(100.0, 0.0), None);
/// ```
#[must_use]
pub fn expected_axis_deg(axis_deg: f64, stress_mpa: f64) -> Option<f64> {
    if stress_mpa > 0.0 {
        Some(axial(axis_deg))
    } else if stress_mpa < 0.0 {
        Some(axial(axis_deg + 90.0))
    } else {
        None
    }
}

/// Dose, MPa: stress · cos 2β, β the angle between the load axis and the plating edge at the root.
///
/// ```
/// use veerlog::load::dose_mpa;
/// assert!((dose_mpa(180.0, 90.0, 90.0) - 180.0).abs() < 1e-9); // along the plates
/// assert!((dose_mpa(180.0, 0.0, 90.0) + 180.0).abs() < 1e-9); // through them
/// ```
#[must_use]
pub fn dose_mpa(stress_mpa: f64, axis_deg: f64, edge_deg: f64) -> f64 {
    stress_mpa * libm::cos(2.0 * (axis_deg - edge_deg).to_radians())
}

/// Acute angle between two axes, degrees in [0, 90].
///
/// ```
/// assert_eq!(veerlog::load::acute_deg(170.0, 10.0), 20.0);
/// ```
#[must_use]
pub fn acute_deg(a_deg: f64, b_deg: f64) -> f64 {
    let apart = axial(a_deg - b_deg);
    apart.min(180.0 - apart)
}

/// Direction of a polyline at the place nearest to a point, degrees in [0, 180).
#[must_use]
pub fn edge_direction_deg(edge: &[[f64; 2]], px: [f64; 2]) -> Option<f64> {
    nearest_segment(edge, px).map(|ends| axial(normal_deg(ends[0], ends[1]) + 90.0))
}

/// Brings an angle into [0, 180).
fn axial(deg: f64) -> f64 {
    let turned = deg.rem_euclid(180.0);
    if turned < 180.0 { turned } else { 0.0 }
}

/// Direction of the normal of a segment, degrees in [0, 180). Image y runs down, directions count up.
fn normal_deg(from: [f64; 2], to: [f64; 2]) -> f64 {
    let along = libm::atan2(-(to[1] - from[1]), to[0] - from[0]).to_degrees();
    axial(along + 90.0)
}

/// Length-weighted axial mean of the normals, on doubled angles (Mardia & Jupp 2000, Directional Statistics, 1.2).
fn mean_normal_deg(edge: &[[f64; 2]]) -> Option<f64> {
    let (mut x, mut y) = (0.0, 0.0);
    for ends in edge.windows(2) {
        let doubled = 2.0 * normal_deg(ends[0], ends[1]).to_radians();
        let length = libm::hypot(ends[1][0] - ends[0][0], ends[1][1] - ends[0][1]);
        x += length * libm::cos(doubled);
        y += length * libm::sin(doubled);
    }
    (libm::hypot(x, y) > 0.0).then(|| axial(0.5 * libm::atan2(y, x).to_degrees()))
}

fn nearest_segment(edge: &[[f64; 2]], px: [f64; 2]) -> Option<&[[f64; 2]]> {
    let distance = |ends: &[[f64; 2]]| {
        let (dx, dy) = (ends[1][0] - ends[0][0], ends[1][1] - ends[0][1]);
        let (qx, qy) = (px[0] - ends[0][0], px[1] - ends[0][1]);
        let length2 = dx * dx + dy * dy;
        let share = if length2 > 0.0 { ((qx * dx + qy * dy) / length2).clamp(0.0, 1.0) } else { 0.0 };
        libm::hypot(qx - share * dx, qy - share * dy)
    };
    let long = |ends: &&[[f64; 2]]| libm::hypot(ends[1][0] - ends[0][0], ends[1][1] - ends[0][1]) > 0.0;
    edge.windows(2).filter(long).min_by(|a, b| distance(a).total_cmp(&distance(b)))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn through_the_plates_is_the_local_normal() {
        // Upright edge, then one that falls to the right at 45°.
        let rule = AxisRule::Through { plating_edge: vec![[40.0, 0.0], [40.0, 100.0], [140.0, 200.0]] };
        let near = |a: Option<f64>, b: f64| acute_deg(a.unwrap(), b) < 1e-9;
        assert!(near(rule.axis_deg(None, Some([60.0, 20.0])), 0.0));
        assert!(near(rule.axis_deg(None, Some([150.0, 140.0])), 45.0));
        let mean = rule.axis_deg(Some(77.0), None).unwrap();
        assert!(mean > 0.0 && mean < 45.0);
    }

    #[test]
    fn the_edge_runs_at_right_angles_to_its_normal() {
        assert!(acute_deg(edge_direction_deg(&[[40.0, 0.0], [40.0, 9.0]], [0.0, 0.0]).unwrap(), 90.0) < 1e-9);
        assert!(acute_deg(edge_direction_deg(&[[0.0, 0.0], [9.0, 9.0]], [0.0, 0.0]).unwrap(), 135.0) < 1e-9);
    }

    proptest::proptest! {
        #[test]
        fn directions_stay_axial(rig in -1e4..1e4_f64, zero in -400.0..400.0_f64) {
            for sense in [Sense::Anticlockwise, Sense::Clockwise] {
                let turned = image_direction_deg(rig, zero, sense);
                proptest::prop_assert!((0.0..180.0).contains(&turned));
                proptest::prop_assert!((0.0..=90.0).contains(&acute_deg(turned, rig)));
            }
        }
    }
}
