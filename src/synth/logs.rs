//! The load log and the cell log of a synthetic run, as CSV text.
//! The cell's voltage rises slowly, follows the current and collapses at contact. Limit: no impedance, no rest potentials.

use std::fmt::Write as _;

use super::dice::Dice;
use super::history::{current_ma, force_n, loading};
use super::plan::FixtureKind;
use super::scenario::Scenario;
use super::track::Growth;

/// Voltage after the short, V: what contacts and leads leave (common practice).
const SHORTED_V: f64 = 0.002;
/// Resistance that tension of the leads and the ceramic add, as growth of the voltage over a run (common practice).
const VOLTAGE_RISE: f64 = 0.15;

/// Sample times of a log: at the given spacing, or a fifth of the frame interval; one sample beyond the last frame.
fn log_times(scenario: &Scenario, every_s: f64) -> impl Iterator<Item = f64> {
    let every = if every_s > 0.0 { every_s } else { scenario.interval_s / 5.0 };
    let n = (scenario.end_s() / every).ceil() as usize + 1;
    (0..=n).map(move |i| i as f64 * every)
}

/// The load log's text.
pub(super) fn load_log(scenario: &Scenario, dice: &mut Dice) -> String {
    let plan = &scenario.load;
    let has_direction = plan.fixture != FixtureKind::Stack;
    let value = if plan.fixture == FixtureKind::Stress { "stress_mpa" } else { "force_n" };
    let mut text = format!("time_s,{value}{}\n", if has_direction { ",direction_deg" } else { "" });
    for time in log_times(scenario, plan.log_every_s) {
        let load = loading(plan, time, [0.0, 1.0]);
        let stress = load.stress_mpa + plan.noise_mpa * dice.normal();
        let shown = force_n(plan, stress).unwrap_or(stress);
        let direction = load.axis_deg.filter(|_| has_direction).map_or(String::new(), |a| format!(",{a:.2}"));
        let _ = writeln!(text, "{time:.3},{shown:.4}{direction}");
    }
    text
}

/// The cell log's text.
pub(super) fn cell_log(scenario: &Scenario, growth: &Growth, dice: &mut Dice) -> String {
    let plan = &scenario.cell;
    let mut text = String::from("time_s,current_ma,voltage_v\n");
    for time in log_times(scenario, 0.0) {
        let current = current_ma(plan, time);
        let drive = current / plan.current_ma;
        let shorted = growth.contact.is_some_and(|(at, _)| at <= time);
        let open = plan.voltage_v * (1.0 + VOLTAGE_RISE * time / scenario.end_s().max(1.0));
        let voltage = if shorted { SHORTED_V } else { open } * drive + plan.noise_v * dice.normal();
        let _ = writeln!(text, "{time:.3},{current:.5},{voltage:.6}");
    }
    text
}
