//! `veerlog synth DIR`: frames with known truth, from a scenario file or drawn within a grade.

use std::path::{Path, PathBuf};

use clap::{Args, ValueEnum};

use crate::synth::{Grade, Scenario, SynthError, draw, draw_bare, write_run};

/// Shown below the help.
const EXAMPLES: &str = "\
Examples:
  veerlog synth NEW --scenario scenario.toml
  veerlog synth NEW --grade typical --seed 7
  veerlog synth FLEET --grade hard --fleet 20
  veerlog synth DIR --rebuild             # from the scenario.toml in DIR";

/// Write synthetic runs with known truth
#[derive(Debug, Clone, Args)]
#[command(after_help = EXAMPLES)]
pub(super) struct SynthArgs {
    /// Folder to write; it must not exist or be empty
    dir: PathBuf,
    /// Scenario file (TOML)
    #[arg(long, value_name = "FILE", conflicts_with_all = ["grade", "rebuild"])]
    scenario: Option<PathBuf>,
    /// Draw a run of this grade
    #[arg(long, value_enum)]
    grade: Option<GradeArg>,
    /// Seed of the draw (runs of a fleet take this one and the following)
    #[arg(long, default_value_t = 1)]
    seed: u64,
    /// Write N drawn runs, each in a folder of DIR
    #[arg(long, value_name = "N", requires = "grade")]
    fleet: Option<u64>,
    /// Draw cells in which nothing grows
    #[arg(long, requires = "grade")]
    no_growth: bool,
    /// Write the run beside the scenario.toml that DIR holds
    #[arg(long, conflicts_with_all = ["grade", "fleet"])]
    rebuild: bool,
}

/// Grades as the command line names them.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
pub(super) enum GradeArg {
    /// Contrast 0.35, noise 1 grey level
    Clear,
    /// Contrast 0.18, noise 2.6, drift, flicker, grain lines
    Typical,
    /// Contrast 0.09, noise 7, jumps, wandering focus, dust, lost frames
    Hard,
}

impl From<GradeArg> for Grade {
    fn from(grade: GradeArg) -> Self {
        match grade {
            GradeArg::Clear => Self::Clear,
            GradeArg::Typical => Self::Typical,
            GradeArg::Hard => Self::Hard,
        }
    }
}

/// Runs the command and gives the text to print.
/// # Errors
/// A scenario that cannot be read, or a folder that is not empty or cannot be written.
pub(super) fn run(args: &SynthArgs) -> Result<String, SynthError> {
    if args.rebuild {
        crate::synth::rebuild(&args.dir)?;
    } else if let Some(path) = &args.scenario {
        write_run(&Scenario::load(path)?, &args.dir)?;
    } else if let Some(count) = args.fleet {
        for i in 0..count {
            drawn(args, args.seed + i, &args.dir.join(format!("run-{:03}", i + 1)))?;
        }
        return Ok(format!("{count} runs in {}; the truth of each is in its truth/", args.dir.display()));
    } else {
        drawn(args, args.seed, &args.dir)?;
    }
    Ok(format!("{}: a run with its truth in truth/", args.dir.display()))
}

/// Draws and writes one run.
fn drawn(args: &SynthArgs, seed: u64, folder: &Path) -> Result<(), SynthError> {
    let grade = args.grade.unwrap_or(GradeArg::Clear).into();
    let scenario = if args.no_growth { draw_bare(grade, seed) } else { draw(grade, seed) };
    let settled = scenario.settle().map_err(|message| SynthError::Scenario { path: folder.to_owned(), message })?;
    write_run(&settled, folder)
}
