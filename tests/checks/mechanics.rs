//! Mechanics: force to stress by the formulas of the standards, positive in compression on the compressed side.
//! Sources, from memory, with the arithmetic done apart: ASTM C1161 and ISO 14704 (three and four points), beam theory
//! (cantilever), ASTM C1499 (ring-on-ring), Stoney 1909 in its biaxial form, Timoshenko 1925.

#![expect(clippy::unwrap_used, reason = "a test that cannot go on must fail")]

use std::path::Path;

use approx::assert_relative_eq;
use veerlog::load::Fixture;
use veerlog::load::fixture::{Bimetal, Rings, ring_on_ring_mpa_per_n, stoney_mpa};
use veerlog::run::Manifest;

/// Stress of a fixture as `run.toml` gives it.
fn stress(load: &str, force_n: f64) -> f64 {
    let text = format!(
        "[frames]\nfiles = \"*.png\"\ninterval_s = 1\num_per_px = 1\nfilament = \"darker\"\nbare = 0\n\
         [cell]\nplating_edge = [[0, 0], [0, 9]]\nfar_edge = [[9, 0], [9, 9]]\n[load]\nforce_n = 1\n{load}"
    );
    let manifest = Manifest::parse(&text, Path::new("run")).unwrap();
    Fixture::new(&manifest).unwrap().stress_mpa(Some(force_n), None).unwrap()
}

#[test]
fn bending() {
    let bar = "span_mm = 40\nwidth_mm = 4\nthickness_mm = 3\nside = \"compressed\"";
    // ASTM C1161 / ISO 14704: 3FL/(2bh²) and 3FL/(4bh²).
    assert_relative_eq!(stress(&format!("fixture = \"three-point\"\n{bar}"), 500.0), 833.3333, max_relative = 1e-6);
    assert_relative_eq!(
        stress(&format!("fixture = \"four-point-quarter\"\n{bar}"), 500.0),
        416.6667,
        max_relative = 1e-6
    );
    // Beam theory: 6Fa/(bh²).
    let beam = "fixture = \"cantilever\"\narm_mm = 12\nwidth_mm = 4\nthickness_mm = 0.5\n";
    assert_relative_eq!(stress(&format!("{beam}side = \"compressed\""), 1.5), 108.0, max_relative = 1e-12);
    assert_relative_eq!(stress(&format!("{beam}side = \"stretched\""), 1.5), -108.0, max_relative = 1e-12);
}

#[test]
fn ring_on_ring() {
    // ASTM C1499.
    let rings = Rings { support_mm: 20.0, load_mm: 10.0, disc_mm: 25.0, thickness_mm: 2.0, poisson: 0.25 };
    assert_relative_eq!(1000.0 * ring_on_ring_mpa_per_n(rings), 124.908_85, max_relative = 1e-7);
    let toml = "fixture = \"ring-on-ring\"\nsupport_diameter_mm = 20\nload_diameter_mm = 10\ndisc_diameter_mm = 25\n\
                thickness_mm = 2\npoisson = 0.25\nside = \"stretched\"";
    assert_relative_eq!(stress(toml, 1000.0), -124.908_85, max_relative = 1e-7);
}

#[test]
fn film() {
    // Stoney 1909, biaxial: E·ts²/(6(1−ν)tf·R).
    assert_relative_eq!(stoney_mpa(130.0, 0.28, 0.5, 1.0, 10.0), 752.314_81, max_relative = 1e-8);
}

#[test]
fn bimetal_strip() {
    // Timoshenko 1925: equal layers bend by 1.5·Δα·ΔT/h.
    let equal = Bimetal { plate_mm: 1.0, plate_gpa: 70.0, strip_mm: 1.0, strip_gpa: 70.0, mismatch: 1e-5 * 50.0 };
    assert_relative_eq!(1e3 * equal.curvature_per_mm(), 0.375, max_relative = 1e-12);
    let stiff = Bimetal { plate_mm: 0.5, plate_gpa: 200.0, strip_mm: 0.5, strip_gpa: 100.0, mismatch: 5e-6 * 100.0 };
    assert_relative_eq!(1e3 * stiff.curvature_per_mm(), 0.727_272_7, max_relative = 1e-7);
    // Without outer forces the stresses of the plate and of the strip balance: the mean force in the plate,
    // from its linear stress, is opposite to that of the strip seen as a plate.
    let mean = |layers: Bimetal| {
        0.5 * (layers.plate_stress_mpa(0.0) + layers.plate_stress_mpa(layers.plate_mm)) * layers.plate_mm
    };
    let strip = Bimetal { plate_mm: 0.5, plate_gpa: 100.0, strip_mm: 0.5, strip_gpa: 200.0, mismatch: -stiff.mismatch };
    assert_relative_eq!(mean(stiff), -mean(strip), max_relative = 1e-9);
}
