//! Growth against the charge passed: rows and numbers, no computing.

use serde::{Deserialize, Serialize};

/// A row a usable frame of a run with a cell log.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct ChargeRow {
    /// 0-based, over all files.
    pub frame: usize,
    /// Seconds since the first frame.
    pub time_s: f64,
    /// Net charge passed since the first frame, mAh; plating positive.
    pub charge_mah: Option<f64>,
    /// The same over the electrode area.
    pub charge_mah_per_cm2: Option<f64>,
    /// Time in plating since the first frame, s.
    pub plating_s: Option<f64>,
    /// Current in force, mA; plating positive.
    pub current_ma: Option<f64>,
    /// The same over the electrode area.
    pub current_ma_per_cm2: Option<f64>,
    /// Number of the half-cycle then running; absent at rest.
    pub half_cycle: Option<usize>,
    /// Depth, µm.
    pub depth_um: Option<f64>,
    /// Depth of what is still visible, µm.
    pub front_depth_um: Option<f64>,
    /// Length of the filaments rooted on the plating edge, µm.
    pub length_um: Option<f64>,
    /// Mean speed of a free end, µm/s: growth in length from the frame before to the one after, by free ends.
    pub tip_speed_um_per_s: Option<f64>,
    /// Stress in force, MPa, positive in compression.
    pub stress_mpa: Option<f64>,
    /// Projected area times the depth seen through, µm³: the most that the visible track can hold.
    pub visible_um3: Option<f64>,
    /// Metal of the net charge by Faraday's law, µm³; absent where the net charge does not plate.
    pub faraday_um3: Option<f64>,
}

/// What flowed during a half-cycle.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Flow {
    /// Current above zero: metal deposits at the plating edge.
    #[default]
    Plating,
    /// Current below zero.
    Stripping,
}

/// A row a half-cycle: a stretch of one sign of current.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct HalfCycleRow {
    /// 1-based, in order of time.
    pub half_cycle: usize,
    /// What flowed.
    pub flow: Flow,
    /// Its first sample, s.
    pub from_s: f64,
    /// Its end, s.
    pub to_s: f64,
    /// Charge passed in it, mAh; absent where the log leaves a hole.
    pub charge_mah: Option<f64>,
    /// The same over the electrode area.
    pub charge_mah_per_cm2: Option<f64>,
    /// Gain of depth in it, µm.
    pub depth_gain_um: Option<f64>,
    /// Gain of length in it, µm.
    pub length_gain_um: Option<f64>,
    /// How far what is still visible drew back in it, µm; 0 where it did not.
    pub retreat_um: Option<f64>,
}

/// Growth against charge over the run.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct ChargeSummary {
    /// Whether a cell log gives the charge.
    pub logged: bool,
    /// Net charge at the last usable frame, mAh.
    pub charge_mah: Option<f64>,
    /// The same over the electrode area.
    pub charge_mah_per_cm2: Option<f64>,
    /// Half-cycles of plating.
    pub plating_half_cycles: usize,
    /// Median gain of depth in one, µm.
    pub depth_gain_um: Option<f64>,
    /// Half-cycles of stripping.
    pub stripping_half_cycles: usize,
    /// Median retreat in one, µm.
    pub retreat_um: Option<f64>,
    /// Visible volume at the last usable frame, µm³: projected area times the depth seen through.
    pub visible_um3: Option<f64>,
    /// Metal of the net charge then, µm³.
    pub faraday_um3: Option<f64>,
}
