//! The command line: one file per command, each a thin layer over the library.
//!
//! Contract: a command returns how it ended; only `main` turns that into an
//! exit code. Results go to stdout, progress and problems to stderr. Colour is
//! used only on a terminal, never with `NO_COLOR`, and never alone.

pub mod bench;
pub mod check;
pub mod divide;
pub mod fit;
pub mod import;
pub mod margins;
pub mod new;
mod progress;
pub mod rehearse;
pub mod sweep;

use std::io::{IsTerminal, Write};

use clap::{Parser, Subcommand};

use crate::report::summary::Colour;

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

/// Rehearse area frequency control with the controllers that will run on the boards.
#[derive(Clone, Debug, Parser)]
#[command(name = "hedgerow", version, max_term_width = 100)]
#[command(after_help = "\
Exit codes: 0 done and kept, 1 a limit is broken, 2 the input is wrong,
3 the environment is, 130 interrupted (what is finished is written).

A prototype: not protection, not certified. It models no voltage, reactive
power, fault or angle stability.")]
pub struct Cli {
    /// What to do.
    #[command(subcommand)]
    pub command: Command,
}

/// The commands.
#[derive(Clone, Debug, Subcommand)]
pub enum Command {
    /// Run a disturbance in closed loop, judge its end and write the report.
    Rehearse(rehearse::Args),
    /// Run a play with boards in the loop, in lockstep, and keep every frame.
    Bench(bench::Args),
    /// Show whether each area's steward fits a chip, from images built and run now.
    Fit(fit::Args),
    /// Read a grid or a play and say what it holds, or what is wrong with it.
    Check(check::Args),
    /// Turn an IEEE Common Data Format file into a grid file.
    Import(import::Args),
    /// Choose the tie lines to leave open so that the areas form a tree.
    Divide(divide::Args),
    /// Run every credible outage, at several loading levels, under several schemes.
    Sweep(sweep::Args),
    /// Find how far each imperfection can go before a play stops settling.
    Margins(margins::Args),
    /// Write a commented grid and play to start from, or a made-up grid.
    New(new::Args),
}

/// Run the command that was given.
///
/// Errors: the command's own.
pub fn run(cli: &Cli) -> Result<Ending, Failure> {
    match &cli.command {
        Command::Rehearse(args) => rehearse::run(args),
        Command::Bench(args) => bench::run(args),
        Command::Fit(args) => fit::run(args),
        Command::Check(args) => check::run(args),
        Command::Import(args) => import::run(args),
        Command::Divide(args) => divide::run(args),
        Command::Sweep(args) => sweep::run(args),
        Command::Margins(args) => margins::run(args),
        Command::New(args) => new::run(args),
    }
}

/// Write the result to stdout; a reader that has gone away is no failure.
///
/// Errors: [`Failure::Environment`] if stdout cannot be written.
pub fn put(text: &str) -> Result<(), Failure> {
    let mut out = std::io::stdout().lock();
    match out.write_all(text.as_bytes()).and_then(|()| out.flush()) {
        Err(e) if e.kind() != std::io::ErrorKind::BrokenPipe => {
            Err(Failure::Environment(format!("cannot write to standard output: {e}")))
        }
        _ => Ok(()),
    }
}

/// Whether stdout takes colour.
pub fn stdout_colour() -> Colour {
    let refused = std::env::var_os("NO_COLOR").is_some_and(|v| !v.is_empty());
    let dumb = std::env::var_os("TERM").is_some_and(|v| v == "dumb");
    match std::io::stdout().is_terminal() && !refused && !dumb {
        true => Colour::On,
        false => Colour::Off,
    }
}
