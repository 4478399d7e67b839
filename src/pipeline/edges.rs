//! The electrode edges of a manifest as the tracer takes them, or why they cannot be an anode and a cathode: a single
//! point, a place no picture reaches, no gap between them.

use crate::Error;
use crate::run::Manifest;
use crate::trace::edges::{Edges, Polyline};

/// Farthest a point may lie from the picture's corner, px: far outside is allowed, but there products of coordinates must keep
/// their pixels (an `f64` holds whole numbers to 9e15; common practice).
const FARTHEST_PX: f64 = 1e12;

/// The two edges of a manifest, in pixels.
///
/// # Errors
/// A fault of `run.toml` that names the edge and what to type.
pub(super) fn edges_of(manifest: &Manifest) -> Result<Edges, Error> {
    let plating = line(manifest, "plating_edge", &manifest.cell.plating_edge)?;
    let far = line(manifest, "far_edge", &manifest.cell.far_edge)?;
    let meet = cross(plating.points(), far.points());
    let edges = Edges::new(plating, far);
    if meet || edges.gap() <= 0.0 {
        let what = "far_edge touches or crosses plating_edge: there is no gap for a filament to cross";
        let help = "draw both edges with `veerlog check RUN --picture edges.png`, then correct the points of one, [[x, y], [x, y]]";
        return Err(manifest.fault("cell", "far_edge", what, help).into());
    }
    Ok(edges)
}

fn line(manifest: &Manifest, key: &str, points: &[[f64; 2]]) -> Result<Polyline, Error> {
    if let Some(far) = points.iter().flatten().find(|value| value.abs() > FARTHEST_PX) {
        let what = format!("{key} holds {far:e} px, which no picture reaches (at most {FARTHEST_PX:e})");
        return Err(manifest.fault("cell", key, what, "type pixels of the picture, x right, y down").into());
    }
    Polyline::new(points.to_vec()).ok_or_else(|| {
        let what = format!("{key} is a single point");
        let help = "type at least two different points, [[x, y], [x, y]], in pixels";
        manifest.fault("cell", key, what, help).into()
    })
}

/// Whether a segment of one polyline crosses one of the other: each has the ends of the other on both sides of it.
fn cross(one: &[[f64; 2]], other: &[[f64; 2]]) -> bool {
    let side = |a: [f64; 2], b: [f64; 2], p: [f64; 2]| (b[0] - a[0]) * (p[1] - a[1]) - (b[1] - a[1]) * (p[0] - a[0]);
    let parted = |a, b, p, q| side(a, b, p) * side(a, b, q) < 0.0;
    one.windows(2).any(|s| other.windows(2).any(|t| parted(s[0], s[1], t[0], t[1]) && parted(t[0], t[1], s[0], s[1])))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn crossing_is_told_from_standing_apart_and_from_pointing_at() {
        let upright = [[8.0, 0.0], [8.0, 39.0]];
        assert!(cross(&upright, &[[0.0, 20.0], [63.0, 21.0]]));
        assert!(!cross(&upright, &[[55.0, 0.0], [55.0, 39.0]]));
        assert!(!cross(&upright, &[[9.0, 20.0], [63.0, 21.0]]));
        assert!(cross(&[[0.0, 0.0], [4.0, 9.0], [8.0, 0.0]], &[[0.0, 5.0], [9.0, 5.0]]));
    }
}
