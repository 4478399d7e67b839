//! The program as its user runs it: exit codes, messages, files, table cells.

mod bad_input;
mod synth;
