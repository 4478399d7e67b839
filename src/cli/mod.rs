//! The command line: one file a command, clap definitions beside it.

pub mod score;
pub mod synth;
use clap::Parser;

#[derive(Parser)]
struct Cli {
    #[command(subcommand)]
    command: Command,
}

#[derive(clap::Subcommand)]
enum Command {
    Synth(synth::SynthArgs),
    Score(score::ScoreArgs),
}

/// Parses the arguments, runs the command and gives its exit code.
pub fn main() -> std::process::ExitCode {
    let result = match Cli::parse().command {
        Command::Synth(args) => synth::run(&args),
        Command::Score(args) => score::run(&args),
    };
    match result {
        Ok(text) => {
            println!("{text}");
            std::process::ExitCode::SUCCESS
        }
        Err(e) => {
            eprintln!("{:?}", miette::Report::new(e));
            std::process::ExitCode::from(2)
        }
    }
}
