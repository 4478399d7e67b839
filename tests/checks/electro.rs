//! Electrochemistry: Faraday's constant and what charge becomes as lithium.
//! Sources: CODATA 2018 and 2022 (exact values of the SI) for F; IUPAC abridged atomic weight 6.94 and the density
//! 0.534 g/cm³ of the CRC Handbook (from memory) for what follows from them by arithmetic.

#![expect(clippy::unwrap_used, reason = "a test that cannot go on must fail")]

use approx::assert_relative_eq;
use veerlog::measure::{C_PER_MAH, FARADAY_C_PER_MOL, Metal};

fn lithium() -> Metal {
    Metal::of("Li").unwrap()
}

#[test]
fn faraday_constant() {
    // CODATA: 96485.33212331… C/mol, exact by definition.
    assert_relative_eq!(FARADAY_C_PER_MOL, 96_485.332_123_31, max_relative = 1e-12);
}

#[test]
fn capacities_of_lithium() {
    assert_relative_eq!(lithium().capacity_mah_per_g(), 3861.885, max_relative = 1e-6);
    assert_relative_eq!(lithium().capacity_mah_per_g() * lithium().g_per_cm3, 2062.247, max_relative = 1e-6);
    let heavier = Metal { g_per_mol: 6.941, ..lithium() };
    assert_relative_eq!(heavier.capacity_mah_per_g(), 3861.33, max_relative = 1e-6);
}

#[test]
fn a_milliampere_for_an_hour() {
    assert_relative_eq!(C_PER_MAH / FARADAY_C_PER_MOL * 1e6, 37.311_371, max_relative = 1e-7);
    assert_relative_eq!(lithium().mass_mg(1.0), 0.258_940_9, max_relative = 1e-6);
    assert_relative_eq!(lithium().thickness_um(1.0), 4.849_081, max_relative = 1e-6);
    assert_relative_eq!(lithium().volume_um3(2.0), 2.0 * 4.849_081e8, max_relative = 1e-6);
}

#[test]
fn pressure_of_an_overpotential() {
    assert_relative_eq!(lithium().molar_volume_cm3(), 12.996_255, max_relative = 1e-7);
    assert_relative_eq!(lithium().pressure_mpa(1.0), 7.424_088, max_relative = 1e-6);
}
