//! The command line: one file per command, each a thin layer over the library.
//!
//! Contract: a command returns how it ended; only `main` turns that into an
//! exit code. Results go to stdout, progress and problems to stderr.

pub mod check;
pub mod import;
pub mod new;

/// How a command that ran to its end ended.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Ending {
    /// Done and kept: exit 0.
    Kept,
    /// Done, and the result is bad: exit 1.
    Broken,
    /// Stopped by the user; what is finished is written: exit 130.
    Interrupted,
}

/// Why a command could not run to its end.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Failure {
    /// The input is wrong: exit 2. The text is ready to print, with the file's lines.
    Input(String),
    /// The environment is: exit 3. The text says what to do.
    Environment(String),
}
