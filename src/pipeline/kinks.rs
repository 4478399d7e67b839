//! Turns of growth from piece to piece beside those that fracture mechanics predicts: a model, not a measurement.
//!
//! Model: [`crate::stats::kink`], with the cell's whole voltage while plating taken for the overpotential. That is the most
//! it can be, so the pressure is the most the metal can press with; with less pressure the model turns further. The crack
//! is half as long as its filament has grown, the T-stress is felt half a piece ahead; no prediction where K_I ≤ 0.
//! Measurement: turns are classed by the mean of the two directions: noise in one of them then feigns no turn (the reason
//! why differences are plotted against means: Bland & Altman 1986, Lancet 327, 307–310, from memory).
//! Limit: the shape of the cell and other filaments change the stress at a tip; neither is known here.

use std::collections::BTreeMap;

use super::Input;
use crate::measure::{GrowthRow, Metal};
use crate::results::{KinkBin, KinkInputs, KinkModel};
use crate::stats::angles::{fold_axis, turn_between};
use crate::stats::clusters::{Total, clustered_mean};
use crate::stats::kink::{Crack, pressure_of_overpotential};
use crate::stats::order::{mean, median};

/// Width of a class of angle to the load axis, degrees: wider than a piece's direction is uncertain.
const CLASS_DEG: f64 = 15.0;
/// Classes from along the load axis to across it.
const CLASSES: usize = 6;
/// A piece continues another when their middles lie no further apart than this times half their joint length, ...
const REACH: f64 = 1.5;
/// ... and so many px for what was too short to be a piece.
const SLACK_PX: f64 = 4.0;

/// A turn from one piece of growth to the next.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Turn {
    filament: u32,
    /// Time whose load it takes, s.
    load_time_s: f64,
    /// Turn, degrees, anticlockwise positive.
    turn_deg: f64,
    /// From the mean of both directions to the load axis, degrees, anticlockwise positive.
    load_from_growth_deg: f64,
    stress_mpa: f64,
    /// What the filament had grown, µm.
    grown_um: f64,
    /// Length of the later piece, µm.
    piece_um: f64,
}

/// A turn, what pressed, and what the model says; both turns count toward the load axis.
#[derive(Debug, Clone, Copy)]
struct Compared {
    turn: Turn,
    overpotential_mv: f64,
    measured_deg: f64,
    predicted_deg: f64,
}

/// Compares the turns of a run with the model's. `None` where metal, voltage, stress or axis are not known, nothing grew
/// on, or every crack is held shut.
pub(super) fn kink_model(input: &Input, growth: &[GrowthRow]) -> Option<KinkModel> {
    let metal = Metal::of(input.manifest.cell.metal.as_deref()?)?;
    let overpotential_mv = |time_s: f64| {
        let cell = input.cell.at(time_s);
        let plates = cell.current_ma.is_some_and(|current| current > 0.0);
        cell.voltage_v.filter(|volts| plates && *volts > 0.0).map(|volts| 1e3 * volts)
    };
    let mut model = compare(&turns(growth, input.um_per_px()), metal, overpotential_mv)?;
    let u_stress: Vec<f64> =
        growth.iter().filter_map(|row| input.load.at(row.load_time_s, None).u_stress_mpa).collect();
    model.inputs.u_stress_mpa = median(&u_stress);
    Some(model)
}

fn compare(turns: &[Turn], metal: Metal, overpotential_mv: impl Fn(f64) -> Option<f64>) -> Option<KinkModel> {
    let molar_volume_cm3 = metal.molar_volume_cm3();
    let (mut compared, mut closed) = (Vec::new(), 0);
    for turn in turns {
        let Some(overpotential_mv) = overpotential_mv(turn.load_time_s) else { continue };
        match predicted(turn, pressure_of_overpotential(overpotential_mv, molar_volume_cm3)) {
            Some(predicted_deg) => {
                let measured_deg = turn.turn_deg * turn.load_from_growth_deg.signum();
                compared.push(Compared { turn: *turn, overpotential_mv, measured_deg, predicted_deg });
            }
            None => closed += 1,
        }
    }
    let middle = |of: fn(&Compared) -> f64| median(&compared.iter().map(of).collect::<Vec<_>>());
    let overpotential = middle(|c| c.overpotential_mv)?;
    Some(KinkModel {
        inputs: KinkInputs {
            metal: metal.symbol.to_owned(),
            molar_volume_cm3,
            overpotential_mv: overpotential,
            pressure_mpa: pressure_of_overpotential(overpotential, molar_volume_cm3),
            stress_mpa: middle(|c| c.turn.stress_mpa)?,
            u_stress_mpa: None,
            half_length_um: middle(|c| 0.5 * c.turn.grown_um)?,
            distance_um: middle(|c| 0.5 * c.turn.piece_um)?,
            pieces: compared.len(),
            closed,
        },
        bins: (0..CLASSES).filter_map(|class| bin(class, &compared)).collect(),
    })
}

/// Turn toward the load axis by the model, degrees; 0 where either side is as likely; `None` where K_I ≤ 0.
fn predicted(turn: &Turn, pressure_mpa: f64) -> Option<f64> {
    let crack = Crack {
        pressure_mpa,
        stress_mpa: turn.stress_mpa,
        load_from_crack_deg: turn.load_from_growth_deg,
        half_length_um: 0.5 * turn.grown_um,
    };
    let kink = crack.kink(0.5 * turn.piece_um)?;
    Some(if kink.either_side { 0.0 } else { kink.turn_deg * turn.load_from_growth_deg.signum() })
}

fn bin(class: usize, compared: &[Compared]) -> Option<KinkBin> {
    let from_deg = CLASS_DEG * class as f64;
    let own: Vec<&Compared> = compared
        .iter()
        .filter(|c| ((c.turn.load_from_growth_deg.abs() / CLASS_DEG) as usize).min(CLASSES - 1) == class)
        .collect();
    let mut by_filament: BTreeMap<u32, Total> = BTreeMap::new();
    for c in &own {
        let total = by_filament.entry(c.turn.filament).or_default();
        total.weight += 1.0;
        total.sum += c.measured_deg;
    }
    let measured = clustered_mean(&by_filament.values().copied().collect::<Vec<_>>())?;
    Some(KinkBin {
        from_deg,
        to_deg: from_deg + CLASS_DEG,
        measured_deg: measured.value,
        measured_ci95: measured.ci95,
        predicted_deg: mean(&own.iter().map(|c| c.predicted_deg).collect::<Vec<_>>())?,
        pieces: own.len(),
        filaments: by_filament.len(),
    })
}

/// Turns between pieces that continue one another under a known load, in order of growth.
fn turns(growth: &[GrowthRow], um_per_px: f64) -> Vec<Turn> {
    let mut by_filament: BTreeMap<u32, Vec<&GrowthRow>> = BTreeMap::new();
    for row in growth {
        by_filament.entry(row.filament).or_default().push(row);
    }
    let mut found = Vec::new();
    for (filament, mut own) in by_filament {
        own.sort_by(|a, b| a.time_s.total_cmp(&b.time_s));
        let mut grown_um = 0.0;
        for (i, row) in own.iter().enumerate() {
            if let Some(before) = own[..i].iter().rev().find(|before| continues(before, row, um_per_px)) {
                found.extend(turn(filament, before, row, grown_um));
            }
            grown_um += row.length_um;
        }
    }
    found
}

/// Whether `later` goes on where `before` ended: another branch of the filament lies elsewhere.
fn continues(before: &GrowthRow, later: &GrowthRow, um_per_px: f64) -> bool {
    let apart_px = libm::hypot(later.x_px - before.x_px, later.y_px - before.y_px);
    let joint_px = 0.5 * (before.length_um + later.length_um) / um_per_px;
    before.time_s < later.time_s && apart_px <= REACH * joint_px + SLACK_PX
}

fn turn(filament: u32, before: &GrowthRow, later: &GrowthRow, grown_um: f64) -> Option<Turn> {
    let turn_deg = turn_between(before.angle_deg, later.angle_deg);
    let ran_deg = fold_axis(before.angle_deg + 0.5 * turn_deg);
    Some(Turn {
        filament,
        load_time_s: later.load_time_s,
        turn_deg,
        load_from_growth_deg: turn_between(ran_deg, later.load_direction_deg?),
        stress_mpa: later.stress_mpa?,
        grown_um,
        piece_um: later.length_um,
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A filament that starts at 60° to a load along 0° and turns by `step` degrees toward it with every piece of 5 px.
    fn bending(filament: u32, step: f64, stress: Option<f64>) -> Vec<GrowthRow> {
        let (mut x, mut y) = (0.0, 1_000.0 * f64::from(filament));
        (0..12)
            .map(|i| {
                let angle_deg = 60.0 - step * f64::from(i);
                let (sin, cos) = libm::sincos(angle_deg.to_radians());
                (x, y) = (x + 5.0 * cos, y - 5.0 * sin);
                GrowthRow {
                    frame: i as usize,
                    time_s: 10.0 * f64::from(i),
                    load_time_s: 10.0 * f64::from(i) - 5.0,
                    filament,
                    x_px: x,
                    y_px: y,
                    length_um: 10.0,
                    angle_deg,
                    u_angle_deg: None,
                    load_direction_deg: stress.map(|_| 0.0),
                    angle_to_load_deg: None,
                    stress_mpa: stress,
                }
            })
            .collect()
    }

    fn many(step: f64, stress: Option<f64>) -> Vec<GrowthRow> {
        (0..6).flat_map(|filament| bending(filament, step, stress)).collect()
    }

    fn model(rows: &[GrowthRow], mv: Option<f64>) -> Option<KinkModel> {
        compare(&turns(rows, 2.0), Metal::of("Li")?, |_| mv)
    }

    #[test]
    fn what_was_measured_stands_beside_what_is_predicted() {
        let found = model(&many(3.0, Some(150.0)), Some(60.0)).unwrap();
        assert_eq!((found.inputs.pieces, found.inputs.closed), (66, 0));
        for bin in &found.bins {
            assert!((bin.measured_deg - 3.0).abs() < 1e-9, "{bin:?}");
            assert_eq!(bin.filaments, 6);
            assert!(bin.predicted_deg > 0.0, "compression turns a crack along itself: {bin:?}");
        }
        // 60 mV of lithium: 445 MPa (F·η/V_m, 7.424 MPa/mV).
        assert!((found.inputs.pressure_mpa - 445.4).abs() < 0.1);
    }

    #[test]
    fn a_pull_is_predicted_to_turn_growth_away_from_its_axis() {
        let found = model(&many(0.0, Some(-150.0)), Some(60.0)).unwrap();
        assert!(found.bins.iter().all(|bin| bin.predicted_deg < 0.0 && bin.measured_deg.abs() < 1e-9), "{found:?}");
    }

    #[test]
    fn less_pressure_turns_further() {
        let at = |mv| model(&many(0.0, Some(150.0)), Some(mv)).unwrap().bins[0].predicted_deg;
        assert!(at(40.0) > at(60.0) && at(60.0) > at(90.0));
    }

    #[test]
    fn no_prediction_without_inputs_or_where_the_crack_is_shut() {
        assert_eq!(model(&many(3.0, None), Some(60.0)), None);
        assert_eq!(model(&many(3.0, Some(150.0)), None), None);
        assert_eq!(model(&[], Some(60.0)), None);
        // 1 mV presses with 7 MPa against some 100 MPa across the crack.
        assert_eq!(model(&many(0.0, Some(150.0)), Some(1.0)), None);
    }

    #[test]
    fn another_branch_is_no_turn() {
        let mut rows = bending(1, 0.0, Some(150.0));
        let far = GrowthRow { x_px: 500.0, angle_deg: 150.0, time_s: 200.0, ..rows[3].clone() };
        rows.push(far);
        assert_eq!(turns(&rows, 2.0).len(), 11);
    }
}
