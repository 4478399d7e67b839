//! Runs under different loads, compared: did the load steer or slow the filaments, from what dose on, how surely, and what is
//! missing to be sure.
//!
//! ```text
//! read        a finished output folder → RunRecord         record      a run in plain records
//! groups      kind and dose → groups, the first contrast   fairness    is it the load alone that differs?
//! effects     direction, speed, branching                  endings     time to short, in time and in charge
//! threshold   the dose for half                            next        what would make it surer
//! campaign    invented campaigns with known truth: do the answers keep their word?
//! ```
//!
//! The specimen is the unit everywhere: filaments of a run and runs of a specimen share its fate. [`compare`] takes plain
//! records, so simulated runs without frames go the same way as read ones.

pub mod campaign;
pub mod effects;
pub mod endings;
pub mod fairness;
pub mod groups;
pub mod next;
pub mod read;
pub mod record;
pub mod threshold;

use std::collections::BTreeMap;

use serde::Serialize;

pub use record::RunRecord;

use crate::run::manifest::Ended;
use crate::stats::arrangements::holm;
use effects::{Effect, Gap, Quantity};
use endings::{Clock, Endings};
use fairness::Difference;
use groups::{Contrast, Group, Kind, Load};
use next::Next;
use threshold::{DoseResponse, Response};

/// Why runs cannot be compared.
#[derive(Debug, thiserror::Error, miette::Diagnostic)]
pub enum Fault {
    /// Fewer than two runs.
    #[error("{found} of the two or more runs that a comparison needs")]
    #[diagnostic(code(compare::runs), help("name two or more run folders, or a folder that holds them"))]
    Few {
        /// Runs found.
        found: usize,
    },
    /// Two runs have one name.
    #[error("two runs are called {run:?}")]
    #[diagnostic(
        code(compare::names),
        help("give each its own `run = \"…\"` in run.toml and type `veerlog report RUN` again")
    )]
    Names {
        /// The name.
        run: String,
    },
    /// Two runs are the same recording.
    #[error("{first:?} and {second:?} have the same frames: one recording was named twice")]
    #[diagnostic(code(compare::twice), help("leave one of them out"))]
    Twice {
        /// A run.
        first: String,
        /// The other.
        second: String,
    },
    /// The user's grouping does not fit the runs.
    #[error("the grouping does not fit: {what}")]
    #[diagnostic(code(compare::grouping))]
    Grouping {
        /// What is wrong.
        what: String,
        /// What to type.
        #[help]
        help: String,
    },
    /// The contrast names no group.
    #[error("there is no group {name:?}")]
    #[diagnostic(code(compare::contrast), help("the groups are {groups}"))]
    Contrast {
        /// What was named.
        name: String,
        /// What there is.
        groups: String,
    },
    /// The runs differ in more than the load.
    #[error("the runs differ in more than the load, which would bias the comparison: {what}")]
    #[diagnostic(
        code(compare::mixed),
        help("compare like with like, or type --accept-mixed to compare them all the same; the report will say so")
    )]
    Mixed {
        /// What differs.
        what: String,
    },
    /// The reference band has no width.
    #[error("the reference band ends where it begins, or before")]
    #[diagnostic(code(compare::reference), help("type two doses in MPa, the lower first, say --reference-mpa 150 200"))]
    Reference,
    /// An output folder cannot be read.
    #[error("{path}: {what}")]
    #[diagnostic(code(compare::output), help("type `veerlog report` on that run again"))]
    Output {
        /// The file.
        path: std::path::PathBuf,
        /// What is wrong.
        what: String,
    },
}

/// What a user may choose.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Plan {
    /// Seed of the draws.
    pub seed: u64,
    /// Group of each run, in place of those found.
    pub grouping: Option<BTreeMap<String, String>>,
    /// The primary contrast, control first, in place of the one chosen.
    pub contrast: Option<[String; 2]>,
    /// Compare runs that differ in more than the load.
    pub accept_mixed: bool,
    /// A band to draw, never used in a fit.
    pub reference: Option<Reference>,
}

/// A band of doses from elsewhere, drawn for the eye.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Reference {
    /// From, to, MPa.
    pub mpa: [f64; 2],
    /// Where it is from, in the user's words.
    pub source: String,
}

/// A row a run.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct RunRow {
    /// Name.
    pub run: String,
    /// Specimen.
    pub specimen: String,
    /// Group.
    pub group: String,
    /// Kind of load.
    pub kind: Kind,
    /// Median stress, MPa.
    pub stress_mpa: f64,
    /// Median dose, MPa.
    pub dose_mpa: Option<f64>,
    /// Time of the short or of the last look, s.
    pub followed_s: f64,
    /// How it ended.
    pub ended: Ended,
    /// Charge passed by then, mAh/cm².
    pub charge_mah_per_cm2: Option<f64>,
    /// Depth at the end, µm.
    pub depth_um: Option<f64>,
    /// Rate of depth, µm/min.
    pub rate_um_per_min: Option<f64>,
    /// Alignment with the plates.
    pub along_plates: Option<f64>,
    /// Alignment with the load axis.
    pub to_load: Option<f64>,
    /// Share of growth near the expected axis; only where its own load makes one.
    pub near_expected: Option<f64>,
    /// Share of filaments turned aside.
    pub turned: Option<f64>,
    /// Filaments rooted on the plating edge.
    pub filaments: usize,
    /// Ends on a millimetre.
    pub ends_per_mm: Option<f64>,
    /// Its report, from the comparison's folder.
    pub report: Option<String>,
}

/// Everything a comparison found.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Comparison {
    /// Name of the program.
    pub tool: &'static str,
    /// Its version.
    pub version: &'static str,
    /// Version of this file.
    pub format: u32,
    /// Seed of the draws.
    pub seed: u64,
    /// Whether mixed runs were accepted.
    pub accept_mixed: bool,
    /// Names of the groups of the primary contrast: control, treated.
    pub contrast: Option<[String; 2]>,
    /// Number of specimens.
    pub specimens: usize,
    /// A row a run, in order of group, then name.
    pub runs: Vec<RunRow>,
    /// The groups.
    pub groups: Vec<Group>,
    /// What differs beside the load.
    pub differences: Vec<Difference>,
    /// Direction, speed, branching.
    pub effects: Vec<Effect>,
    /// Time to short.
    pub time: Option<Endings>,
    /// Charge to short.
    pub charge: Option<Endings>,
    /// Share turned aside against dose.
    pub turned: DoseResponse,
    /// Alignment with the plates against dose.
    pub along_plates: DoseResponse,
    /// What would make the threshold surer.
    pub next: Next,
    /// The band drawn.
    pub reference_mpa: Option<Reference>,
    /// What needs a look.
    pub warnings: Vec<String>,
}

/// Numbers of specimens by name.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Specimens(Vec<usize>);

impl Specimens {
    /// Numbers the specimens of `records`.
    #[must_use]
    pub fn new(records: &[RunRecord]) -> Self {
        let mut numbers: BTreeMap<&str, usize> = BTreeMap::new();
        let number = |record| {
            let next = numbers.len();
            *numbers.entry(RunRecord::specimen_name(record)).or_insert(next)
        };
        Self(records.iter().map(number).collect())
    }

    /// The specimen of a record.
    #[must_use]
    pub fn of(&self, record: usize) -> usize {
        self.0[record]
    }

    /// How many there are.
    #[must_use]
    pub fn count(&self) -> usize {
        self.0.iter().max().map_or(0, |most| most + 1)
    }
}

/// Compares runs.
///
/// ```
/// use veerlog::compare::{campaign::Campaign, compare, Plan};
/// let drawn = Campaign::default().draw(7, 0);
/// let found = compare(&drawn.measured, &Plan::default())?;
/// assert_eq!((found.runs.len(), found.groups.len(), found.specimens), (24, 4, 6));
/// assert!(found.turned.half_mpa.is_some());
/// # Ok::<(), veerlog::compare::Fault>(())
/// ```
///
/// # Errors
/// [`Fault`] where there are too few runs, two have one name, a grouping or contrast does not fit, or the runs differ in more
/// than the load and that was not accepted.
pub fn compare(records: &[RunRecord], plan: &Plan) -> Result<Comparison, Fault> {
    if records.len() < 2 {
        return Err(Fault::Few { found: records.len() });
    }
    let mut names: Vec<&str> = records.iter().map(|r| r.run.as_str()).collect();
    names.sort_unstable();
    if let Some(pair) = names.windows(2).find(|pair| pair[0] == pair[1]) {
        return Err(Fault::Names { run: pair[0].to_owned() });
    }
    let differences = fairness::differences(records);
    let biased: Vec<String> =
        differences.iter().filter(|d| d.biases).map(|d| format!("{} ({})", d.what, d.values)).collect();
    if !biased.is_empty() && !plan.accept_mixed {
        return Err(Fault::Mixed { what: biased.join("; ") });
    }
    let loads: Vec<Load> = records.iter().map(Load::of).collect();
    let specimens = Specimens::new(records);
    let groups = groups::groups(records, &loads, plan.grouping.as_ref())?;
    let contrast = groups::primary(&groups, plan.contrast.as_ref())?;
    let seed = plan.seed;
    let mut effects = effects::effects(records, &specimens, &groups, contrast, seed);
    let ends = |clock| endings::endings(records, &specimens, &groups, contrast, clock, seed);
    let (mut time, mut charge) = (ends(Clock::Time), ends(Clock::Charge));
    adjust(contrast, &mut effects, &mut time, &mut charge);
    let dosed = |response| threshold::dose_response(response, records, &specimens, &groups, &loads, seed);
    let turned = dosed(Response::Turned);
    Ok(Comparison {
        tool: "veerlog",
        version: env!("CARGO_PKG_VERSION"),
        format: 1,
        seed,
        accept_mixed: plan.accept_mixed,
        contrast: contrast.map(|c| [c.control, c.treated].map(|g| groups[g].name.clone())),
        specimens: specimens.count(),
        runs: rows(records, &groups, &loads),
        differences,
        effects,
        time,
        charge,
        next: next::next(&turned, seed),
        along_plates: dosed(Response::AlongPlates),
        turned,
        reference_mpa: plan.reference.clone(),
        warnings: warnings(records),
        groups,
    })
}

/// Holm's adjustment over the primary contrasts: one an effect and one a clock.
fn adjust(
    contrast: Option<Contrast>,
    effects: &mut [Effect],
    time: &mut Option<Endings>,
    charge: &mut Option<Endings>,
) {
    let Some(contrast) = contrast else { return };
    let mut primary: Vec<&mut Gap> = effects
        .iter_mut()
        .filter(|effect| effect.quantity != Quantity::ToLoad)
        .filter_map(|effect| effect.differences[contrast.treated].as_mut())
        .chain([time, charge].into_iter().filter_map(|e| e.as_mut()?.difference.as_mut()))
        .filter(|gap| gap.test.is_some())
        .collect();
    let p: Vec<f64> = primary.iter().filter_map(|gap| gap.test.map(|t| t.p)).collect();
    for (gap, adjusted) in primary.iter_mut().zip(holm(&p)) {
        gap.p_holm = Some(adjusted);
    }
}

fn rows(records: &[RunRecord], groups: &[Group], loads: &[Load]) -> Vec<RunRow> {
    let row = |i: usize, group: &Group| {
        let (record, load) = (&records[i], loads[i]);
        RunRow {
            run: record.run.clone(),
            specimen: record.specimen_name().to_owned(),
            group: group.name.clone(),
            kind: load.kind,
            stress_mpa: load.stress_mpa,
            dose_mpa: load.dose_mpa,
            followed_s: record.followed_s,
            ended: record.ended,
            charge_mah_per_cm2: record.charge_mah_per_cm2,
            depth_um: record.depths.last().map(|(_, depth)| *depth),
            rate_um_per_min: Quantity::Rate.of(record, None),
            along_plates: record.along_plates(),
            to_load: record.to_load(),
            near_expected: record.near_expected(None),
            turned: Quantity::Turned.of(record, None),
            filaments: record.filaments.len(),
            ends_per_mm: record.ends_per_mm(),
            report: None,
        }
    };
    groups.iter().flat_map(|group| group.members.iter().map(move |&i| row(i, group))).collect()
}

fn warnings(records: &[RunRecord]) -> Vec<String> {
    let unnamed: Vec<&str> = records.iter().filter(|r| r.specimen.is_none()).map(|r| r.run.as_str()).collect();
    let mut all = Vec::new();
    if !unnamed.is_empty() {
        all.push(format!(
            "no specimen is named for {}: each is taken as a specimen of its own, which makes every result too sure if they \
             share one",
            unnamed.join(", ")
        ));
    }
    all.extend(records.iter().flat_map(|r| r.warnings.iter().map(move |w| format!("{}: {w}", r.run))));
    all
}
