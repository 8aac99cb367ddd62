//! The `hedgerow` program: parse, dispatch, map endings to exit codes.
//!
//! Exit codes: 0 done and kept, 1 done and the result is bad, 2 the input is
//! wrong (also clap's own), 3 the environment is, 130 interrupted.

use std::process::ExitCode;

use clap::Parser;
use hedgerow::cli::{Cli, Ending, Failure};

fn main() -> ExitCode {
    let (code, problem) = match hedgerow::cli::run(&Cli::parse()) {
        Ok(Ending::Kept) => (0, None),
        Ok(Ending::Broken) => (1, None),
        Ok(Ending::Interrupted) => (130, None),
        Err(Failure::Input(text)) => (2, Some(text)),
        Err(Failure::Environment(text)) => (3, Some(text)),
    };
    if let Some(text) = problem {
        eprintln!("{}", text.trim_end());
    }
    ExitCode::from(code)
}
