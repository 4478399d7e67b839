//! Every key of `run.toml` with an example of what to type: the one list behind the help of an error
//! and the search for the nearest known key. A test parses every example, so the list cannot drift
//! away from the types.

/// One key of `run.toml`.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Key {
    /// Its table; empty for the top level.
    pub section: &'static str,
    /// Its name.
    pub name: &'static str,
    /// An example value as TOML.
    pub example: &'static str,
}

const fn key(section: &'static str, name: &'static str, example: &'static str) -> Key {
    Key { section, name, example }
}

/// All keys, in the order of the file.
pub static KEYS: &[Key] = &[
    key("", "run", "\"ridge-03\""),
    key("", "specimen", "\"disc B\""),
    key("", "note", "\"second bend\""),
    key("frames", "files", "\"frames/*.png\""),
    key("frames", "interval_s", "10.0"),
    key("frames", "times", "\"times.csv\""),
    key("frames", "by_number", "true"),
    key("frames", "start", "\"2026-03-05T10:00:00\""),
    key("frames", "utc_offset", "\"+01:00\""),
    key("frames", "um_per_px", "1.25"),
    key("frames", "filament", "\"darker\""),
    key("frames", "bare", "6"),
    key("cell", "plating_edge", "[[40, 0], [40, 767]]"),
    key("cell", "far_edge", "[[984, 0], [984, 767]]"),
    key("cell", "log", "\"cell.csv\""),
    key("cell", "clock_offset_s", "0.0"),
    key("cell", "hold_s", "60.0"),
    key("cell", "utc_offset", "\"+01:00\""),
    key("cell", "columns", "{ time_s = \"Zeit (s)\", current_ma = \"I/mA\" }"),
    key("cell", "scale", "{ current_ma = 1000.0 }"),
    key("cell", "area_mm2", "3.2"),
    key("cell", "view_depth_mm", "0.4"),
    key("cell", "metal", "\"Li\""),
    key("cell", "temperature_c", "25.0"),
    key("cell", "ended", "\"short\""),
    key("load", "log", "\"load.csv\""),
    key("load", "force_n", "1.5"),
    key("load", "stress_mpa", "150.0"),
    key("load", "clock_offset_s", "0.0"),
    key("load", "hold_s", "\"until-next\""),
    key("load", "utc_offset", "\"+01:00\""),
    key("load", "columns", "{ time_s = \"Zeit (min)\", force_n = \"Kraft [kN]\" }"),
    key("load", "scale", "{ time_s = 60.0, force_n = 1000.0 }"),
    key("load", "direction_deg", "90.0"),
    key("load", "zero_deg", "0.0"),
    key("load", "sense", "\"anticlockwise\""),
    key("load", "fixture", "\"cantilever\""),
    key("load", "side", "\"compressed\""),
    key("load", "u_force_n", "0.02"),
    key("load", "u_stress_mpa", "5.0"),
    key("load", "u_direction_deg", "1.0"),
    key("load", "width_mm", "4.0"),
    key("load", "thickness_mm", "0.5"),
    key("load", "arm_mm", "12.0"),
    key("load", "span_mm", "20.0"),
    key("load", "area_mm2", "3.2"),
    key("load", "from_midspan_mm", "0.5"),
    key("load", "below_face_mm", "0.05"),
    key("load", "support_diameter_mm", "20.0"),
    key("load", "load_diameter_mm", "10.0"),
    key("load", "disc_diameter_mm", "25.0"),
    key("load", "poisson", "0.25"),
    key("load", "modulus_gpa", "150.0"),
    key("load", "film_thickness_um", "1.0"),
    key("load", "film_stress_mpa", "300.0"),
    key("load", "radius_m", "10.0"),
    key("load", "strip_thickness_mm", "0.5"),
    key("load", "strip_modulus_gpa", "200.0"),
    key("load", "expansion_difference_per_k", "5e-6"),
    key("load", "temperature_change_k", "100.0"),
    key("load", "u_width_mm", "0.01"),
    key("load", "u_thickness_mm", "0.01"),
    key("load", "u_arm_mm", "0.1"),
    key("load", "u_span_mm", "0.05"),
    key("load", "u_area_mm2", "0.1"),
    key("load", "u_from_midspan_mm", "0.1"),
    key("load", "u_below_face_mm", "0.01"),
    key("load", "u_support_diameter_mm", "0.05"),
    key("load", "u_load_diameter_mm", "0.05"),
    key("load", "u_disc_diameter_mm", "0.05"),
    key("load", "u_poisson", "0.02"),
    key("load", "u_modulus_gpa", "5.0"),
    key("load", "u_film_thickness_um", "0.05"),
    key("load", "u_film_stress_mpa", "20.0"),
    key("load", "u_radius_m", "0.2"),
    key("load", "u_strip_thickness_mm", "0.01"),
    key("load", "u_strip_modulus_gpa", "5.0"),
    key("load", "u_expansion_difference_per_k", "2e-7"),
    key("load", "u_temperature_change_k", "1.0"),
    key("plan", "steps", "[{ time_s = 600.0, current_ma = 0.5, stress_mpa = 150.0, direction_deg = 90.0 }]"),
    key("trace", "confirm_frames", "2"),
    key("settings", "seed", "1"),
];

/// Names of the tables.
pub(super) const SECTIONS: [&str; 6] = ["frames", "cell", "load", "plan", "trace", "settings"];

/// Keys that a slip is still taken to mean: at most this share of its letters wrong (Jaro–Winkler
/// similarity at least this; common practice for command names).
const NEAR: f64 = 0.75;

/// The known key nearest to a mistyped one: of the same table first, then of any.
pub(super) fn nearest(section: &str, typed: &str) -> Option<&'static Key> {
    let closeness = |key: &Key| {
        let here = if key.section == section { 0.05 } else { 0.0 };
        strsim::jaro_winkler(typed, key.name) + here
    };
    KEYS.iter().max_by(|a, b| closeness(a).total_cmp(&closeness(b))).filter(|key| closeness(key) >= NEAR)
}

/// The key of a table, when there is one.
pub(super) fn find(section: &str, name: &str) -> Option<&'static Key> {
    KEYS.iter().find(|key| key.section == section && key.name == name)
}
