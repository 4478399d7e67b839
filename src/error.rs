//! The one error type of the program: what happened, where, and what to type next.
//! Rooms of the house define their own faults; each is passed through here unchanged.

use std::path::PathBuf;

/// Everything that can stop a command.
#[derive(Debug, thiserror::Error, miette::Diagnostic)]
pub enum Error {
    /// Reading or writing failed.
    #[error("{path} cannot be read or written")]
    #[diagnostic(
        code(io),
        help("see that the place exists, that you may read and write there, and that the disk is not full")
    )]
    Io {
        /// The file or folder.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// The run folder does not exist.
    #[error("{folder}: no such folder")]
    #[diagnostic(code(run::folder), help("name the folder that holds run.toml"))]
    NoRunFolder {
        /// What was named.
        folder: PathBuf,
    },
    /// The folder holds no manifest.
    #[error("{folder}: no run.toml in this folder")]
    #[diagnostic(code(run::no_manifest), help("type `veerlog draft {}` to have one proposed", folder.display()))]
    NoManifest {
        /// The folder.
        folder: PathBuf,
    },
    /// The manifest is too large to be one.
    #[error("{path}: {bytes} bytes are too many for a run.toml (at most {})", crate::run::manifest::MAX_BYTES)]
    #[diagnostic(code(run::huge_manifest), help("see that run.toml is not another file by mistake"))]
    HugeManifest {
        /// The file.
        path: PathBuf,
        /// Its size.
        bytes: u64,
    },
    /// The manifest is not UTF-8.
    #[error("{path}: not UTF-8 text")]
    #[diagnostic(code(run::not_text), help("save run.toml as plain text, UTF-8"))]
    NotText {
        /// The file.
        path: PathBuf,
    },
    /// A fault in `run.toml`.
    #[error(transparent)]
    #[diagnostic(transparent)]
    Manifest(#[from] Box<crate::run::ManifestError>),
    /// The frames cannot be found, ordered or timed.
    #[error(transparent)]
    #[diagnostic(transparent)]
    Frames(#[from] crate::run::FramesError),
    /// A log cannot be read.
    #[error(transparent)]
    #[diagnostic(transparent)]
    Log(#[from] crate::run::LogError),
    /// A proposed manifest would overwrite one.
    #[error("{path} exists already")]
    #[diagnostic(code(draft::exists), help("a draft never overwrites: move that file away, or edit it and type `veerlog check {}`", folder.display()))]
    DraftExists {
        /// The file.
        path: PathBuf,
        /// Its folder.
        folder: PathBuf,
    },
    /// A folder holds nothing to draft from.
    #[error("{folder}: no frames found in this folder or in the folders directly below it")]
    #[diagnostic(code(draft::no_frames), help("put the frames (PNG, TIFF, JPEG, BMP or PNM) into {}", folder.join("frames").display()))]
    NothingToDraft {
        /// The folder.
        folder: PathBuf,
    },
    /// `--until` is no time of the run.
    #[error("--until {until}: no time of the run")]
    #[diagnostic(code(report::until), help("type seconds since the first frame, 0 or more"))]
    Until {
        /// What was typed.
        until: f64,
    },
    /// The output cannot be written.
    #[error(transparent)]
    #[diagnostic(transparent)]
    Report(#[from] crate::report::Error),
    /// A synthetic run cannot be made or scored.
    #[error(transparent)]
    #[diagnostic(transparent)]
    Synth(#[from] crate::synth::SynthError),
    /// Runs cannot be compared.
    #[error(transparent)]
    #[diagnostic(transparent)]
    Compare(#[from] crate::compare::Fault),
    /// The worker threads could not be started.
    #[error("cannot start worker threads: {what}")]
    #[diagnostic(code(threads), help("type a smaller --threads"))]
    Threads {
        /// What the system said.
        what: String,
    },
}

/// Exit code of a command that did what it was asked.
pub const EXIT_DONE: u8 = 0;
/// Exit code, with `--strict`, of a command that did it but has something to look at.
pub const EXIT_LOOK: u8 = 1;
/// Exit code for bad input or usage.
pub const EXIT_INPUT: u8 = 2;
/// Exit code for a failure to read or write.
pub const EXIT_IO: u8 = 3;

impl Error {
    /// The exit code that stands for this error.
    #[must_use]
    pub fn exit_code(&self) -> u8 {
        use crate::run::{FramesError, LogError};
        match self {
            Self::Io { .. } | Self::Threads { .. } => EXIT_IO,
            Self::Report(crate::report::Error::Foreign { .. } | crate::report::Error::NotAFolder { .. }) => EXIT_INPUT,
            Self::Report(_) => EXIT_IO,
            Self::Synth(crate::synth::SynthError::Io { .. }) => EXIT_IO,
            Self::Frames(FramesError::Io { .. }) | Self::Log(LogError::Io { .. }) => EXIT_IO,
            Self::NoRunFolder { .. }
            | Self::NoManifest { .. }
            | Self::HugeManifest { .. }
            | Self::NotText { .. }
            | Self::Manifest(_)
            | Self::Frames(_)
            | Self::Log(_)
            | Self::DraftExists { .. }
            | Self::NothingToDraft { .. }
            | Self::Until { .. }
            | Self::Compare(_)
            | Self::Synth(_) => EXIT_INPUT,
        }
    }
}

impl From<crate::run::ManifestError> for Error {
    fn from(fault: crate::run::ManifestError) -> Self {
        Self::Manifest(Box::new(fault))
    }
}
