//! The one error type of the program: what happened, where, and what to type next.

/// Everything that can stop a command.
#[derive(Debug, thiserror::Error, miette::Diagnostic)]
pub enum Error {
    /// Reading or writing failed.
    #[error("{path}: {source}")]
    #[diagnostic(code(io))]
    Io {
        /// The file or folder.
        path: std::path::PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
}
