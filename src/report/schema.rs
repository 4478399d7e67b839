//! Every column of every table, once: name, type, unit, meaning, decimals, and where its value stands.
//! Writers, captions and tests all read these lists. The contract's columns come first, in its order;
//! later ones are additions. A number is rounded to its column's decimals, well below what a run can know.

use std::fmt::Debug;

use serde::Serialize;

use crate::measure::{FilamentRow, ForecastRow, FrameRow, GrowthRow, PathRow};

mod comparison;
mod effects;

pub use comparison::{EFFECTS, GROUPS, RUNS};
pub use effects::{CHARGE, DIRECTIONS, HALF_CYCLES, TURNS};

/// A table: what a row is, and its columns.
pub struct Table<R: 'static> {
    /// File name without extension.
    pub name: &'static str,
    /// What a row is.
    pub row: &'static str,
    /// Its columns, in order.
    pub columns: &'static [Column<R>],
}

/// A column.
pub struct Column<R> {
    /// Heading.
    pub name: &'static str,
    /// Unit; empty for names, flags and counts, "1" for ratios.
    pub unit: &'static str,
    /// What it says.
    pub meaning: &'static str,
    /// Type and source of its values.
    pub values: Values<R>,
}

/// Type of a column and how a row gives its value; `None` is an empty field.
pub enum Values<R> {
    /// A count or an index.
    Count(fn(&R) -> Option<u64>),
    /// A number, rounded to so many decimals.
    Number(u8, fn(&R) -> Option<f64>),
    /// A word or a name.
    Text(fn(&R) -> Option<String>),
    /// Yes or no.
    Flag(fn(&R) -> Option<bool>),
}

impl<R> Values<R> {
    /// The row's value as a reader sees it; empty where absent. Numbers carry their column's decimals.
    pub fn show(&self, row: &R) -> String {
        match self {
            Self::Count(get) => get(row).map(|n| n.to_string()),
            Self::Number(decimals, get) => {
                get(row).and_then(|x| round(x, *decimals)).map(|x| format!("{x:.*}", usize::from(*decimals)))
            }
            Self::Text(get) => get(row),
            Self::Flag(get) => get(row).map(|yes| if yes { "yes" } else { "no" }.to_owned()),
        }
        .unwrap_or_default()
    }
}

/// `x` rounded half away from zero to `decimals`, without a negative zero; absent when not finite.
pub fn round(x: f64, decimals: u8) -> Option<f64> {
    let scale = 10_f64.powi(i32::from(decimals));
    let scaled = (x * scale).round();
    match (x.is_finite(), scaled.is_finite()) {
        (false, _) => None,
        (true, false) => Some(x),
        (true, true) => Some(scaled / scale + 0.0),
    }
}

/// Decimals of a direction.
const DIRECTION_DECIMALS: u8 = 2;

/// An axial direction that stays below 180° when it is rounded.
fn axial(deg: f64) -> f64 {
    if round(deg, DIRECTION_DECIMALS).is_some_and(|rounded| rounded >= 180.0) { 0.0 } else { deg }
}

/// The lowercase name under which an enum is written.
fn word(value: impl Serialize + Debug) -> Option<String> {
    match serde_json::to_value(&value) {
        Ok(serde_json::Value::String(name)) => Some(name),
        _ => Some(format!("{value:?}").to_lowercase()),
    }
}

const fn count<R>(name: &'static str, meaning: &'static str, get: fn(&R) -> Option<u64>) -> Column<R> {
    Column { name, unit: "", meaning, values: Values::Count(get) }
}

const fn number<R>(
    name: &'static str,
    unit: &'static str,
    decimals: u8,
    meaning: &'static str,
    get: fn(&R) -> Option<f64>,
) -> Column<R> {
    Column { name, unit, meaning, values: Values::Number(decimals, get) }
}

const fn text<R>(name: &'static str, meaning: &'static str, get: fn(&R) -> Option<String>) -> Column<R> {
    Column { name, unit: "", meaning, values: Values::Text(get) }
}

const fn flag<R>(name: &'static str, meaning: &'static str, get: fn(&R) -> Option<bool>) -> Column<R> {
    Column { name, unit: "", meaning, values: Values::Flag(get) }
}

/// `frames`: a row a frame.
pub static FRAMES: Table<FrameRow> = Table {
    name: "frames",
    row: "a row a frame",
    columns: &[
        count("frame", "frame number over all files, from 0", |r| Some(r.frame as u64)),
        text("file", "file name", |r| Some(r.file.clone())),
        number("time_s", "s", 3, "seconds since the first frame", |r| Some(r.time_s)),
        flag("usable", "whether the frame was used", |r| Some(r.usable)),
        text("reason", "why it was set aside; empty when usable", |r| Some(r.reason.clone())),
        number("drift_x_px", "px", 3, "drift of the scene, to the right", |r| r.drift_x_px),
        number("drift_y_px", "px", 3, "drift of the scene, downwards", |r| r.drift_y_px),
        number("load_n", "N", 4, "force in force", |r| r.load_n),
        number("load_direction_deg", "°", 2, "load axis, anticlockwise from +x", |r| r.load_direction_deg.map(axial)),
        number("stress_mpa", "MPa", 3, "stress along the load axis, compression positive", |r| r.stress_mpa),
        number("depth_um", "µm", 3, "deepest point of any filament rooted on the plating edge", |r| r.depth_um),
        number("depth_fraction", "1", 5, "depth over depth plus what is left to the far edge", |r| r.depth_fraction),
        number("front_depth_um", "µm", 3, "depth of what is still visible", |r| r.front_depth_um),
        number("deepest_x_px", "px", 2, "deepest point", |r| r.deepest_x_px),
        number("deepest_y_px", "px", 2, "deepest point", |r| r.deepest_y_px),
        count("filaments", "filaments rooted on the plating edge", |r| r.filaments.map(|n| n as u64)),
        count("tips", "their free ends", |r| r.tips.map(|n| n as u64)),
        number("length_um", "µm", 2, "their length", |r| r.length_um),
        number("area_um2", "µm²", 1, "their projected area", |r| r.area_um2),
        count("unrooted", "filaments rooted elsewhere", |r| r.unrooted.map(|n| n as u64)),
        number("alignment", "1", 5, "mean cos 2Δ to the load axis over arc length", |r| r.alignment),
        number("growth_alignment", "1", 5, "the same over the pieces new in this frame", |r| r.growth_alignment),
        number("u_depth_um", "µm", 3, "standard uncertainty of depth_um", |r| r.u_depth_um),
        number("u_length_um", "µm", 2, "standard uncertainty of length_um", |r| r.u_length_um),
        number("u_stress_mpa", "MPa", 3, "standard uncertainty of stress_mpa", |r| r.u_stress_mpa),
        number("exposure", "1", 4, "brightness against the reference", |r| r.exposure),
        number("sharpness", "1", 4, "sharpness against the reference", |r| r.sharpness),
        number("noise", "1", 5, "noise of a pixel over the local brightness", |r| r.noise),
        number("current_ma", "mA", 5, "cell current, plating positive", |r| r.current_ma),
        number("voltage_v", "V", 5, "cell voltage", |r| r.voltage_v),
        number("temperature_c", "°C", 2, "temperature", |r| r.temperature_c),
        number("charge_mah", "mAh", 6, "charge passed since the first frame", |r| r.charge_mah),
    ],
};

/// `paths`: a row a path a frame.
pub static PATHS: Table<PathRow> = Table {
    name: "paths",
    row: "a row a path a frame",
    columns: &[
        count("frame", "frame number, from 0", |r| Some(r.frame as u64)),
        number("time_s", "s", 3, "seconds since the first frame", |r| Some(r.time_s)),
        count("filament", "filament number", |r| Some(r.filament.into())),
        count("path", "path number", |r| Some(r.path.into())),
        number("length_um", "µm", 2, "arc length", |r| Some(r.length_um)),
        number("chord_um", "µm", 2, "straight distance between its ends", |r| Some(r.chord_um)),
        number("width_um", "µm", 3, "mean width", |r| r.width_um),
        number("angle_deg", "°", 2, "mean direction, anticlockwise from +x", |r| r.angle_deg.map(axial)),
        number("angle_to_load_deg", "°", 2, "acute angle to the load axis then in force", |r| r.angle_to_load_deg),
        number("x0_px", "px", 2, "rootward end", |r| Some(r.x0_px)),
        number("y0_px", "px", 2, "rootward end", |r| Some(r.y0_px)),
        number("x1_px", "px", 2, "tipward end", |r| Some(r.x1_px)),
        number("y1_px", "px", 2, "tipward end", |r| Some(r.y1_px)),
        text("ends_in", "what the tipward end is: tip, branch, meeting, far", |r| word(r.ends_in)),
        number("u_length_um", "µm", 2, "standard uncertainty of length_um", |r| r.u_length_um),
        number("u_width_um", "µm", 3, "standard uncertainty of width_um", |r| r.u_width_um),
        number("u_angle_deg", "°", 2, "standard uncertainty of angle_deg", |r| r.u_angle_deg),
    ],
};

/// `growth`: a row a growth piece.
pub static GROWTH: Table<GrowthRow> = Table {
    name: "growth",
    row: "a row a growth piece",
    columns: &[
        count("frame", "frame at which it was new", |r| Some(r.frame as u64)),
        number("time_s", "s", 3, "seconds since the first frame", |r| Some(r.time_s)),
        number("load_time_s", "s", 3, "time whose load it takes", |r| Some(r.load_time_s)),
        count("filament", "filament number", |r| Some(r.filament.into())),
        number("x_px", "px", 2, "its middle", |r| Some(r.x_px)),
        number("y_px", "px", 2, "its middle", |r| Some(r.y_px)),
        number("length_um", "µm", 2, "arc length", |r| Some(r.length_um)),
        number("angle_deg", "°", 2, "mean direction, anticlockwise from +x", |r| Some(axial(r.angle_deg))),
        number("load_direction_deg", "°", 2, "load axis while it grew", |r| r.load_direction_deg.map(axial)),
        number("angle_to_load_deg", "°", 2, "acute angle to it", |r| r.angle_to_load_deg),
        number("stress_mpa", "MPa", 3, "stress while it grew, compression positive", |r| r.stress_mpa),
        number("u_angle_deg", "°", 2, "standard uncertainty of angle_deg", |r| r.u_angle_deg),
    ],
};

/// `filaments`: a row a filament.
pub static FILAMENTS: Table<FilamentRow> = Table {
    name: "filaments",
    row: "a row a filament",
    columns: &[
        count("filament", "filament number, in order of first arrival", |r| Some(r.filament.into())),
        number("first_time_s", "s", 3, "time of its first arrival", |r| Some(r.first_time_s)),
        text("root", "where it starts: plating, far, inside", |r| word(r.root)),
        number("root_x_px", "px", 2, "root", |r| Some(r.root_x_px)),
        number("root_y_px", "px", 2, "root", |r| Some(r.root_y_px)),
        number("final_depth_um", "µm", 3, "depth at the end", |r| r.final_depth_um),
        number("final_length_um", "µm", 2, "length at the end", |r| Some(r.final_length_um)),
        count("tips", "free ends at the end", |r| Some(r.tips as u64)),
        flag("bridged", "whether its ink touched the far edge", |r| Some(r.bridged)),
        flag("turned", "whether its last 100 µm run more than 45° off the edge's normal", |r| r.turned),
    ],
};

/// `forecasts`: a row a usable frame from first growth to short.
pub static FORECASTS: Table<ForecastRow> = Table {
    name: "forecasts",
    row: "a row a usable frame from first growth to short",
    columns: &[
        count("frame", "frame that issues it", |r| Some(r.frame as u64)),
        number("issued_at_s", "s", 3, "its time", |r| Some(r.issued_at_s)),
        number("p025_s", "s", 3, "2.5 % quantile of first contact, given that it comes", |r| r.p025_s),
        number("p10_s", "s", 3, "10 %", |r| r.p10_s),
        number("p25_s", "s", 3, "25 %", |r| r.p25_s),
        number("p50_s", "s", 3, "50 %", |r| r.p50_s),
        number("p75_s", "s", 3, "75 %", |r| r.p75_s),
        number("p90_s", "s", 3, "90 %", |r| r.p90_s),
        number("p975_s", "s", 3, "97.5 %", |r| r.p975_s),
        number("horizon_s", "s", 3, "run time of the horizon", |r| Some(r.horizon_s)),
        number("chance_by_horizon", "1", 5, "chance of contact by the horizon", |r| r.chance_by_horizon),
        text("model", "growth law used", |r| Some(r.model.clone())),
    ],
};

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_direction_stays_below_a_half_turn() {
        assert!(axial(179.996).abs() < 1e-12 && axial(179.99) > 179.98 && axial(0.0).abs() < 1e-12);
    }

    #[test]
    fn rounding_keeps_the_sign_of_nothing() {
        assert_eq!(round(-0.0004, 3).map(f64::to_bits), Some(0.0_f64.to_bits()));
        assert_eq!(round(2.5, 0), Some(3.0));
        assert_eq!(round(0.1 + 0.2, 3), Some(0.3));
        assert_eq!(round(f64::NAN, 3), None);
        assert_eq!(round(1e300, 12), Some(1e300));
    }

    #[test]
    fn no_name_is_used_twice() {
        fn names<R>(table: &Table<R>) -> Vec<&'static str> {
            table.columns.iter().map(|c| c.name).collect()
        }
        for list in [
            names(&FRAMES),
            names(&PATHS),
            names(&GROWTH),
            names(&FILAMENTS),
            names(&FORECASTS),
            names(&TURNS),
            names(&DIRECTIONS),
            names(&CHARGE),
            names(&HALF_CYCLES),
        ] {
            let mut unique = list.clone();
            unique.sort_unstable();
            unique.dedup();
            assert_eq!(unique.len(), list.len());
        }
    }
}
