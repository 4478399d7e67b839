//! What fracture mechanics predicts for the direction of a pressurised crack under a logged load. A model, not a measurement.
//!
//! A straight through-crack of half-length a in a wide plate, inner pressure p, far stress σ along the load axis
//! (positive in compression): K_I = (p − σ_n)√(πa), K_II = τ√(πa) (Irwin 1957, J. Appl. Mech. 24, 361–364). The kink goes
//! where the hoop stress is largest (Erdogan & Sih 1963, J. Basic Eng. 85, 519–525), the T-stress included at a distance r
//! ahead (Cotterell & Rice 1980, Int. J. Fract. 16, 155–169). Inner pressure that plating could exert: F·η/V_m.
//! Limits: linear elastic, quasi-static, open crack; no prediction where K_I ≤ 0. Friction of closed faces is left out.

use super::angles::RADIANS;

/// Charge of a mole of electrons, C/mol: e·N_A, exact by definition of the SI (2019).
pub const FARADAY_C_PER_MOL: f64 = 96_485.332_123_31;
/// Molar volume of lithium at 20 °C, cm³/mol: 6.94 g/mol (IUPAC, abridged) over 0.534 g/cm³ (CRC Handbook, from memory).
pub const LITHIUM_CM3_PER_MOL: f64 = 6.94 / 0.534;

/// Pressure in MPa that an overpotential of `overpotential_mv` mV could exert at equilibrium: F·η/V_m. An upper bound.
///
/// ```
/// use veerlog::stats::kink::{pressure_of_overpotential, LITHIUM_CM3_PER_MOL};
/// assert!((pressure_of_overpotential(1.0, LITHIUM_CM3_PER_MOL) - 7.424).abs() < 1e-3);
/// ```
#[must_use]
pub fn pressure_of_overpotential(overpotential_mv: f64, molar_volume_cm3: f64) -> f64 {
    // mV·C/mol = mJ/mol; mJ/cm³ = 10⁻³ MPa.
    FARADAY_C_PER_MOL * overpotential_mv * 1e-3 / molar_volume_cm3
}

/// A crack and what acts on it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Crack {
    /// Pressure on its faces, MPa.
    pub pressure_mpa: f64,
    /// Far stress along the load axis, MPa, positive in compression.
    pub stress_mpa: f64,
    /// Turn from the crack's direction to the load axis, degrees, anticlockwise positive.
    pub load_from_crack_deg: f64,
    /// Half-length, µm.
    pub half_length_um: f64,
}

/// Intensities at the tip.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Intensity {
    /// Opening, MPa√m.
    pub k1: f64,
    /// In-plane shear, MPa√m.
    pub k2: f64,
    /// T-stress, MPa, positive in tension: far stress along the crack less far stress across it. Inner pressure adds the
    /// same to both and drops out.
    pub t_mpa: f64,
}

impl Crack {
    /// Stress intensities and T-stress of the crack.
    #[must_use]
    pub fn intensity(&self) -> Intensity {
        let (sin, cos) = libm::sincos(self.load_from_crack_deg * RADIANS);
        let root = libm::sqrt(std::f64::consts::PI * self.half_length_um * 1e-6);
        // Tension-positive far stress s = −stress along (cos, sin): normal s·sin², shear s·sin·cos, along s·cos².
        let tension = -self.stress_mpa;
        let normal = tension * sin * sin;
        Intensity {
            k1: (self.pressure_mpa + normal) * root,
            k2: tension * sin * cos * root,
            t_mpa: tension * cos * cos - normal,
        }
    }

    /// Kink of the crack by maximum tangential stress, the T-stress felt `distance_um` ahead of the tip (0: without it).
    /// `None` where K_I ≤ 0: a closed crack has no prediction.
    #[must_use]
    pub fn kink(&self, distance_um: f64) -> Option<Kink> {
        self.intensity().kink(distance_um)
    }
}

/// A predicted change of direction.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Kink {
    /// Turn from the crack's direction, degrees, anticlockwise positive.
    pub turn_deg: f64,
    /// Whether the opposite turn is as likely (no shear, but a T-stress large enough to leave the straight path).
    pub either_side: bool,
}

/// Turns looked at: hoop stress beyond this is that of the crack's own faces, degrees.
const WIDEST_TURN_DEG: f64 = 120.0;
/// Coarse steps over that range; the maximum is refined between neighbours.
const STEPS: i32 = 480;
/// Turns that differ by less are one, degrees.
const SAME_TURN_DEG: f64 = 1e-3;

impl Intensity {
    /// Hoop stress × √(2πr) at `turn_deg`, MPa√m, less what is the same at every turn.
    fn hoop(&self, turn_deg: f64, distance_um: f64) -> f64 {
        let turn = turn_deg * RADIANS;
        let half = libm::cos(0.5 * turn);
        let sin = libm::sin(turn);
        let ahead = libm::sqrt(std::f64::consts::TAU * distance_um * 1e-6);
        half * (self.k1 * half * half - 1.5 * self.k2 * sin) + self.t_mpa * sin * sin * ahead
    }

    /// The turn of largest hoop stress; `None` where K_I ≤ 0.
    #[must_use]
    pub fn kink(&self, distance_um: f64) -> Option<Kink> {
        if self.k1 <= 0.0 {
            return None;
        }
        let step = 2.0 * WIDEST_TURN_DEG / f64::from(STEPS);
        let best = |turns: &mut dyn Iterator<Item = f64>| {
            turns.fold((0.0, self.hoop(0.0, distance_um)), |best, turn| {
                let hoop = self.hoop(turn, distance_um);
                if hoop > best.1 { (turn, hoop) } else { best }
            })
        };
        let (coarse, _) = best(&mut (0..=STEPS).map(|i| f64::from(i) * step - WIDEST_TURN_DEG));
        let turn_deg = self.refine(coarse - step, coarse + step, distance_um);
        let mirrored = self.hoop(-turn_deg, distance_um);
        let height = self.hoop(turn_deg, distance_um);
        let either_side = turn_deg.abs() > SAME_TURN_DEG && (height - mirrored).abs() <= 1e-12 * height.abs();
        Some(Kink { turn_deg: if either_side { turn_deg.abs() } else { turn_deg }, either_side })
    }

    /// Maximum between two turns by golden section.
    fn refine(&self, mut low: f64, mut high: f64, distance_um: f64) -> f64 {
        let ratio = 0.5 * (libm::sqrt(5.0) - 1.0);
        while high - low > 1e-9 {
            let (left, right) = (high - ratio * (high - low), low + ratio * (high - low));
            if self.hoop(left, distance_um) >= self.hoop(right, distance_um) {
                high = right;
            } else {
                low = left;
            }
        }
        0.5 * (low + high)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::{assert_abs_diff_eq, assert_relative_eq};
    use proptest::prelude::*;

    fn crack(pressure: f64, stress: f64, load: f64) -> Crack {
        Crack { pressure_mpa: pressure, stress_mpa: stress, load_from_crack_deg: load, half_length_um: 1_000.0 }
    }

    #[test]
    fn tension_across_a_crack_is_irwins_k() {
        // 100 MPa, a = 1 mm: 5.604991 MPa√m (Irwin 1957).
        let i = crack(0.0, -100.0, 90.0).intensity();
        assert_relative_eq!(i.k1, 5.604_991, max_relative = 1e-6);
        assert_abs_diff_eq!(i.k2, 0.0, epsilon = 1e-9);
        assert_relative_eq!(i.t_mpa, -100.0, max_relative = 1e-12);
        assert_relative_eq!(crack(100.0, 0.0, 0.0).intensity().k1, 5.604_991, max_relative = 1e-6);
    }

    #[test]
    fn pure_shear_kinks_at_the_known_angle() {
        // Erdogan & Sih (1963): acos(1/3) = 70.5288°; K_I just above 0 stands for none.
        let shear = Intensity { k1: 1e-9, k2: 1.0, t_mpa: 0.0 };
        assert_abs_diff_eq!(shear.kink(0.0).unwrap().turn_deg, -70.528_779, epsilon = 1e-4);
    }

    #[test]
    fn closed_cracks_have_no_prediction() {
        assert_eq!(crack(50.0, 200.0, 90.0).kink(0.0), None);
        assert_eq!(crack(0.0, 0.0, 0.0).kink(0.0), None);
    }

    #[test]
    fn compression_turns_the_crack_along_itself() {
        let kink = crack(300.0, 150.0, 60.0).kink(0.0).unwrap();
        assert!(kink.turn_deg > 0.0 && kink.turn_deg < 60.0, "{kink:?}");
        let kink = crack(300.0, -150.0, 60.0).kink(0.0).unwrap();
        assert!(kink.turn_deg < 0.0, "{kink:?}");
    }

    #[test]
    fn t_stress_splits_the_straight_path_beyond_its_limit() {
        // Straight ahead is a maximum while (8/3)·T·√(2πr) < K_I (second derivative of the hoop stress at 0).
        let distance = 10.0;
        let limit = 3.0 / (8.0 * (std::f64::consts::TAU * distance * 1e-6).sqrt());
        let below = Intensity { k1: 1.0, k2: 0.0, t_mpa: 0.98 * limit }.kink(distance).unwrap();
        let above = Intensity { k1: 1.0, k2: 0.0, t_mpa: 1.05 * limit }.kink(distance).unwrap();
        assert_abs_diff_eq!(below.turn_deg, 0.0, epsilon = 1e-3);
        assert!(!below.either_side && above.either_side && above.turn_deg > 5.0, "{below:?} {above:?}");
    }

    proptest! {
        /// Erdogan & Sih's closed form: tan(θ/2) = (K_I − √(K_I² + 8K_II²))/(4K_II).
        #[test]
        fn agrees_with_the_closed_form(k1 in 0.05..2.0_f64, k2 in 0.05..2.0_f64, sign in prop::bool::ANY) {
            let k2 = if sign { k2 } else { -k2 };
            let closed = 2.0 * ((k1 - (k1 * k1 + 8.0 * k2 * k2).sqrt()) / (4.0 * k2)).atan() / RADIANS;
            let found = Intensity { k1, k2, t_mpa: 0.0 }.kink(0.0).unwrap().turn_deg;
            prop_assert!((closed - found).abs() < 1e-3, "{closed} {found}");
        }
    }
}
