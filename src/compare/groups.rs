//! Which runs belong together: by the kind of their load and its dose, or as the user says in `grouping.csv`.
//!
//! The groups and the contrast that is tested first are settled from loads and specimens alone, before any result is looked
//! at. Limit: a run whose expected axis moved by more than 20° is "turning", whatever its mean dose.

use std::collections::{BTreeMap, BTreeSet};

use serde::Serialize;

use super::{Fault, RunRecord};
use crate::stats::angles::acute;
use crate::stats::axial::weighted_axial_mean;
use crate::stats::order::median;

/// Stress below this is no load, MPa (common practice: the weight of a fixture).
const NO_LOAD_MPA: f64 = 1.0;
/// Share of the largest stress from which on a sample's axis counts.
const UNDER_LOAD: f64 = 0.1;
/// An expected axis that moves further than this has turned, degrees (common practice).
const TURNED_DEG: f64 = 20.0;
/// Share of the samples that must have turned: a log's outliers are no turn.
const TURNED_SHARE: f64 = 0.05;
/// A load axis within this of the plates runs along them, of their normal through them, degrees: half-way to oblique.
const NEAR_DEG: f64 = 22.5;
/// Doses further apart than this, MPa, or than this share of the larger, are two groups (common practice).
const APART_MPA: f64 = 10.0;
/// See [`APART_MPA`].
const APART_SHARE: f64 = 0.1;

/// The kind of a load.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Kind {
    /// No stress.
    None,
    /// The axis lies along the plates.
    Along,
    /// The axis runs through the plates.
    Through,
    /// In between.
    Oblique,
    /// The expected axis moved.
    Turning,
    /// A stress without an axis in the picture.
    NoAxis,
}

impl Kind {
    /// In words.
    #[must_use]
    pub fn words(self) -> &'static str {
        match self {
            Self::None => "no load",
            Self::Along => "along the plates",
            Self::Through => "through the plates",
            Self::Oblique => "oblique",
            Self::Turning => "turning",
            Self::NoAxis => "no axis in the picture",
        }
    }
}

/// The load of a whole run.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Load {
    /// Its kind.
    pub kind: Kind,
    /// Median stress, MPa; 0 without load.
    pub stress_mpa: f64,
    /// Median dose, MPa; 0 without load, absent where the load turned or has no axis.
    pub dose_mpa: Option<f64>,
}

impl Load {
    /// The kind and dose of a run's load.
    #[must_use]
    pub fn of(record: &RunRecord) -> Self {
        let samples = &record.load.samples;
        let stresses: Vec<f64> = samples.iter().filter_map(|s| s.stress_mpa).collect();
        let largest = stresses.iter().fold(0.0_f64, |m, s| m.max(s.abs()));
        if largest < NO_LOAD_MPA {
            return Self { kind: Kind::None, stress_mpa: 0.0, dose_mpa: Some(0.0) };
        }
        let stress_mpa = median(&stresses).unwrap_or(0.0);
        let loaded: Vec<(f64, f64)> = samples
            .iter()
            .filter_map(|s| Some((s.stress_mpa?, s.axis_to_edge_deg?)))
            .filter(|(stress, _)| stress.abs() >= UNDER_LOAD * largest)
            .collect();
        let expected = loaded.iter().map(|(stress, axis)| if *stress > 0.0 { *axis } else { axis + 90.0 });
        let Some(mean) = weighted_axial_mean(expected.clone().map(|axis| (axis, 1.0))).and_then(|m| m.axis_deg) else {
            let kind = if loaded.is_empty() { Kind::NoAxis } else { Kind::Turning };
            return Self { kind, stress_mpa, dose_mpa: None };
        };
        let turned = expected.filter(|axis| acute(*axis, mean) > TURNED_DEG).count();
        if turned as f64 > TURNED_SHARE * loaded.len() as f64 {
            return Self { kind: Kind::Turning, stress_mpa, dose_mpa: None };
        }
        let axis = acute(if stress_mpa < 0.0 { mean + 90.0 } else { mean }, 0.0);
        let kind = match axis {
            a if a <= NEAR_DEG => Kind::Along,
            a if a >= 90.0 - NEAR_DEG => Kind::Through,
            _ => Kind::Oblique,
        };
        let doses: Vec<f64> = samples
            .iter()
            .filter_map(|s| Some(s.stress_mpa? * libm::cos((2.0 * s.axis_to_edge_deg?).to_radians())))
            .collect();
        Self { kind, stress_mpa, dose_mpa: median(&doses) }
    }
}

/// Runs that had the same load.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Group {
    /// Its name.
    pub name: String,
    /// Kind of its load; absent where the user put several together.
    pub kind: Option<Kind>,
    /// Median dose of its runs, MPa.
    pub dose_mpa: Option<f64>,
    /// Its runs, as numbers into the records.
    #[serde(skip)]
    pub members: Vec<usize>,
    /// Specimens.
    pub specimens: usize,
}

/// The groups in order of dose, no load first where it comes; those without a dose last.
///
/// # Errors
/// [`Fault::Grouping`] when `grouping` names a run that is not there or leaves one out.
pub fn groups(
    records: &[RunRecord],
    loads: &[Load],
    grouping: Option<&BTreeMap<String, String>>,
) -> Result<Vec<Group>, Fault> {
    let members = match grouping {
        Some(names) => by_name(records, names)?,
        None => by_load(loads),
    };
    let mut groups: Vec<Group> =
        members.into_iter().map(|(name, members)| group(records, loads, name, members)).collect();
    let rank = |g: &Group| (g.dose_mpa.is_none(), g.dose_mpa.unwrap_or(0.0));
    groups.sort_by(|a, b| {
        let ((no_a, a_mpa), (no_b, b_mpa)) = (rank(a), rank(b));
        no_a.cmp(&no_b).then(a_mpa.total_cmp(&b_mpa)).then(a.name.cmp(&b.name))
    });
    Ok(groups)
}

fn group(records: &[RunRecord], loads: &[Load], name: Option<String>, members: Vec<usize>) -> Group {
    let kinds: BTreeSet<Kind> = members.iter().map(|&i| loads[i].kind).collect();
    let doses: Option<Vec<f64>> = members.iter().map(|&i| loads[i].dose_mpa).collect();
    let dose_mpa = doses.and_then(|d| median(&d));
    let kind = kinds.first().copied().filter(|_| kinds.len() == 1);
    let stress: Vec<f64> = members.iter().map(|&i| loads[i].stress_mpa).collect();
    let name = name.unwrap_or_else(|| match (kind, dose_mpa) {
        (Some(Kind::None) | None, _) => Kind::None.words().to_owned(),
        (Some(kind), level) => {
            let level = level.or_else(|| median(&stress)).unwrap_or(0.0);
            format!("{}, {level:.0} MPa", kind.words()).replace('-', "−")
        }
    });
    let specimens = members.iter().map(|&i| records[i].specimen_name()).collect::<BTreeSet<_>>().len();
    Group { name, kind, dose_mpa, members, specimens }
}

type Named = Vec<(Option<String>, Vec<usize>)>;

fn by_name(records: &[RunRecord], names: &BTreeMap<String, String>) -> Result<Named, Fault> {
    if let Some(stranger) = names.keys().find(|name| records.iter().all(|r| r.run != **name)) {
        return Err(Fault::Grouping {
            what: format!("it names the run {stranger:?}, which is not compared"),
            help: format!("the runs are {}", listed(records)),
        });
    }
    let mut members: BTreeMap<&String, Vec<usize>> = BTreeMap::new();
    for (i, record) in records.iter().enumerate() {
        let group = names.get(&record.run).ok_or_else(|| Fault::Grouping {
            what: format!("it leaves out the run {:?}", record.run),
            help: format!("add the line `{},GROUP`, or leave that run out of the comparison", record.run),
        })?;
        members.entry(group).or_default().push(i);
    }
    Ok(members.into_iter().map(|(name, members)| (Some(name.clone()), members)).collect())
}

fn listed(records: &[RunRecord]) -> String {
    records.iter().map(|r| r.run.as_str()).collect::<Vec<_>>().join(", ")
}

/// By kind, then cut where the dose (the stress, where there is no dose) leaps.
fn by_load(loads: &[Load]) -> Named {
    let mut by_kind: BTreeMap<Kind, Vec<usize>> = BTreeMap::new();
    for (i, load) in loads.iter().enumerate() {
        by_kind.entry(load.kind).or_default().push(i);
    }
    let level = |i: usize| loads[i].dose_mpa.unwrap_or(loads[i].stress_mpa);
    let mut members = Vec::new();
    for mut runs in by_kind.into_values() {
        runs.sort_by(|a, b| level(*a).total_cmp(&level(*b)));
        let near = |a: &usize, b: &usize| {
            let (a, b) = (level(*a), level(*b));
            b - a <= APART_MPA.max(APART_SHARE * a.abs().max(b.abs()))
        };
        members.extend(runs.chunk_by(near).map(|chunk| {
            let mut chunk = chunk.to_vec();
            chunk.sort_unstable();
            (None, chunk)
        }));
    }
    members
}

/// The two groups that are tested first.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Contrast {
    /// The one without load, or with the least.
    pub control: usize,
    /// The one judged against it.
    pub treated: usize,
}

/// Chooses the primary contrast from the loads alone: the highest dose along the plates (where none is above 0, the furthest
/// below) against no load (where there is none, the dose next to 0), groups of two specimens or more first. `asked` names the
/// two, control first. `None` with fewer than two groups.
///
/// # Errors
/// [`Fault::Contrast`] when `asked` names a group that is not there.
pub fn primary(groups: &[Group], asked: Option<&[String; 2]>) -> Result<Option<Contrast>, Fault> {
    if let Some(names) = asked {
        let find = |name: &String| {
            groups.iter().position(|g| g.name == *name).ok_or_else(|| Fault::Contrast {
                name: name.clone(),
                groups: groups.iter().map(|g| format!("{:?}", g.name)).collect::<Vec<_>>().join(", "),
            })
        };
        let contrast = Contrast { control: find(&names[0])?, treated: find(&names[1])? };
        return Ok(Some(contrast).filter(|c| c.control != c.treated));
    }
    let nearness = |g: &Group| (g.kind != Some(Kind::None), g.dose_mpa.map_or(f64::INFINITY, f64::abs));
    let order = |a: &Group, b: &Group| {
        let ((ka, da), (kb, db)) = (nearness(a), nearness(b));
        ka.cmp(&kb).then(da.total_cmp(&db))
    };
    let Some(control) = (0..groups.len()).min_by(|a, b| order(&groups[*a], &groups[*b])) else { return Ok(None) };
    let weight = |i: &usize| {
        let group = &groups[*i];
        let dose = group.dose_mpa.map_or(f64::NEG_INFINITY, |d| if d > 0.0 { d } else { d.abs() - 1e9 });
        (group.specimens >= 2, dose)
    };
    let treated = (0..groups.len()).filter(|i| *i != control).max_by(|a, b| {
        let ((sa, da), (sb, db)) = (weight(a), weight(b));
        sa.cmp(&sb).then(da.total_cmp(&db))
    });
    Ok(treated.map(|treated| Contrast { control, treated }))
}

#[cfg(test)]
mod tests {
    use super::super::record::{LoadRecord, LoadSample};
    use super::*;

    fn run(name: &str, specimen: &str, samples: &[(f64, Option<f64>)]) -> RunRecord {
        let sample =
            |(stress, axis): &(f64, Option<f64>)| LoadSample { stress_mpa: Some(*stress), axis_to_edge_deg: *axis };
        let samples = samples.iter().map(sample).collect();
        RunRecord {
            run: name.into(),
            specimen: Some(specimen.into()),
            load: LoadRecord { samples },
            ..Default::default()
        }
    }

    fn kind(samples: &[(f64, Option<f64>)]) -> (Kind, Option<f64>) {
        let load = Load::of(&run("r", "s", samples));
        (load.kind, load.dose_mpa.map(f64::round))
    }

    #[test]
    fn kinds_follow_from_axis_and_sign() {
        assert_eq!(Load::of(&RunRecord::default()).kind, Kind::None);
        assert_eq!(kind(&[(0.2, Some(0.0))]), (Kind::None, Some(0.0)));
        assert_eq!(kind(&[(180.0, Some(2.0)), (180.0, Some(178.0))]), (Kind::Along, Some(180.0)));
        assert_eq!(kind(&[(180.0, Some(90.0))]), (Kind::Through, Some(-180.0)));
        assert_eq!(kind(&[(-100.0, Some(0.0))]), (Kind::Along, Some(-100.0)));
        assert_eq!(kind(&[(100.0, Some(45.0))]), (Kind::Oblique, Some(0.0)));
        assert_eq!(kind(&[(100.0, Some(40.0)), (100.0, Some(130.0))]), (Kind::Turning, None));
        assert_eq!(kind(&[(100.0, Some(0.0)), (-100.0, Some(0.0))]), (Kind::Turning, None));
        assert_eq!(kind(&[(100.0, None)]), (Kind::NoAxis, None));
    }

    fn campaign() -> (Vec<RunRecord>, Vec<Load>) {
        let runs = vec![
            run("a", "A", &[(178.0, Some(0.0))]),
            run("b", "B", &[(60.0, Some(0.0))]),
            run("c", "A", &[(0.0, Some(0.0))]),
            run("d", "B", &[(182.0, Some(0.0))]),
            run("e", "C", &[(100.0, Some(90.0))]),
            run("f", "C", &[(300.0, Some(0.0))]),
        ];
        let loads = runs.iter().map(Load::of).collect();
        (runs, loads)
    }

    #[test]
    fn doses_near_each_other_are_one_group_and_the_contrast_is_chosen_by_design() {
        let (runs, loads) = campaign();
        let groups = groups(&runs, &loads, None).unwrap();
        let names: Vec<&str> = groups.iter().map(|g| g.name.as_str()).collect();
        assert_eq!(
            names,
            [
                "through the plates, −100 MPa",
                "no load",
                "along the plates, 60 MPa",
                "along the plates, 180 MPa",
                "along the plates, 300 MPa"
            ]
        );
        assert_eq!(groups[3].members, [0, 3]);
        // 300 MPa is higher, but of one specimen alone.
        assert_eq!(primary(&groups, None).unwrap(), Some(Contrast { control: 1, treated: 3 }));
        let asked = ["no load".to_owned(), "along the plates, 300 MPa".to_owned()];
        assert_eq!(primary(&groups, Some(&asked)).unwrap(), Some(Contrast { control: 1, treated: 4 }));
        assert!(primary(&groups, Some(&["no load".into(), "x".into()])).is_err());
        assert_eq!(primary(&[], None).unwrap(), None);
    }

    #[test]
    fn the_user_may_group_and_slips_are_named() {
        let (runs, loads) = campaign();
        let mut names: BTreeMap<String, String> =
            runs.iter().map(|r| (r.run.clone(), if r.run.as_str() < "d" { "x" } else { "y" }.to_owned())).collect();
        let found = groups(&runs, &loads, Some(&names)).unwrap();
        assert_eq!(found.len(), 2);
        names.remove("c");
        assert!(groups(&runs, &loads, Some(&names)).unwrap_err().to_string().contains("leaves out the run \"c\""));
        names.insert("zz".into(), "x".into());
        assert!(groups(&runs, &loads, Some(&names)).unwrap_err().to_string().contains("\"zz\""));
    }
}
