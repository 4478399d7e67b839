//! Synthetic pictures with known lines, and textures without any.

use ndarray::Array2;
use rand::{RngExt, SeedableRng};

use super::find::{Found, find};
use super::section::section;
use crate::scene::plane::blur;

const SIDE: usize = 240;

/// White noise of unit standard deviation, blurred by `sigma` px and scaled back.
fn texture(seed: u64, sigma: f64) -> Array2<f32> {
    let mut rng = rand_chacha::ChaCha8Rng::seed_from_u64(seed);
    let white = Array2::from_shape_fn((SIDE, SIDE), |_| (0..12).map(|_| rng.random::<f32>()).sum::<f32>() - 6.0);
    let mut soft = blur(&white, sigma);
    let sd = (soft.iter().map(|v| v * v).sum::<f32>() / soft.len() as f32).sqrt();
    soft.mapv_inplace(|v| v / sd);
    soft
}

/// Adds a wavy line of full `width` px and the given height from (40, 60) to (200, 180).
fn with_line(mut plane: Array2<f32>, width: f64, height: f32) -> Array2<f32> {
    for ((row, column), value) in plane.indexed_iter_mut() {
        if distance_to_line(row as f64, column as f64) <= 0.5 * width {
            *value += height;
        }
    }
    plane
}

/// Distance to the line of [`with_line`].
fn distance_to_line(row: f64, column: f64) -> f64 {
    (0..=800)
        .map(|k| {
            let [x, y] = on_line(f64::from(k) / 800.0);
            (x - column).hypot(y - row)
        })
        .fold(f64::INFINITY, f64::min)
}

fn on_line(t: f64) -> [f64; 2] {
    [40.0 + 160.0 * t, 60.0 + 120.0 * t + 8.0 * (9.0 * t).sin()]
}

fn search(plane: &Array2<f32>) -> Found {
    find(plane, &Array2::from_elem(plane.dim(), true))
}

/// Share of the line within `near` px of the longest way, and share of that way within it of the line.
fn agreement(found: &Found, near: f64) -> [f64; 2] {
    let Some(group) = found.groups.first() else { return [0.0; 2] };
    let way = &group.longest.pixels;
    let met = (0..=200).filter(|&k| {
        let [x, y] = on_line(f64::from(k) / 200.0);
        way.iter().any(|p| (p[1] as f64 - x).hypot(p[0] as f64 - y) <= near)
    });
    let right = way.iter().filter(|p| distance_to_line(p[0] as f64, p[1] as f64) <= near);
    [met.count() as f64 / 201.0, right.count() as f64 / way.len() as f64]
}

#[test]
fn thin_and_wide_lines_are_found_whole() {
    for (width, height) in [(2.0, 4.0), (5.0, 3.0), (11.0, 3.0), (22.0, 3.0)] {
        let found = search(&with_line(texture(1, 0.7), width, height));
        // Within the ink, or a pixel beside it; the line may run on into the texture beyond its ends.
        let [met, right] = agreement(&found, 0.5 * width + 1.0);
        assert!(met > 0.85 && right > 0.5, "{width}: {met} {right}, {} groups", found.groups.len());
        assert!(found.groups.len() <= 2, "{width}: {} groups", found.groups.len());
    }
}

#[test]
fn texture_alone_gives_no_line() {
    for (seed, sigma) in [(1, 0.7), (2, 0.7), (3, 1.5), (4, 1.5), (5, 3.0), (6, 3.0)] {
        let found = search(&texture(seed, sigma));
        assert!(found.groups.is_empty(), "{seed}, {sigma}: {} groups", found.groups.len());
    }
}

#[test]
fn a_step_edge_is_no_line() {
    let mut plane = texture(7, 0.7);
    for ((row, column), value) in plane.indexed_iter_mut() {
        if row as f64 > 110.0 + 12.0 * (column as f64 / 25.0).sin() {
            *value += 8.0;
        }
    }
    assert!(search(&plane).groups.is_empty());
}

#[test]
fn a_straight_joint_from_border_to_border_is_left_out_and_a_line_beside_it_is_not() {
    let mut plane = with_line(texture(8, 0.7), 3.0, 3.0);
    for row in 0..SIDE {
        let column = 28 + row / 40;
        plane[[row, column]] += 9.0;
        plane[[row, column + 1]] += 9.0;
    }
    let found = search(&plane);
    let met = agreement(&found, 3.0)[0];
    assert!(met > 0.8, "{met}");
    let on_joint = |p: &[usize; 2]| p[1].abs_diff(28 + p[0] / 40) <= 3;
    let most = found.groups.iter().map(|g| g.longest.pixels.iter().filter(|p| on_joint(p)).count()).max();
    assert!(most < Some(30), "{most:?}");
}

#[test]
fn the_outline_of_a_pore_is_no_filament() {
    let mut plane = texture(9, 0.7);
    for ((row, column), value) in plane.indexed_iter_mut() {
        let r = (row as f64 - 120.0).hypot(column as f64 - 100.0);
        *value += if (r - 30.0).abs() <= 2.0 { 5.0 } else { 0.0 };
    }
    assert!(search(&plane).groups.is_empty());
}

#[test]
fn grain_boundaries_are_texture() {
    let mut rng = rand_chacha::ChaCha8Rng::seed_from_u64(10);
    let grains: Vec<[f64; 2]> =
        (0..250).map(|_| [rng.random::<f64>() * SIDE as f64, rng.random::<f64>() * SIDE as f64]).collect();
    let mut plane = texture(11, 0.7);
    for ((row, column), value) in plane.indexed_iter_mut() {
        let mut near: Vec<f64> = grains.iter().map(|g| (g[0] - row as f64).hypot(g[1] - column as f64)).collect();
        near.sort_by(f64::total_cmp);
        *value += if near[1] - near[0] < 2.0 { 4.0 } else { 0.0 };
    }
    assert!(search(&plane).groups.is_empty());
}

#[test]
fn a_mirrored_picture_gives_the_mirrored_line() {
    let plane = with_line(texture(12, 0.7), 4.0, 3.0);
    let mirrored = Array2::from_shape_fn(plane.dim(), |(row, column)| plane[[row, SIDE - 1 - column]]);
    let (a, b) = (search(&plane), search(&mirrored));
    let back: Vec<[usize; 2]> = b.groups[0].longest.pixels.iter().map(|p| [p[0], SIDE - 1 - p[1]]).collect();
    let close = |p: &[usize; 2]| back.iter().any(|q| p[0].abs_diff(q[0]) <= 1 && p[1].abs_diff(q[1]) <= 1);
    let way = &a.groups[0].longest.pixels;
    assert_eq!(a.groups.len(), b.groups.len());
    assert!(way.iter().filter(|p| close(p)).count() as f64 > 0.97 * way.len() as f64);
}

#[test]
fn centre_and_width_are_read_at_any_width() {
    for width in [3.0, 8.0, 20.0] {
        let plane = Array2::from_shape_fn((100, 100), |(_, x)| {
            let inside: f64 = 0.5 * width + 0.5 - (x as f64 - 50.3).abs();
            inside.clamp(0.0, 1.0) as f32
        });
        let found = section(&plane, [50.0, 50.0], [1.0, 0.0], 0.5 * width).unwrap();
        assert!((found.offset - 0.3).abs() < 0.2, "{width}: {found:?}");
        assert!((found.width - width).abs() < 0.6, "{width}: {found:?}");
    }
    assert_eq!(section(&Array2::zeros((40, 40)), [20.0, 20.0], [1.0, 0.0], 2.0), None);
}
