//! `veerlog draft FOLDER`: writes a commented `run.toml` from what it finds, and never overwrites one.

use std::fs::OpenOptions;
use std::io::Write;
use std::path::PathBuf;

use clap::Args;

use super::Outcome;
use crate::Error;
use crate::run::{draft, manifest};

/// Shown below the help.
const EXAMPLES: &str = "\
Examples:
  veerlog draft FOLDER   # then open FOLDER/run.toml and settle what is marked";

/// Write a commented run.toml from what a folder holds
#[derive(Debug, Args)]
#[command(after_help = EXAMPLES)]
pub(super) struct DraftArgs {
    /// Folder with the frames and logs of one run
    folder: PathBuf,
}

/// Writes the proposal.
///
/// # Errors
/// [`Error::DraftExists`] where a `run.toml` stands already, [`Error::NothingToDraft`] without frames,
/// [`Error::Io`] where it cannot be written.
pub(super) fn run(args: &DraftArgs) -> Result<Outcome, Error> {
    let path = args.folder.join(manifest::FILE_NAME);
    if path.exists() {
        return Err(Error::DraftExists { path, folder: args.folder.clone() });
    }
    let draft = draft::propose(&args.folder)?;
    let io = |source| Error::Io { path: path.clone(), source };
    let mut file = OpenOptions::new().write(true).create_new(true).open(&path).map_err(io)?;
    file.write_all(draft.text.as_bytes()).map_err(io)?;
    let found = draft.found.iter().map(|line| format!("  {line}\n")).collect::<String>();
    let text = format!(
        "{} written from:\n{found}\nNext: open it, settle each of the {} lines marked `{}`, then type `veerlog check {}`",
        path.display(),
        draft.confirm,
        draft::MARK,
        args.folder.display()
    );
    Ok(Outcome { text, ..Outcome::default() })
}
