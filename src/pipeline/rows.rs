//! The frames table: every file a row, what was measured beside what the logs say.

use super::Input;
use super::film::{Fate, Filmed};
use crate::measure::{FrameRow, Measured};

/// A row a frame, those set aside with their reason and the logs' values alone.
pub(super) fn frame_rows(input: &Input, filmed: &Filmed, measured: &Measured) -> Vec<FrameRow> {
    let mut of_trace = measured.frames.iter().peekable();
    filmed
        .fates
        .iter()
        .enumerate()
        .map(|(frame, fate)| {
            let row = of_trace.next_if(|r| r.frame == frame).cloned().unwrap_or_default();
            filled(row, input, filmed, frame, fate)
        })
        .collect()
}

fn filled(mut row: FrameRow, input: &Input, filmed: &Filmed, frame: usize, fate: &Fate) -> FrameRow {
    let entry = &input.sequence.entries[frame];
    let load = input.load.at(entry.time_s, Some(input.edges.plating.middle()));
    let cell = input.cell.at(entry.time_s);
    row.frame = frame;
    row.file.clone_from(&entry.file);
    row.time_s = entry.time_s;
    row.usable = fate.reason.is_empty();
    row.reason.clone_from(&fate.reason);
    row.drift_x_px = fate.drift_px.map(|d| d[0]);
    row.drift_y_px = fate.drift_px.map(|d| d[1]);
    row.load_n = load.force_n;
    row.load_direction_deg = load.direction_deg;
    row.stress_mpa = load.stress_mpa;
    row.u_stress_mpa = load.u_stress_mpa;
    row.exposure = fate.exposure;
    row.sharpness = fate.sharpness;
    row.noise = fate.noise_factor.map(|f| f * filmed.noise);
    row.current_ma = cell.current_ma;
    row.voltage_v = cell.voltage_v;
    row.temperature_c = cell.temperature_c.or(input.manifest.cell.temperature_c);
    row.charge_mah = input.charge_mah(entry.time_s);
    row
}
