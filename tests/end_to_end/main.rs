//! The program as its user runs it: exit codes, messages, files, table cells.

#![expect(clippy::unwrap_used, reason = "a test that cannot go on must fail")]

mod bad_input;
mod campaign;
mod compare;
mod hostile;
mod kit;
mod output;
mod page;
mod repeatable;
mod report_input;
mod synth;
