//! Load and current at any time of a scenario, from its stages.
//! Source of the bending formula: elementary beam theory, σ = 6FL/(bh²). Limit: a ramp that the next stage cuts short ends there.

use super::plan::{CellPlan, FixtureKind, LoadPlan};
use super::polyline::{axis_deg, unit};

/// The load in force.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Loading {
    /// MPa, positive in compression.
    pub stress_mpa: f64,
    /// Load axis, degrees in [0, 180); `None` for no load at all.
    pub axis_deg: Option<f64>,
}

/// Stress and axis at `time_s`; `tangent` is the plating edge's there, for loads through the plates.
#[must_use]
pub fn loading(plan: &LoadPlan, time_s: f64, tangent: [f64; 2]) -> Loading {
    let (stress_mpa, direction_deg) = stages(plan, time_s);
    let axis = match plan.fixture {
        FixtureKind::None => {
            return Loading { stress_mpa: 0.0, axis_deg: None };
        }
        FixtureKind::Stack => axis_deg([-tangent[1], tangent[0]]),
        FixtureKind::Stress | FixtureKind::Uniaxial | FixtureKind::Cantilever => direction_deg,
    };
    Loading { stress_mpa, axis_deg: Some(axis) }
}

/// Stress and direction of the stages at `time_s`: (MPa, degrees in [0, 180)).
fn stages(plan: &LoadPlan, time_s: f64) -> (f64, f64) {
    let Some(first) = plan.stages.first() else {
        return (0.0, 0.0);
    };
    let (mut stress, mut direction) = (first.stress_mpa, first.direction_deg);
    for (i, stage) in plan.stages.iter().enumerate().filter(|(_, s)| s.at_s <= time_s) {
        let until = plan.stages.get(i + 1).map_or(time_s, |next| next.at_s.min(time_s));
        let share = if stage.ramp_s > 0.0 { ((until - stage.at_s) / stage.ramp_s).clamp(0.0, 1.0) } else { 1.0 };
        let turn = (stage.direction_deg - direction + 90.0).rem_euclid(180.0) - 90.0;
        stress += share * (stage.stress_mpa - stress);
        direction += share * turn;
    }
    (stress, axis_deg(unit(direction)))
}

/// Force that gives `stress_mpa` in the fixture, N; `None` where the log holds the stress.
#[must_use]
pub fn force_n(plan: &LoadPlan, stress_mpa: f64) -> Option<f64> {
    match plan.fixture {
        FixtureKind::None | FixtureKind::Stress => None,
        FixtureKind::Uniaxial | FixtureKind::Stack => Some(stress_mpa * plan.area_mm2),
        FixtureKind::Cantilever => {
            Some(stress_mpa * plan.width_mm * plan.thickness_mm * plan.thickness_mm / (6.0 * plan.arm_mm))
        }
    }
}

/// Current at `time_s`, mA.
#[must_use]
pub fn current_ma(plan: &CellPlan, time_s: f64) -> f64 {
    plan.stages.iter().rev().find(|s| s.at_s <= time_s).map_or(plan.current_ma, |s| s.current_ma)
}

#[cfg(test)]
mod tests {
    use super::super::plan::LoadStage;
    use super::*;

    fn plan(fixture: FixtureKind) -> LoadPlan {
        let stage = |at_s, stress_mpa, direction_deg, ramp_s| LoadStage { at_s, stress_mpa, direction_deg, ramp_s };
        LoadPlan {
            fixture,
            stages: vec![stage(0.0, 100.0, 170.0, 0.0), stage(100.0, 200.0, 10.0, 50.0)],
            ..LoadPlan::default()
        }
    }

    #[test]
    fn stages_ramp_the_shorter_way() {
        let at = |t| loading(&plan(FixtureKind::Stress), t, [0.0, 1.0]);
        assert!((at(50.0).stress_mpa - 100.0).abs() < 1e-9);
        assert!((at(125.0).stress_mpa - 150.0).abs() < 1e-9);
        let halfway = at(125.0).axis_deg.unwrap();
        assert!(halfway.min(180.0 - halfway) < 1e-9, "{halfway}");
        assert!((at(500.0).axis_deg.unwrap() - 10.0).abs() < 1e-9);
    }

    #[test]
    fn a_load_through_the_plates_follows_their_normal() {
        let axis = loading(&plan(FixtureKind::Stack), 0.0, [0.0, 1.0]).axis_deg.unwrap();
        assert!(axis.min(180.0 - axis) < 1e-9);
        assert_eq!(loading(&plan(FixtureKind::None), 0.0, [0.0, 1.0]).axis_deg, None);
    }

    #[test]
    fn bending_force_matches_beam_theory() {
        // 6·1.5·12/(4·0.5²) = 108 MPa: elementary beam theory.
        let force = force_n(&plan(FixtureKind::Cantilever), 108.0).unwrap();
        assert!((force - 1.5).abs() < 1e-12);
    }
}
