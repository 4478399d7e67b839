//! `run.toml` of a synthetic run, as a reader of the run needs it.
//! Values are exact: no edge is off, no clock is wrong. Limit: every frame interval is the same.

use serde::Serialize;

use super::SynthError;
use super::plan::FixtureKind;
use super::scenario::Scenario;
use super::track::Growth;

/// `run.toml` as a reader of the run needs it.
#[derive(Serialize)]
struct Manifest<'a> {
    run: &'a str,
    #[serde(skip_serializing_if = "Option::is_none")]
    specimen: Option<&'a str>,
    #[serde(skip_serializing_if = "Option::is_none")]
    note: Option<&'a str>,
    frames: FramesTable,
    cell: CellTable<'a>,
    load: LoadTable,
}

#[derive(Serialize)]
struct FramesTable {
    files: &'static str,
    interval_s: f64,
    um_per_px: f64,
    filament: super::Polarity,
    bare: usize,
}

#[derive(Serialize)]
struct CellTable<'a> {
    plating_edge: &'a [[f64; 2]],
    far_edge: &'a [[f64; 2]],
    #[serde(skip_serializing_if = "Option::is_none")]
    log: Option<&'static str>,
    area_mm2: f64,
    view_depth_mm: f64,
    metal: &'static str,
    ended: &'static str,
}

#[derive(Default, Serialize)]
struct LoadTable {
    #[serde(skip_serializing_if = "Option::is_none")]
    log: Option<&'static str>,
    fixture: &'static str,
    #[serde(skip_serializing_if = "Option::is_none")]
    area_mm2: Option<f64>,
    #[serde(skip_serializing_if = "Option::is_none")]
    width_mm: Option<f64>,
    #[serde(skip_serializing_if = "Option::is_none")]
    thickness_mm: Option<f64>,
    #[serde(skip_serializing_if = "Option::is_none")]
    arm_mm: Option<f64>,
    #[serde(skip_serializing_if = "Option::is_none")]
    side: Option<&'static str>,
}

/// The text of `run.toml`.
pub(super) fn manifest(scenario: &Scenario, growth: &Growth) -> Result<String, SynthError> {
    let manifest = Manifest {
        run: &scenario.name,
        specimen: scenario.specimen.as_deref(),
        note: scenario.note.as_deref(),
        frames: FramesTable {
            files: "frames/*.png",
            interval_s: scenario.interval_s,
            um_per_px: scenario.um_per_px,
            filament: scenario.filament,
            bare: scenario.bare,
        },
        cell: CellTable {
            plating_edge: &scenario.plating_edge,
            far_edge: &scenario.far_edge,
            log: scenario.cell.log.then_some("cell.csv"),
            area_mm2: scenario.cell.area_mm2,
            view_depth_mm: scenario.cell.view_depth_mm,
            metal: "Li",
            ended: if growth.contact.is_some() { "short" } else { "stopped" },
        },
        load: load_table(scenario),
    };
    let body =
        toml::to_string(&manifest).map_err(|e| SynthError::Format { what: "run.toml", message: e.to_string() })?;
    Ok(format!("# Synthetic frames with known truth (truth/); invented, no real specimen.\n{body}"))
}

fn load_table(scenario: &Scenario) -> LoadTable {
    let plan = &scenario.load;
    let log = Some("load.csv");
    match plan.fixture {
        FixtureKind::None => LoadTable { fixture: "none", ..LoadTable::default() },
        FixtureKind::Stress => LoadTable { log, fixture: "stress", ..LoadTable::default() },
        FixtureKind::Uniaxial => {
            LoadTable { log, fixture: "uniaxial", area_mm2: Some(plan.area_mm2), ..LoadTable::default() }
        }
        FixtureKind::Stack => {
            LoadTable { log, fixture: "stack", area_mm2: Some(plan.area_mm2), ..LoadTable::default() }
        }
        FixtureKind::Cantilever => LoadTable {
            log,
            fixture: "cantilever",
            width_mm: Some(plan.width_mm),
            thickness_mm: Some(plan.thickness_mm),
            arm_mm: Some(plan.arm_mm),
            side: Some("compressed"),
            ..LoadTable::default()
        },
    }
}
