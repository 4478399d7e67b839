//! How a fixture turns force into stress at the filmed spot, MPa, positive in compression.
//! Beams: elementary bending (as in ASTM C1161 and ISO 14704 for three and four points); ring-on-ring:
//! ASTM C1499; film: Stoney, Proc. R. Soc. A 82 (1909) 172, biaxial form; bimetal strip: Timoshenko,
//! J. Opt. Soc. Am. 11 (1925) 233. Linear elastic, small deflections; friction and stress
//! concentrations are left out. Stress falls linearly from the face to the middle of the plate.

use crate::run::{FixtureName, Manifest, ManifestError, Side};

/// A fixture with its dimensions. Lengths in mm unless named otherwise.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Fixture {
    /// No stress is known.
    None,
    /// The stress was logged.
    Stress,
    /// Force over area, MPa per N. Along the given direction, through the plates, or along the view.
    Uniaxial {
        /// Loaded area, mm².
        area_mm2: f64,
    },
    /// A bent beam: the stress at the face for a force of 1 N, and where in the beam the spot lies.
    Beam(Beam),
    /// A disc between two rings.
    RingOnRing {
        /// Stress at the face inside the load ring for 1 N, MPa.
        mpa_per_n: f64,
        /// Sign and share of it at the spot.
        share: f64,
    },
    /// A stress that depends on no force: film and bimetal strip.
    Fixed {
        /// The stress at the spot, MPa, positive in compression.
        stress_mpa: f64,
    },
}

/// The place of the filmed spot in a bent beam.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Beam {
    /// Stress at the face where the moment is largest (at the spot for a cantilever), MPa per N.
    pub mpa_per_n: f64,
    /// Share of the moment at the spot, 0 to 1.
    pub moment_share: f64,
    /// Change of that share along the beam, 1/mm.
    pub moment_share_per_mm: f64,
    /// +1 on the compressed face, −1 on the stretched, falling linearly below the face.
    pub face_share: f64,
}

impl Fixture {
    /// Builds the fixture that `[load]` names from its dimensions.
    ///
    /// # Errors
    /// [`ManifestError`] names the dimension that is missing or cannot be, and its line.
    pub fn new(manifest: &Manifest) -> Result<Self, ManifestError> {
        let needs = Needs { manifest };
        let fixture = match manifest.load.fixture {
            FixtureName::None => Self::None,
            FixtureName::Stress => Self::Stress,
            FixtureName::Uniaxial | FixtureName::Stack => needs.uniaxial()?,
            FixtureName::Normal if manifest.load.area_mm2.is_none() => Self::Stress,
            FixtureName::Normal => needs.uniaxial()?,
            FixtureName::Cantilever => needs.cantilever()?,
            FixtureName::ThreePoint => needs.three_point()?,
            FixtureName::FourPointQuarter => needs.four_point()?,
            FixtureName::RingOnRing => needs.ring_on_ring()?,
            FixtureName::Film => needs.film()?,
            FixtureName::Bimetal => needs.bimetal()?,
        };
        Ok(fixture)
    }

    /// Stress at the filmed spot, MPa, positive in compression; absent where the force is needed and absent.
    /// `logged_mpa`: the stress of the log, used by [`Fixture::Stress`] alone.
    #[must_use]
    pub fn stress_mpa(&self, force_n: Option<f64>, logged_mpa: Option<f64>) -> Option<f64> {
        match *self {
            Self::None => None,
            Self::Stress => logged_mpa,
            Self::Fixed { stress_mpa } => Some(stress_mpa),
            Self::Uniaxial { area_mm2 } => Some(force_n? / area_mm2),
            Self::Beam(beam) => Some(force_n? * beam.mpa_per_n * beam.moment_share * beam.face_share),
            Self::RingOnRing { mpa_per_n, share } => Some(force_n? * mpa_per_n * share),
        }
    }

    /// Relative change of the stress over `view_mm` along the beam; 0 where the stress is even.
    #[must_use]
    pub fn variation(&self, view_mm: f64) -> f64 {
        match *self {
            Self::Beam(beam) if beam.moment_share > 0.0 => beam.moment_share_per_mm.abs() * view_mm / beam.moment_share,
            _ => 0.0,
        }
    }
}

/// Face stress of a beam that carries a force, three-point, MPa per N: 3L/(2bh²).
///
/// ```
/// let mpa = 500.0 * veerlog::load::fixture::three_point_mpa_per_n(40.0, 4.0, 3.0);
/// assert!((mpa - 833.3333).abs() < 1e-4);
/// ```
#[must_use]
pub fn three_point_mpa_per_n(span_mm: f64, width_mm: f64, thickness_mm: f64) -> f64 {
    3.0 * span_mm / (2.0 * width_mm * thickness_mm * thickness_mm)
}

/// Face stress between the inner rollers, four-point at quarter points, MPa per N: 3L/(4bh²).
#[must_use]
pub fn four_point_quarter_mpa_per_n(span_mm: f64, width_mm: f64, thickness_mm: f64) -> f64 {
    0.5 * three_point_mpa_per_n(span_mm, width_mm, thickness_mm)
}

/// Face stress of a cantilever at `arm_mm` from the load, MPa per N: 6a/(bh²).
#[must_use]
pub fn cantilever_mpa_per_n(arm_mm: f64, width_mm: f64, thickness_mm: f64) -> f64 {
    6.0 * arm_mm / (width_mm * thickness_mm * thickness_mm)
}

/// Rings and disc of a ring-on-ring test, mm.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Rings {
    /// Support ring, diameter.
    pub support_mm: f64,
    /// Load ring, diameter.
    pub load_mm: f64,
    /// Disc, diameter.
    pub disc_mm: f64,
    /// Disc, thickness.
    pub thickness_mm: f64,
    /// Poisson's ratio.
    pub poisson: f64,
}

/// Equibiaxial face stress inside the load ring, MPa per N (ASTM C1499).
#[must_use]
pub fn ring_on_ring_mpa_per_n(rings: Rings) -> f64 {
    let Rings { support_mm, load_mm, disc_mm, thickness_mm, poisson } = rings;
    let spread = (1.0 - poisson) * (support_mm.powi(2) - load_mm.powi(2)) / (2.0 * disc_mm.powi(2));
    let ring = (1.0 + poisson) * libm::log(support_mm / load_mm);
    3.0 / (2.0 * std::f64::consts::PI * thickness_mm.powi(2)) * (spread + ring)
}

/// Stress of a thin film from the curvature of its plate, MPa, tension positive (Stoney 1909, biaxial).
///
/// ```
/// let mpa = veerlog::load::fixture::stoney_mpa(130.0, 0.28, 0.5, 1.0, 10.0);
/// assert!((mpa - 752.31481).abs() < 1e-5);
/// ```
#[must_use]
pub fn stoney_mpa(modulus_gpa: f64, poisson: f64, plate_mm: f64, film_um: f64, radius_m: f64) -> f64 {
    let plate_m = plate_mm * 1e-3;
    1e3 * modulus_gpa * plate_m * plate_m / (6.0 * (1.0 - poisson) * film_um * 1e-6 * radius_m)
}

/// The two layers of a bimetal strip: the plate and the strip bonded to it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Bimetal {
    /// Thickness of the plate, mm.
    pub plate_mm: f64,
    /// Young's modulus of the plate, GPa.
    pub plate_gpa: f64,
    /// Thickness of the strip, mm.
    pub strip_mm: f64,
    /// Young's modulus of the strip, GPa.
    pub strip_gpa: f64,
    /// Free expansion of the strip less that of the plate, Δα·ΔT.
    pub mismatch: f64,
}

impl Bimetal {
    /// Curvature, 1/mm, positive when the plate lies on the inner side (Timoshenko 1925, eq. 4).
    #[must_use]
    pub fn curvature_per_mm(&self) -> f64 {
        let m = self.plate_mm / self.strip_mm;
        let n = self.plate_gpa / self.strip_gpa;
        let height = self.plate_mm + self.strip_mm;
        let stiffness = 3.0 * (1.0 + m).powi(2) + (1.0 + m * n) * (m * m + 1.0 / (m * n));
        6.0 * self.mismatch * (1.0 + m).powi(2) / (height * stiffness)
    }

    /// Stress in the plate, MPa, positive in compression, `from_bond_mm` off the bonded face:
    /// the mean strain that the pair of forces makes, and bending about the plate's middle.
    #[must_use]
    pub fn plate_stress_mpa(&self, from_bond_mm: f64) -> f64 {
        let curvature = self.curvature_per_mm();
        let rigidity = |gpa: f64, mm: f64| gpa * mm.powi(3) / 12.0;
        let moments = (rigidity(self.plate_gpa, self.plate_mm) + rigidity(self.strip_gpa, self.strip_mm)) * curvature;
        let height = self.plate_mm + self.strip_mm;
        let mean_tension_gpa = 2.0 * moments / (height * self.plate_mm);
        let bending_tension_gpa = self.plate_gpa * curvature * (0.5 * self.plate_mm - from_bond_mm);
        -1e3 * (mean_tension_gpa + bending_tension_gpa)
    }
}

/// Asks the manifest for dimensions and complains about those missing.
struct Needs<'a> {
    manifest: &'a Manifest,
}

impl Needs<'_> {
    fn size(&self, name: &str, value: Option<f64>) -> Result<f64, ManifestError> {
        value.ok_or_else(|| {
            let fixture = serde_json::to_value(self.manifest.load.fixture).unwrap_or_default();
            let example = crate::run::KEYS
                .iter()
                .find(|key| key.section == "load" && key.name == name)
                .map_or("…", |key| key.example);
            self.fault(
                format!("the fixture {fixture} needs {name}"),
                format!("add the line {name} = {example} to [load]"),
            )
        })
    }

    fn fault(&self, what: String, help: impl Into<String>) -> ManifestError {
        self.manifest.fault("load", "fixture", what, help)
    }

    fn force(&self) -> Result<(), ManifestError> {
        let load = &self.manifest.load;
        if load.stress_mpa.is_some() {
            return Err(self.fault(
                "this fixture turns force into stress, but stress_mpa is given".to_owned(),
                "type fixture = \"stress\" to take stress_mpa as it is, or give force_n",
            ));
        }
        Ok(())
    }

    /// The side, which must be one of two; the first gives +1, the second −1.
    fn side(&self, first: Side, second: Side) -> Result<f64, ManifestError> {
        match self.manifest.load.side {
            Some(side) if side == first => Ok(1.0),
            Some(side) if side == second => Ok(-1.0),
            other => {
                let name = |side: Side| serde_json::to_value(side).unwrap_or_default();
                let what = match other {
                    None => "the fixture needs side, the filmed face".to_owned(),
                    Some(side) => format!("side = {} does not fit this fixture", name(side)),
                };
                Err(self.fault(what, format!("type side = {} or side = {}", name(first), name(second))))
            }
        }
    }

    /// Share of the face stress at the focus: 1 at the face, 0 in the middle, −1 at the other face.
    fn below(&self, thickness_mm: f64) -> Result<f64, ManifestError> {
        let below = self.manifest.load.below_face_mm.unwrap_or(0.0);
        if below > thickness_mm {
            let what = format!("below_face_mm = {below} lies below the plate, which is {thickness_mm} mm thick");
            return Err(self.manifest.fault(
                "load",
                "below_face_mm",
                what,
                "give the depth of focus below the filmed face",
            ));
        }
        Ok(1.0 - 2.0 * below / thickness_mm)
    }

    fn uniaxial(&self) -> Result<Fixture, ManifestError> {
        self.force()?;
        Ok(Fixture::Uniaxial { area_mm2: self.size("area_mm2", self.manifest.load.area_mm2)? })
    }

    /// Width, thickness and the share of the face stress.
    fn beam(&self) -> Result<(f64, f64, f64), ManifestError> {
        self.force()?;
        let load = &self.manifest.load;
        let width = self.size("width_mm", load.width_mm)?;
        let thickness = self.size("thickness_mm", load.thickness_mm)?;
        let side = self.side(Side::Compressed, Side::Stretched)?;
        Ok((width, thickness, side * self.below(thickness)?))
    }

    fn cantilever(&self) -> Result<Fixture, ManifestError> {
        let (width, thickness, face_share) = self.beam()?;
        let arm = self.size("arm_mm", self.manifest.load.arm_mm)?;
        Ok(Fixture::Beam(Beam {
            mpa_per_n: cantilever_mpa_per_n(arm, width, thickness),
            moment_share: 1.0,
            moment_share_per_mm: 1.0 / arm,
            face_share,
        }))
    }

    /// Span and the distance from mid-span, which must lie between the supports.
    fn span(&self) -> Result<(f64, f64), ManifestError> {
        let span = self.size("span_mm", self.manifest.load.span_mm)?;
        let off = self.manifest.load.from_midspan_mm.unwrap_or(0.0);
        if off >= 0.5 * span {
            let what = format!("from_midspan_mm = {off} lies outside the supports, which are {span} mm apart");
            return Err(self.manifest.fault(
                "load",
                "from_midspan_mm",
                what,
                "give the distance from the middle between the supports",
            ));
        }
        Ok((span, off))
    }

    fn three_point(&self) -> Result<Fixture, ManifestError> {
        let (width, thickness, face_share) = self.beam()?;
        let (span, off) = self.span()?;
        Ok(Fixture::Beam(Beam {
            mpa_per_n: three_point_mpa_per_n(span, width, thickness),
            moment_share: 1.0 - 2.0 * off / span,
            moment_share_per_mm: 2.0 / span,
            face_share,
        }))
    }

    fn four_point(&self) -> Result<Fixture, ManifestError> {
        let (width, thickness, face_share) = self.beam()?;
        let (span, off) = self.span()?;
        // Even between the inner rollers, then falling to nothing at the supports.
        let outside = off > 0.25 * span;
        Ok(Fixture::Beam(Beam {
            mpa_per_n: four_point_quarter_mpa_per_n(span, width, thickness),
            moment_share: if outside { 2.0 - 4.0 * off / span } else { 1.0 },
            moment_share_per_mm: if outside { 4.0 / span } else { 0.0 },
            face_share,
        }))
    }

    fn ring_on_ring(&self) -> Result<Fixture, ManifestError> {
        self.force()?;
        let load = &self.manifest.load;
        let rings = Rings {
            support_mm: self.size("support_diameter_mm", load.support_diameter_mm)?,
            load_mm: self.size("load_diameter_mm", load.load_diameter_mm)?,
            disc_mm: self.size("disc_diameter_mm", load.disc_diameter_mm)?,
            thickness_mm: self.size("thickness_mm", load.thickness_mm)?,
            poisson: self.poisson()?,
        };
        if rings.load_mm >= rings.support_mm || rings.support_mm > rings.disc_mm {
            return Err(self.fault(
                "the load ring must be smaller than the support ring, and that not larger than the disc".to_owned(),
                "correct load_diameter_mm, support_diameter_mm or disc_diameter_mm",
            ));
        }
        let share = self.side(Side::Compressed, Side::Stretched)? * self.below(rings.thickness_mm)?;
        Ok(Fixture::RingOnRing { mpa_per_n: ring_on_ring_mpa_per_n(rings), share })
    }

    fn poisson(&self) -> Result<f64, ManifestError> {
        let poisson = self.size("poisson", self.manifest.load.poisson)?;
        if poisson <= 0.5 {
            return Ok(poisson);
        }
        Err(self.manifest.fault(
            "load",
            "poisson",
            format!("poisson = {poisson} is above 0.5"),
            "type Poisson's ratio, say poisson = 0.25",
        ))
    }

    /// The plate under its film: −4σt/h at the coated face and +2σt/h at the other, tension positive,
    /// linear in between; σ from the film's own stress or from the curvature.
    fn film(&self) -> Result<Fixture, ManifestError> {
        let load = &self.manifest.load;
        let plate = self.size("thickness_mm", load.thickness_mm)?;
        let force_per_width_over_plate = match (load.film_stress_mpa, load.radius_m) {
            (Some(stress), None) => stress * self.size("film_thickness_um", load.film_thickness_um)? * 1e-3 / plate,
            (None, Some(radius)) if radius.abs() > 0.0 => {
                // The film's thickness cancels.
                let film_um = 1.0;
                let modulus = self.size("modulus_gpa", load.modulus_gpa)?;
                stoney_mpa(modulus, self.poisson()?, plate, film_um, radius) * film_um * 1e-3 / plate
            }
            (Some(_), Some(_)) => {
                return Err(self.fault(
                    "both film_stress_mpa and radius_m are given".to_owned(),
                    "keep the one that was measured",
                ));
            }
            _ => {
                return Err(self.fault(
                    "the fixture \"film\" needs film_stress_mpa or radius_m".to_owned(),
                    "add film_stress_mpa and film_thickness_um, or radius_m with modulus_gpa and poisson",
                ));
            }
        };
        let below = 0.5 * (1.0 - self.below(plate)?);
        let from_coated = if self.side(Side::Coated, Side::Bare)? > 0.0 { below } else { 1.0 - below };
        Ok(Fixture::Fixed { stress_mpa: force_per_width_over_plate * (4.0 - 6.0 * from_coated) })
    }

    fn bimetal(&self) -> Result<Fixture, ManifestError> {
        let load = &self.manifest.load;
        let layers = Bimetal {
            plate_mm: self.size("thickness_mm", load.thickness_mm)?,
            plate_gpa: self.size("modulus_gpa", load.modulus_gpa)?,
            strip_mm: self.size("strip_thickness_mm", load.strip_thickness_mm)?,
            strip_gpa: self.size("strip_modulus_gpa", load.strip_modulus_gpa)?,
            mismatch: self.size("expansion_difference_per_k", load.expansion_difference_per_k)?
                * self.size("temperature_change_k", load.temperature_change_k)?,
        };
        let below_mm = 0.5 * (1.0 - self.below(layers.plate_mm)?) * layers.plate_mm;
        let bonded = self.side(Side::Bonded, Side::Free)? > 0.0;
        let from_bond_mm = if bonded { below_mm } else { layers.plate_mm - below_mm };
        Ok(Fixture::Fixed { stress_mpa: layers.plate_stress_mpa(from_bond_mm) })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn manifest(load: &str) -> Manifest {
        let text = format!(
            "[frames]\nfiles = \"*.png\"\ninterval_s = 1\num_per_px = 1\nfilament = \"darker\"\nbare = 0\n\
             [cell]\nplating_edge = [[0, 0], [0, 9]]\nfar_edge = [[9, 0], [9, 9]]\n[load]\n{load}"
        );
        Manifest::parse(&text, std::path::Path::new("ridge")).unwrap()
    }

    fn stress(load: &str, force: f64) -> f64 {
        Fixture::new(&manifest(load)).unwrap().stress_mpa(Some(force), None).unwrap()
    }

    const BEAM: &str = "force_n = 1\nfixture = \"three-point\"\nwidth_mm = 4\nthickness_mm = 3\nspan_mm = 40\n";

    #[test]
    fn faces_have_their_signs_and_the_stress_falls_through_the_plate() {
        let face = stress(&format!("{BEAM}side = \"compressed\""), 500.0);
        assert!((face - 833.333_333_333).abs() < 1e-6);
        assert!((stress(&format!("{BEAM}side = \"stretched\""), 500.0) + face).abs() < 1e-9);
        let below = |mm: f64| stress(&format!("{BEAM}side = \"compressed\"\nbelow_face_mm = {mm}"), 500.0);
        assert!((below(1.5)).abs() < 1e-9);
        assert!((below(3.0) + face).abs() < 1e-9);
        assert!((below(0.75) - 0.5 * face).abs() < 1e-9);
    }

    #[test]
    fn the_moment_falls_off_mid_span() {
        let at = |name: &str, mm: f64| {
            let text = BEAM.replace("three-point", name);
            stress(&format!("{text}side = \"compressed\"\nfrom_midspan_mm = {mm}"), 1.0)
                / stress(&format!("{text}side = \"compressed\""), 1.0)
        };
        assert!((at("three-point", 10.0) - 0.5).abs() < 1e-12);
        assert!((at("four-point-quarter", 9.0) - 1.0).abs() < 1e-12);
        assert!((at("four-point-quarter", 15.0) - 0.5).abs() < 1e-12);
        assert!(Fixture::new(&manifest(&format!("{BEAM}side = \"compressed\"\nfrom_midspan_mm = 20"))).is_err());
    }

    #[test]
    fn film_and_bimetal_balance() {
        // A film in tension presses the coated face and stretches the other (half as much).
        let film = "fixture = \"film\"\nthickness_mm = 0.5\nfilm_thickness_um = 1\nfilm_stress_mpa = 500\n";
        assert!((stress(&format!("{film}side = \"coated\""), 0.0) - 4.0).abs() < 1e-12);
        assert!((stress(&format!("{film}side = \"bare\""), 0.0) + 2.0).abs() < 1e-12);
        let bent = "fixture = \"film\"\nthickness_mm = 0.5\nmodulus_gpa = 130\npoisson = 0.28\nradius_m = 10\nside = \"coated\"";
        assert!((stress(bent, 0.0) - 4.0 * 752.314_814_8 * 1e-3 / 0.5).abs() < 1e-6);
        // Equal layers: the bonded face carries 2/3 Etκ, the free one −1/3 Etκ (tension positive).
        let equal = Bimetal { plate_mm: 1.0, plate_gpa: 100.0, strip_mm: 1.0, strip_gpa: 100.0, mismatch: 5e-4 };
        let etk = 1e3 * 100.0 * equal.curvature_per_mm();
        assert!((equal.plate_stress_mpa(0.0) + 2.0 / 3.0 * etk).abs() < 1e-9);
        assert!((equal.plate_stress_mpa(1.0) - 1.0 / 3.0 * etk).abs() < 1e-9);
    }

    #[test]
    fn missing_and_impossible_dimensions_are_named() {
        for (load, what) in [
            (
                "force_n = 1\nfixture = \"cantilever\"\nwidth_mm = 4\nthickness_mm = 1\nside = \"compressed\"",
                "needs arm_mm",
            ),
            (BEAM, "needs side"),
            (&format!("{BEAM}side = \"coated\"") as &str, "does not fit"),
            (&format!("{BEAM}side = \"stretched\"\nbelow_face_mm = 4"), "lies below the plate"),
            ("stress_mpa = 1\nfixture = \"uniaxial\"\narea_mm2 = 1", "turns force into stress"),
            ("force_n = 1\nfixture = \"stack\"", "needs area_mm2"),
            ("fixture = \"film\"\nthickness_mm = 1", "needs film_stress_mpa or radius_m"),
        ] {
            let error = Fixture::new(&manifest(load)).unwrap_err();
            assert!(error.what.contains(what), "{}", error.what);
        }
    }

    #[test]
    fn variation_over_the_view() {
        let beam = Fixture::new(&manifest(&format!("{BEAM}side = \"compressed\""))).unwrap();
        assert!((beam.variation(1.0) - 0.05).abs() < 1e-12);
        assert!(Fixture::Stress.variation(1.0) <= 0.0);
    }
}
