//! What can go wrong while writing an output.

use std::path::{Path, PathBuf};

/// Why an output could not be made.
#[derive(Debug, thiserror::Error, miette::Diagnostic)]
pub enum Error {
    /// The output folder holds something that is not ours.
    #[error("{path} holds {found:?}, which this program did not write: nothing was changed")]
    #[diagnostic(code(output::foreign), help("name another folder with --out DIR, or move its files away"))]
    Foreign {
        /// The folder.
        path: PathBuf,
        /// The first such entry.
        found: String,
    },
    /// Something that is not a folder stands where the output should go.
    #[error("{path} is not a folder: nothing was changed")]
    #[diagnostic(code(output::not_a_folder), help("name another folder with --out DIR, or move the file away"))]
    NotAFolder {
        /// Where.
        path: PathBuf,
    },
    /// Reading or writing failed.
    #[error("{path} cannot be read or written")]
    #[diagnostic(
        code(output::io),
        help("check that the folder can be written and the disc has room, or name another with --out DIR")
    )]
    Io {
        /// The file or folder.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// A table, figure or page could not be made from the results.
    #[error("{what} could not be made: {why}")]
    #[diagnostic(code(output::made), help("this is a fault of the program, please report it"))]
    Made {
        /// Which output.
        what: String,
        /// What the library said.
        why: String,
    },
}

impl Error {
    /// An error of the system at `path`.
    pub(crate) fn io(path: &Path, source: std::io::Error) -> Self {
        Self::Io { path: path.to_owned(), source }
    }

    /// An output that a library refused to make.
    pub(crate) fn made(what: &str, why: impl std::fmt::Display) -> Self {
        Self::Made { what: what.to_owned(), why: why.to_string() }
    }
}
