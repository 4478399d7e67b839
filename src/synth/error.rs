//! What can stop `synth` and `score`.

use std::path::{Path, PathBuf};

/// Everything that can stop `synth` and `score`.
#[derive(Debug, thiserror::Error, miette::Diagnostic)]
pub enum SynthError {
    /// Reading or writing failed.
    #[error("{path} cannot be read or written")]
    #[diagnostic(code(synth::io), help("check that the path exists and may be read or written"))]
    Io {
        /// The file or folder.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// A scenario file does not parse or asks for the impossible.
    #[error("{path}: {message}")]
    #[diagnostic(
        code(synth::scenario),
        help(
            "`synthetic-frames/*/scenario.toml` show working scenarios; every key is described in the docs of `synth::scenario`"
        )
    )]
    Scenario {
        /// The scenario file.
        path: PathBuf,
        /// What is wrong, with line and key.
        message: String,
    },
    /// The folder to write holds something.
    #[error("{path} is not empty")]
    #[diagnostic(
        code(synth::occupied),
        help("nothing is ever overwritten: name a new folder, or remove this one first")
    )]
    Occupied {
        /// The folder.
        path: PathBuf,
    },
    /// A frame could not be encoded.
    #[error("a frame could not be encoded: {0}")]
    #[diagnostic(code(synth::encode))]
    Encode(#[from] image::ImageError),
    /// A file could not be put into words.
    #[error("{what} could not be written: {message}")]
    #[diagnostic(code(synth::format))]
    Format {
        /// Which file.
        what: &'static str,
        /// Why.
        message: String,
    },
    /// A run or its truth is not as expected.
    #[error("{path}: {message}")]
    #[diagnostic(
        code(synth::unscorable),
        help("`score` needs RUN/truth (written by `veerlog synth`) and RUN/veerlog (written by `veerlog report RUN`)")
    )]
    Unscorable {
        /// The file or folder.
        path: PathBuf,
        /// What is wrong.
        message: String,
    },
}

impl SynthError {
    /// An I/O failure at `path`.
    #[must_use]
    pub fn io(path: &Path, source: std::io::Error) -> Self {
        Self::Io { path: path.to_owned(), source }
    }
}
