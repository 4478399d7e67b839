//! The `[load]` table of `run.toml`: which log or constant, which way its angles count, which fixture
//! turns force into stress, and that fixture's dimensions with their standard uncertainties.
//! The dimensions are listed once, in the macro call below; everything that walks over them uses
//! [`LoadSection::dimensions`].

use std::collections::BTreeMap;

use serde::{Deserialize, Serialize};

/// How long a log sample stays in force when no later one comes.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(untagged)]
pub enum Hold {
    /// At most so many seconds.
    Seconds(f64),
    /// For as long as no other sample comes: loggers that write changes only.
    Word(HoldWord),
}

/// The word that stands in place of a hold time.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum HoldWord {
    /// `"until-next"`.
    #[serde(rename = "until-next")]
    UntilNext,
}

/// Which way the rig's angles count in the picture as displayed.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Sense {
    /// Anticlockwise, like the image directions.
    #[default]
    Anticlockwise,
    /// Clockwise: a mirrored picture or rig.
    Clockwise,
}

/// The filmed face.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Side {
    /// Bending and ring-on-ring: the face in compression.
    Compressed,
    /// Bending and ring-on-ring: the face in tension.
    Stretched,
    /// Film: the face that carries the film.
    Coated,
    /// Film: the other face.
    Bare,
    /// Bimetal strip: the plate's outer face.
    Free,
    /// Bimetal strip: the plate's bonded face.
    Bonded,
}

/// How force becomes stress, by name.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum FixtureName {
    /// A given direction is kept, stress is absent.
    #[default]
    None,
    /// The log holds the stress.
    Stress,
    /// Force over area, along `direction_deg`.
    Uniaxial,
    /// Force over area, through the plates.
    Stack,
    /// A clamped beam.
    Cantilever,
    /// A beam on two supports, pressed in the middle.
    ThreePoint,
    /// A beam on two supports, pressed at its quarter points.
    FourPointQuarter,
    /// Along the viewing axis: stress, no axis in the picture.
    Normal,
    /// A disc pressed between two rings: equal in all directions.
    RingOnRing,
    /// A plate bent by a stressed film: equal in all directions.
    Film,
    /// A plate bonded to a strip that expands differently.
    Bimetal,
}

/// One dimension given for the fixture.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Dimension {
    /// Its key in `[load]`.
    pub name: &'static str,
    /// Its value, in the unit of the key.
    pub value: f64,
    /// Its standard uncertainty, 0 when none was given.
    pub u: f64,
}

macro_rules! load_section {
    ($($name:ident, $u:ident, $doc:literal;)*) => {
        /// `[load]` of `run.toml`.
        #[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
        #[serde(deny_unknown_fields, default)]
        pub struct LoadSection {
            /// The log file, from the run folder.
            pub log: Option<String>,
            /// Constant force in place of a log, N.
            pub force_n: Option<f64>,
            /// Constant stress in place of a log, MPa, positive in compression.
            pub stress_mpa: Option<f64>,
            /// Seconds to add to the log's clock.
            pub clock_offset_s: f64,
            /// How long a sample stays in force.
            pub hold_s: Option<Hold>,
            /// UTC offset of stamps that have none.
            pub utc_offset: Option<String>,
            /// The logger's own headings, by our column name.
            pub columns: BTreeMap<String, String>,
            /// Factors to our units, by our column name.
            pub scale: BTreeMap<String, f64>,
            /// Load direction on the rig where the log has no column for it, degrees.
            pub direction_deg: Option<f64>,
            /// Image direction of the rig's zero, degrees.
            pub zero_deg: f64,
            /// Which way the rig's angles count.
            pub sense: Sense,
            /// How force becomes stress.
            pub fixture: FixtureName,
            /// The filmed face.
            pub side: Option<Side>,
            /// Standard uncertainty of the force, N.
            pub u_force_n: Option<f64>,
            /// Standard uncertainty of a logged stress, MPa.
            pub u_stress_mpa: Option<f64>,
            /// Standard uncertainty of the load's direction, degrees.
            pub u_direction_deg: Option<f64>,
            $(
                #[doc = $doc]
                pub $name: Option<f64>,
                #[doc = concat!("Standard uncertainty of `", stringify!($name), "`.")]
                pub $u: Option<f64>,
            )*
        }

        impl LoadSection {
            /// The dimensions that were given, in a fixed order.
            #[must_use]
            pub fn dimensions(&self) -> Vec<Dimension> {
                let mut given = Vec::new();
                $(if let Some(value) = self.$name {
                    given.push(Dimension { name: stringify!($name), value, u: self.$u.unwrap_or(0.0) });
                })*
                given
            }

            /// The same section with one dimension moved by `by`; an unknown or absent one is left as it is.
            #[must_use]
            pub fn nudged(&self, name: &str, by: f64) -> Self {
                let mut moved = self.clone();
                match name {
                    $(stringify!($name) => moved.$name = moved.$name.map(|value| value + by),)*
                    _ => {}
                }
                moved
            }

            /// Uncertainties given for a dimension that was not: a likely slip.
            #[must_use]
            pub fn orphan_uncertainties(&self) -> Vec<&'static str> {
                let mut orphans = Vec::new();
                $(if self.$u.is_some() && self.$name.is_none() { orphans.push(stringify!($u)); })*
                orphans
            }

            /// Every uncertainty given, with its key.
            #[must_use]
            pub fn uncertainties(&self) -> Vec<(&'static str, f64)> {
                let mut given = Vec::new();
                for (name, u) in [("u_force_n", self.u_force_n), ("u_stress_mpa", self.u_stress_mpa), ("u_direction_deg", self.u_direction_deg)] {
                    given.extend(u.map(|u| (name, u)));
                }
                $(given.extend(self.$u.map(|u| (stringify!($u), u)));)*
                given
            }
        }
    };
}

load_section! {
    width_mm, u_width_mm, "Width of the beam, mm.";
    thickness_mm, u_thickness_mm, "Thickness of the plate, mm.";
    arm_mm, u_arm_mm, "Cantilever: from the load point to the filmed spot, mm.";
    span_mm, u_span_mm, "Three- and four-point: distance of the supports, mm.";
    area_mm2, u_area_mm2, "Uniaxial, stack, normal: loaded area, mm².";
    from_midspan_mm, u_from_midspan_mm, "Three- and four-point: from mid-span to the filmed spot, mm.";
    below_face_mm, u_below_face_mm, "Focus below the filmed face, mm.";
    support_diameter_mm, u_support_diameter_mm, "Ring-on-ring: support ring, mm.";
    load_diameter_mm, u_load_diameter_mm, "Ring-on-ring: load ring, mm.";
    disc_diameter_mm, u_disc_diameter_mm, "Ring-on-ring: the disc, mm.";
    poisson, u_poisson, "Poisson's ratio of the plate, 1.";
    modulus_gpa, u_modulus_gpa, "Young's modulus of the plate, GPa.";
    film_thickness_um, u_film_thickness_um, "Film: its thickness, µm.";
    film_stress_mpa, u_film_stress_mpa, "Film: its stress, MPa, tension positive (as the film trade signs it).";
    radius_m, u_radius_m, "Film: radius of the plate's curvature, m, positive when the film pulls.";
    strip_thickness_mm, u_strip_thickness_mm, "Bimetal: thickness of the bonded strip, mm.";
    strip_modulus_gpa, u_strip_modulus_gpa, "Bimetal: Young's modulus of the bonded strip, GPa.";
    expansion_difference_per_k, u_expansion_difference_per_k, "Bimetal: expansion of the strip less that of the plate, 1/K.";
    temperature_change_k, u_temperature_change_k, "Bimetal: temperature change since bonding, K.";
}
