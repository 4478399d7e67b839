//! `veerlog report RUN`: the whole analysis of one run, written to its output folder.

use std::path::{Path, PathBuf};

use clap::{Args, ValueEnum};

use super::keeper::Keeper;
use super::progress::Bar;
use super::{Globals, Outcome};
use crate::Error;
use crate::pipeline::{Choices, Progress, analyse};
use crate::report::records::summary_json;
use crate::report::verdict::Verdict;
use crate::report::write::{OURS, refuse_foreign};
use crate::report::{Save, write};
use crate::results::Results;

/// Name of the output folder inside the run folder.
const OUTPUT: &str = "veerlog";

/// Shown below the help.
const EXAMPLES: &str = "\
Examples:
  veerlog report run-12                        # writes run-12/veerlog/report.html and all beside it
  veerlog report run-12 --out results/run-12   # elsewhere
  veerlog report run-12 --until 3600           # as if the run had ended after an hour
  veerlog report run-12 --frames all           # every frame in the page's player, as files beside it
  veerlog report run-12 --json | jq .depth     # the summary for scripts

What the page marked as wrong (review.toml in the run folder) is left out, and the report gives both sets of numbers.";

/// Trace the filaments of a run, measure them against the load and forecast the short
#[derive(Debug, Args)]
#[command(after_help = EXAMPLES)]
pub(super) struct ReportArgs {
    /// Run folder
    run: PathBuf,
    /// Output folder [default: RUN/veerlog]
    #[arg(long, value_name = "DIR")]
    out: Option<PathBuf>,
    /// Analyse as if the run ended at this time, s since the first frame
    #[arg(long, value_name = "T", allow_negative_numbers = true)]
    until: Option<f64>,
    /// Also write these
    #[arg(long, value_name = "WHAT")]
    save: Vec<Extra>,
    /// Frames that the page's player shows
    #[arg(long, value_name = "WHICH", value_enum, default_value_t = Shown::Few)]
    frames: Shown,
    /// Print summary.json in place of words
    #[arg(long)]
    json: bool,
}

/// Frames of the player.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
enum Shown {
    /// A choice, held in the page
    Few,
    /// Every usable frame, as files in a folder beside the page
    All,
}

/// What can be written beyond the standing files.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
enum Extra {
    /// One picture a usable frame, 255 = filament
    Masks,
}

/// Analyses the run and writes the output folder.
///
/// # Errors
/// Whatever stops the reading of the run or the writing of the output.
pub(super) fn run(args: &ReportArgs, globals: Globals) -> Result<Outcome, Error> {
    let target = args.out.clone().unwrap_or_else(|| args.run.join(OUTPUT));
    refuse_foreign(&target, &OURS)?;
    let bar = Bar::new(globals.quiet);
    if let Some(until) = args.until.filter(|t| !t.is_finite() || *t < 0.0) {
        return Err(Error::Until { until });
    }
    let choices = Choices { until_s: args.until };
    let save = Save { masks: args.save.contains(&Extra::Masks), frames: None };
    let results = if args.frames == Shown::All {
        let keeper = Keeper::new(&bar, &target)?;
        let results = analyse(&args.run, choices, &keeper)?;
        bar.stage("writing", None);
        write(&results, &target, Save { frames: Some(keeper.finished(&results)?), ..save })?;
        results
    } else {
        let results = analyse(&args.run, choices, &bar)?;
        bar.stage("writing", None);
        write(&results, &target, save)?;
        results
    };
    drop(bar);
    let text = if args.json { summary_json(&results.summary)? } else { text(&results, &target) };
    Ok(Outcome { text, plain: args.json, warnings: results.summary.warnings.clone() })
}

/// The run in ten lines.
fn text(results: &Results, target: &Path) -> String {
    let summary = &results.summary;
    let mut lines = vec![format!(
        "{}: {} of {} frames used, {} filaments traced",
        summary.run,
        summary.frames.usable,
        summary.frames.total,
        results.filaments.len()
    )];
    if let Some(review) = &summary.review {
        let count = review.marks.iter().filter(|mark| mark.not_applied.is_none()).count();
        lines.push(format!(
            "what {count} of {} marks of review.toml reject is left out of all that follows",
            review.marks.len()
        ));
    }
    lines.extend(Verdict::of(results).sentences().iter().map(|s| (*s).to_owned()));
    let forecast = summary.forecast.as_ref();
    if let Some((row, p10, p50, p90)) = forecast.and_then(|f| Some((f, f.p10_s?, f.p50_s?, f.p90_s?))) {
        lines.push(format!(
            "last forecast, issued at {:.0} s: contact, if it comes, at {p50:.0} s ({p10:.0} to {p90:.0} s, 80 %); {}",
            row.issued_at_s,
            row.chance_by_horizon.map_or_else(
                || "no chance given".to_owned(),
                |c| format!("{:.0} % by {:.0} s", 100.0 * c, row.horizon_s)
            )
        ));
    }
    lines.push("A forecast is no interlock: follow the lab's own rules, local codes and qualified people.".to_owned());
    lines.push(format!("Report: {}", target.join("report.html").display()));
    lines.join("\n")
}
