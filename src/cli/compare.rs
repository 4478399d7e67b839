//! `veerlog compare RUN RUN…`: finished runs under different loads, compared; unfinished ones are analysed first.

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

use clap::Args;

use super::progress::Bar;
use super::{Globals, Outcome};
use crate::Error;
use crate::compare::read::{SUMMARY, read};
use crate::compare::{Comparison, Fault, Plan, Reference, RunRecord, compare};
use crate::pipeline::{Choices, Progress, analyse};
use crate::report::comparison::{OURS, verdict::verdict, write};
use crate::report::write::{OURS as OUTPUT_FILES, refuse_foreign};
use crate::report::{Save, write as write_report};
use crate::run::manifest::FILE_NAME;

/// Name of the output folder inside a run folder.
const OUTPUT: &str = "veerlog";

/// Compare runs under different loads: did the load steer or slow the filaments, from what dose on
#[derive(Debug, Args)]
#[command(
    after_help = "Examples:\n  veerlog compare runs --out comparison\n  veerlog compare still-1 still-2 along-1 along-2 --out comparison\n  \
veerlog compare runs --grouping grouping.csv --contrast \"no load\" \"bent\" --out comparison\n\n\
Loading a brittle cell can break it: no load above the highest tested is ever proposed. A cell on test can vent, burn or shatter."
)]
pub(super) struct CompareArgs {
    /// Run folders, output folders, or folders that hold them
    #[arg(required = true, value_name = "RUN")]
    runs: Vec<PathBuf>,
    /// Output folder
    #[arg(long, value_name = "DIR")]
    out: PathBuf,
    /// Groups of your own: a CSV file with the columns run,group
    #[arg(long, value_name = "FILE")]
    grouping: Option<PathBuf>,
    /// The two groups to test first, control first [default: the highest dose against no load]
    #[arg(long, num_args = 2, value_names = ["CONTROL", "GROUP"])]
    contrast: Option<Vec<String>>,
    /// Compare runs that differ in more than the load; the report says so
    #[arg(long)]
    accept_mixed: bool,
    /// Draw a band of doses from elsewhere, never used in a fit
    #[arg(long, num_args = 2, value_names = ["FROM", "TO"], allow_negative_numbers = true, requires = "reference_source")]
    reference_mpa: Option<Vec<f64>>,
    /// Where that band is from, written beside it
    #[arg(long, value_name = "TEXT", requires = "reference_mpa")]
    reference_source: Option<String>,
    /// Seed of every random draw
    #[arg(long, value_name = "N", default_value_t = 0)]
    seed: u64,
}

/// Compares the runs and writes the output folder.
///
/// # Errors
/// What stops the reading of a run, what makes runs incomparable, or a failure to write.
pub(super) fn run(args: &CompareArgs, globals: Globals) -> Result<Outcome, Error> {
    refuse_foreign(&args.out, &OURS)?;
    let plan = plan(args)?;
    let places = places(&args.runs)?;
    let bar = Bar::new(globals.quiet);
    finish(&places, &bar)?;
    bar.stage("comparing", None);
    let records = records(&places)?;
    let found = compare(&records, &plan)?;
    write(&records, &found, &args.out)?;
    drop(bar);
    Ok(Outcome { text: text(&found, &args.out), warnings: looks(&found), ..Outcome::default() })
}

fn plan(args: &CompareArgs) -> Result<Plan, Error> {
    let reference = args.reference_mpa.as_deref().zip(args.reference_source.clone());
    let reference = match reference {
        Some((&[from, to], source)) if from < to => Some(Reference { mpa: [from, to], source }),
        Some(_) => {
            return Err(Fault::Reference.into());
        }
        None => None,
    };
    let contrast = args.contrast.as_deref().and_then(|names| <[String; 2]>::try_from(names.to_vec()).ok());
    let grouping = args.grouping.as_deref().map(grouping).transpose()?;
    Ok(Plan { seed: args.seed, grouping, contrast, accept_mixed: args.accept_mixed, reference })
}

/// `run,group` lines, in whatever order the two columns stand.
fn grouping(path: &Path) -> Result<BTreeMap<String, String>, Error> {
    let text = std::fs::read_to_string(path).map_err(|source| Error::Io { path: path.to_owned(), source })?;
    let wrong = |line: usize, what: &str| Fault::Grouping {
        what: format!("{}, line {line}: {what}", path.display()),
        help: "write a heading `run,group`, then a line a run".to_owned(),
    };
    let mut lines = text.trim_start_matches('\u{feff}').lines().enumerate().filter(|(_, line)| !line.trim().is_empty());
    let cells =
        |line: &str| line.split([',', ';', '\t']).map(|c| c.trim().trim_matches('"').to_owned()).collect::<Vec<_>>();
    let (_, heading) = lines.next().ok_or_else(|| wrong(1, "the file is empty"))?;
    let heading = cells(heading);
    let column = |name: &str| heading.iter().position(|h| h.eq_ignore_ascii_case(name));
    let (run, group) = column("run").zip(column("group")).ok_or_else(|| wrong(1, "there is no heading `run,group`"))?;
    let mut groups = BTreeMap::new();
    for (i, line) in lines {
        let cells = cells(line);
        let get = |c: usize| cells.get(c).filter(|v| !v.is_empty()).cloned();
        let (Some(run), Some(group)) = (get(run), get(group)) else {
            return Err(wrong(i + 1, "run or group is empty").into());
        };
        if groups.insert(run.clone(), group).is_some() {
            return Err(wrong(i + 1, &format!("the run {run:?} is there twice")).into());
        }
    }
    Ok(groups)
}

/// A run to compare: its folder, where there is one, and where its output is or will be.
struct Place {
    run: Option<PathBuf>,
    output: PathBuf,
}

/// The runs named, and those in the folders named, in order of path, each once.
fn places(named: &[PathBuf]) -> Result<Vec<Place>, Error> {
    let mut places: Vec<Place> = Vec::new();
    for path in named {
        if let Some(place) = place(path) {
            places.push(place);
            continue;
        }
        let read = std::fs::read_dir(path).map_err(|source| Error::Io { path: path.clone(), source })?;
        let mut below: Vec<PathBuf> =
            read.filter_map(|entry| entry.ok().map(|e| e.path())).filter(|p| p.is_dir()).collect();
        below.sort();
        places.extend(below.iter().filter_map(|p| place(p)));
    }
    places.sort_by(|a, b| a.output.cmp(&b.output));
    places.dedup_by(|a, b| a.output == b.output);
    if places.len() < 2 {
        return Err(Fault::Few { found: places.len() }.into());
    }
    Ok(places)
}

fn place(path: &Path) -> Option<Place> {
    if path.join(FILE_NAME).is_file() {
        return Some(Place { run: Some(path.to_owned()), output: path.join(OUTPUT) });
    }
    path.join(SUMMARY).is_file().then(|| Place { run: None, output: path.to_owned() })
}

/// Analyses the runs that have no output yet.
fn finish(places: &[Place], bar: &Bar) -> Result<(), Error> {
    for place in places {
        if let (Some(run), false) = (&place.run, place.output.join(SUMMARY).is_file()) {
            refuse_foreign(&place.output, &OUTPUT_FILES)?;
            let results = analyse(run, Choices::default(), bar)?;
            write_report(&results, &place.output, Save::default())?;
        }
    }
    Ok(())
}

fn records(places: &[Place]) -> Result<Vec<RunRecord>, Error> {
    use rayon::prelude::*;
    let all: Vec<_> =
        places.par_iter().map(|p| read(&p.output, p.run.as_deref())).collect::<Result<Vec<_>, Fault>>()?;
    for (i, second) in all.iter().enumerate() {
        if let Some(first) = all[..i].iter().find(|first| first.recording == second.recording) {
            return Err(Fault::Twice { first: first.record.run.clone(), second: second.record.run.clone() }.into());
        }
    }
    Ok(all.into_iter().map(|read| read.record).collect())
}

fn text(found: &Comparison, out: &Path) -> String {
    let mut lines: Vec<String> = found
        .groups
        .iter()
        .map(|g| format!("{}: {} runs on {} specimens", g.name, g.members.len(), g.specimens))
        .collect();
    lines.extend(verdict(found).into_iter().map(|[head, said]| format!("{head} {said}").replace("?:", "?")));
    lines.push(
        "Loading a brittle cell can break it: follow the lab's own rules, local codes and qualified people.".to_owned(),
    );
    lines.push(format!("Comparison: {}", out.join("comparison.html").display()));
    lines.join("\n")
}

/// What needs a look.
fn looks(found: &Comparison) -> Vec<String> {
    let mixed =
        found.differences.iter().filter(|d| d.biases).map(|d| format!("{} differs ({}): {}", d.what, d.values, d.why));
    mixed.chain(found.warnings.iter().cloned()).collect()
}
