//! `veerlog score RUN…`: outputs of synthetic runs against their truth.

use std::path::PathBuf;

use clap::Args;

use crate::synth::SynthError;
use crate::synth::score::{Summary, score_run};

/// Shown below the help.
const EXAMPLES: &str = "\
Examples:
  veerlog score RUN
  veerlog score fleet/run-* --json > scores.json";

/// Compare the outputs of synthetic runs with their truth
#[derive(Debug, Clone, Args)]
#[command(after_help = EXAMPLES)]
pub(super) struct ScoreArgs {
    /// Run folders that hold truth/ and an output
    #[arg(required = true, value_name = "RUN")]
    runs: Vec<PathBuf>,
    /// Name of the output folder inside each run
    #[arg(long, value_name = "NAME", default_value = "veerlog")]
    output: PathBuf,
    /// Print JSON: the same figures, and every run's own
    #[arg(long)]
    json: bool,
}

/// Runs the command and gives the text to print.
/// # Errors
/// A run without truth or output, or with files that are not as the contract has them.
pub(super) fn run(args: &ScoreArgs) -> Result<String, SynthError> {
    let scores = args.runs.iter().map(|run| score_run(run, Some(&run.join(&args.output)))).collect::<Result<_, _>>()?;
    let summary = Summary::of(scores);
    if args.json {
        let text = serde_json::to_string_pretty(&summary);
        return text.map_err(|e| SynthError::Format { what: "the figures", message: e.to_string() });
    }
    Ok(summary.to_string())
}
