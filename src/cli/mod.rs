//! The command line: one file a command, clap definitions beside it. A command returns what it has to
//! say and what needs a look; printing and exit codes are here alone.

mod check;
mod compare;
mod draft;
mod handout;
mod inert;
mod keeper;
mod progress;
mod report;
mod score;
mod sketch;
mod synth;

use std::io::{IsTerminal, Write};
use std::process::ExitCode;

use clap::{Args, Parser, Subcommand};

use crate::Error;
use crate::error::{EXIT_DONE, EXIT_INPUT, EXIT_LOOK};
use crate::report::stale;

/// Exit code of a command that was stopped by the user: 128 and the number of the signal, as shells have it.
const EXIT_STOPPED: u8 = 130;

/// The caution that every page of help carries.
const CAUTION: &str = "A forecast is no interlock. A cell on test can vent, burn or shatter, and lithium reacts with water: \
follow the lab's own rules, local codes and qualified people.\n\n\
Exit codes: 0 done; 1 done, but something needs a look (with --strict); 2 bad input or usage; 3 I/O failure; 130 stopped.";

/// Traces metal filaments in films of ceramic electrolyte cells, measures their angle to the logged
/// load and forecasts the short.
#[derive(Debug, Parser)]
#[command(name = "veerlog", version, after_help = CAUTION)]
pub struct Cli {
    #[command(flatten)]
    globals: Globals,
    #[command(subcommand)]
    command: Command,
}

/// Flags of every command.
#[derive(Debug, Clone, Copy, Args)]
#[command(next_help_heading = "With every command")]
pub struct Globals {
    /// Say only what needs a look
    #[arg(long, global = true)]
    pub quiet: bool,
    /// Worker threads [default: one per core]
    #[arg(long, global = true, value_name = "N", value_parser = clap::value_parser!(u16).range(1..=1024))]
    pub threads: Option<u16>,
    /// Exit with 1 when something needs a look
    #[arg(long, global = true)]
    pub strict: bool,
}

#[derive(Debug, Subcommand)]
enum Command {
    Draft(draft::DraftArgs),
    Check(check::CheckArgs),
    Report(report::ReportArgs),
    Compare(compare::CompareArgs),
    Synth(synth::SynthArgs),
    Score(score::ScoreArgs),
    Handout(handout::HandoutArgs),
}

/// What a command that did its work has to say.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Outcome {
    /// For standard output; left out with `--quiet`.
    pub text: String,
    /// Whether the text is for another program: printed as it is, since nothing in it comes from a run folder unescaped.
    pub plain: bool,
    /// What needs a look, a sentence each; for standard error.
    pub warnings: Vec<String>,
}

/// Parses the arguments, runs the command and gives its exit code.
#[must_use]
pub fn main() -> ExitCode {
    let cli = match Cli::try_parse() {
        Ok(cli) => cli,
        Err(error) => {
            let code = if error.use_stderr() { EXIT_INPUT } else { EXIT_DONE };
            // Nothing is left to do where even this cannot be printed.
            let _ = error.print();
            return ExitCode::from(code);
        }
    };
    plain_messages_off_terminal();
    mind_interrupts();
    ExitCode::from(match run(&cli) {
        Ok(outcome) => tell(&outcome, cli.globals),
        Err(error) => {
            let code = error.exit_code();
            say(&mut std::io::stderr(), &inert::coloured(&format!("{:?}", miette::Report::new(error))));
            code
        }
    })
}

fn run(cli: &Cli) -> Result<Outcome, Error> {
    if let Some(threads) = cli.globals.threads {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads.into());
        pool.build_global().map_err(|error| Error::Threads { what: error.to_string() })?;
    }
    match &cli.command {
        Command::Check(args) => check::run(args),
        Command::Draft(args) => draft::run(args),
        Command::Report(args) => report::run(args, cli.globals),
        Command::Compare(args) => compare::run(args, cli.globals),
        Command::Synth(args) => Ok(Outcome { text: synth::run(args)?, ..Outcome::default() }),
        Command::Handout(args) => handout::run(args),
        Command::Score(args) => Ok(Outcome { text: score::run(args)?, ..Outcome::default() }),
    }
}

fn tell(outcome: &Outcome, globals: Globals) -> u8 {
    if !globals.quiet || outcome.plain {
        let text = outcome.text.trim_end();
        say(&mut std::io::stdout(), &if outcome.plain { text.to_owned() } else { inert::words(text) });
    }
    for warning in &outcome.warnings {
        say(&mut std::io::stderr(), &inert::words(&format!("look at: {warning}")));
    }
    if globals.strict && !outcome.warnings.is_empty() { EXIT_LOOK } else { EXIT_DONE }
}

/// Prints a line; a reader that has gone away is no failure of the command.
fn say(to: &mut impl Write, text: &str) {
    let _ = writeln!(to, "{text}");
}

/// On Ctrl-C nothing half-written stays, and the user is told how to go on.
fn mind_interrupts() {
    // It fails only where a handler is set already: then the system's own way of ending stays.
    let _ = ctrlc::set_handler(|| {
        stale::abandon();
        say(
            &mut std::io::stderr(),
            "\nStopped: nothing was changed, and what was half-written is gone. Type the same command to start again.",
        );
        std::process::exit(i32::from(EXIT_STOPPED));
    });
}

/// In a file or a pipe, messages are neither coloured nor broken into lines.
fn plain_messages_off_terminal() {
    if std::io::stderr().is_terminal() {
        return;
    }
    // It fails only where a handler is set already: then that one stays.
    let _ = miette::set_hook(Box::new(|_| {
        Box::new(miette::MietteHandlerOpts::new().color(false).unicode(true).wrap_lines(false).build())
    }));
}

#[cfg(test)]
mod tests {
    use clap::CommandFactory;

    #[test]
    fn the_definitions_hold() {
        super::Cli::command().debug_assert();
    }
}
