//! The row types of the five tables.

use serde::{Deserialize, Serialize};

use crate::trace::{EndsIn, Root};

/// A row a frame.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct FrameRow {
    /// 0-based, over all files.
    pub frame: usize,
    /// File name as found from the run folder.
    pub file: String,
    /// Seconds since the first frame.
    pub time_s: f64,
    /// Whether the frame was used.
    pub usable: bool,
    /// Why it was set aside; empty when usable.
    pub reason: String,
    /// Drift of the scene against the first usable frame, px.
    pub drift_x_px: Option<f64>,
    /// Drift of the scene against the first usable frame, px.
    pub drift_y_px: Option<f64>,
    /// Force in force, N.
    pub load_n: Option<f64>,
    /// Load axis in the image, degrees in [0, 180).
    pub load_direction_deg: Option<f64>,
    /// Stress along the load axis, MPa, positive in compression.
    pub stress_mpa: Option<f64>,
    /// Standard uncertainty of the stress.
    pub u_stress_mpa: Option<f64>,
    /// Depth of the deepest filament rooted on the plating edge; never falls.
    pub depth_um: Option<f64>,
    /// Standard uncertainty of the depth.
    pub u_depth_um: Option<f64>,
    /// Depth / (depth + distance of that point to the far edge).
    pub depth_fraction: Option<f64>,
    /// Depth of what is still visible.
    pub front_depth_um: Option<f64>,
    /// Deepest point, px.
    pub deepest_x_px: Option<f64>,
    /// Deepest point, px.
    pub deepest_y_px: Option<f64>,
    /// Filaments rooted on the plating edge.
    pub filaments: Option<usize>,
    /// Free ends of them.
    pub tips: Option<usize>,
    /// Length of them, µm.
    pub length_um: Option<f64>,
    /// Standard uncertainty of the length.
    pub u_length_um: Option<f64>,
    /// Projected area of them, µm².
    pub area_um2: Option<f64>,
    /// Filaments rooted elsewhere.
    pub unrooted: Option<usize>,
    /// Mean cos 2Δ over arc length.
    pub alignment: Option<f64>,
    /// The same over the pieces new in this frame.
    pub growth_alignment: Option<f64>,
    /// Exposure against the bare reference (1 = same).
    pub exposure: Option<f64>,
    /// Sharpness against the bare reference (1 = same, below 1 = blurred).
    pub sharpness: Option<f64>,
    /// Noise, fraction of the local brightness, standard deviation of a pixel.
    pub noise: Option<f64>,
    /// Cell current in force, mA (positive plates at the plating edge).
    pub current_ma: Option<f64>,
    /// Cell voltage in force, V.
    pub voltage_v: Option<f64>,
    /// Temperature in force, °C.
    pub temperature_c: Option<f64>,
    /// Charge passed since the first frame, mAh.
    pub charge_mah: Option<f64>,
}

/// A row a path a frame.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct PathRow {
    /// Frame number.
    pub frame: usize,
    /// Seconds since the first frame.
    pub time_s: f64,
    /// Filament number.
    pub filament: u32,
    /// Path number.
    pub path: u32,
    /// Arc length, µm.
    pub length_um: f64,
    /// Standard uncertainty of the length.
    pub u_length_um: Option<f64>,
    /// Straight distance between its ends, µm.
    pub chord_um: f64,
    /// Mean width, µm.
    pub width_um: Option<f64>,
    /// Standard uncertainty of the width.
    pub u_width_um: Option<f64>,
    /// Length-weighted axial mean of its local directions, degrees in [0, 180).
    pub angle_deg: Option<f64>,
    /// Standard uncertainty of the angle.
    pub u_angle_deg: Option<f64>,
    /// Acute angle to the load axis then in force.
    pub angle_to_load_deg: Option<f64>,
    /// Rootward end, px.
    pub x0_px: f64,
    /// Rootward end, px.
    pub y0_px: f64,
    /// Tipward end, px.
    pub x1_px: f64,
    /// Tipward end, px.
    pub y1_px: f64,
    /// What the tipward end is at this frame.
    pub ends_in: EndsIn,
}

/// A row a growth piece.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct GrowthRow {
    /// Frame at which it was new.
    pub frame: usize,
    /// Seconds since the first frame.
    pub time_s: f64,
    /// Time whose load it takes: halfway between the last usable frame and this one.
    pub load_time_s: f64,
    /// Filament number.
    pub filament: u32,
    /// Its middle, px.
    pub x_px: f64,
    /// Its middle, px.
    pub y_px: f64,
    /// Arc length, µm.
    pub length_um: f64,
    /// Length-weighted axial mean of its local directions, degrees in [0, 180).
    pub angle_deg: f64,
    /// Standard uncertainty of the angle.
    pub u_angle_deg: Option<f64>,
    /// Load axis in force at `load_time_s`.
    pub load_direction_deg: Option<f64>,
    /// Acute angle to it.
    pub angle_to_load_deg: Option<f64>,
    /// Stress in force at `load_time_s`, MPa, positive in compression.
    pub stress_mpa: Option<f64>,
}

/// A row a filament.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct FilamentRow {
    /// Filament number.
    pub filament: u32,
    /// Time of its first arrival, s.
    pub first_time_s: f64,
    /// Where it starts.
    pub root: Root,
    /// Root position, px.
    pub root_x_px: f64,
    /// Root position, px.
    pub root_y_px: f64,
    /// Depth at the end, µm; absent when not rooted on the plating edge.
    pub final_depth_um: Option<f64>,
    /// Length at the end, µm.
    pub final_length_um: f64,
    /// Free ends at the end.
    pub tips: usize,
    /// Whether its ink touched the far edge.
    pub bridged: bool,
    /// Whether its last 100 µm run more than 45° off the plating edge's normal at its root.
    pub turned: Option<bool>,
}

/// A row a usable frame from first growth to short.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct ForecastRow {
    /// Frame that issues it.
    pub frame: usize,
    /// Its time, s.
    pub issued_at_s: f64,
    /// Quantiles of the run time of first contact, given that contact comes, s.
    pub p025_s: Option<f64>,
    /// 10 %.
    pub p10_s: Option<f64>,
    /// 25 %.
    pub p25_s: Option<f64>,
    /// 50 %.
    pub p50_s: Option<f64>,
    /// 75 %.
    pub p75_s: Option<f64>,
    /// 90 %.
    pub p90_s: Option<f64>,
    /// 97.5 %.
    pub p975_s: Option<f64>,
    /// Run time of the horizon, s.
    pub horizon_s: f64,
    /// Chance of contact by the horizon.
    pub chance_by_horizon: Option<f64>,
    /// The growth law used.
    pub model: String,
}
