//! The program: parse, call, exit code.

use std::process::ExitCode;

fn main() -> ExitCode {
    veerlog::cli::main()
}
