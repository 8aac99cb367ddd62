//! `hedgerow sweep`: every credible outage, at several loading levels, under several schemes.
//!
//! Contract: without arguments it sweeps the built-in example. What is finished
//! is in the partial file at every moment; Ctrl-C writes the results so far and
//! `--resume` goes on from there to the same bytes. Progress, with rate and time
//! left, goes to stderr. Ratings from a factor are made from every form that
//! exists, also when `--form` sweeps only one, so that a replay has the same ones.

mod progress;
mod setup;
mod show;

use std::path::{Path, PathBuf};
use std::sync::Mutex;
use std::sync::atomic::Ordering;

use clap::ValueEnum;

use super::rehearse::{refused, stop_flag};
use super::{Ending, Failure, put};
use crate::report::{self, Existing};
use crate::sweep::files::{Document, PARTIAL_FILE, Partial, csv_text};
use crate::sweep::run::{Finished, sweep};
use crate::sweep::{Balancing, Form, SweepError, forecast, page};
use progress::Rate;
use setup::Setup;

/// Who rebalances.
#[derive(Clone, Copy, Debug, PartialEq, Eq, ValueEnum)]
pub enum SchemeName {
    /// The stewards at the least rung.
    Steward,
    /// Droop plus area control error.
    AreaControlError,
    /// Governor droop alone.
    Droop,
    /// Proportional balancing in islands.
    Proportional,
    /// Area control error, then a redispatch after 5 minutes.
    #[value(name = "redispatch-5")]
    Redispatch5,
    /// Area control error, then a redispatch after 15 minutes.
    #[value(name = "redispatch-15")]
    Redispatch15,
}

/// Which grid.
#[derive(Clone, Copy, Debug, PartialEq, Eq, ValueEnum)]
pub enum FormName {
    /// Every line as in the file.
    AsItIs,
    /// Ties left open so that the areas form a tree.
    Divided,
}

/// Which outages.
#[derive(Clone, Copy, Debug, PartialEq, Eq, ValueEnum)]
pub enum OutageSet {
    /// Lines and units.
    All,
    /// Lines.
    Lines,
    /// Units.
    Units,
}

/// Run every credible outage, at several loading levels, under several schemes.
#[derive(Clone, Debug, clap::Args)]
#[command(after_help = "\
Examples:
  hedgerow sweep                                        the built-in example
  hedgerow sweep my.grid.toml --rating-factor 1.2,1.5,2 three loading levels
  hedgerow sweep my.grid.toml --closed-loop --outages lines
  hedgerow sweep my.grid.toml --forecast                the ladder before the trip")]
pub struct Args {
    /// Grid file (*.grid.toml); without it, the built-in example.
    pub grid: Option<PathBuf>,
    /// Propose this many areas instead of taking the file's.
    #[arg(long, value_name = "N")]
    pub areas: Option<usize>,
    /// Ratings as multiples of the base flow, several [default: the file's ratings].
    #[arg(long, value_name = "F,...", value_delimiter = ',')]
    pub rating_factor: Vec<f64>,
    /// Schemes [default: all; closed loop: steward, area-control-error, droop].
    #[arg(long, value_enum, value_delimiter = ',')]
    pub scheme: Vec<SchemeName>,
    /// Forms of the grid [default: both].
    #[arg(long, value_enum, value_delimiter = ',')]
    pub form: Vec<FormName>,
    /// Where the file lists no feeder: make this share of every load sheddable, per cent.
    #[arg(long, value_name = "PERCENT", default_value_t = 0.0)]
    pub feeders: f64,
    /// Which single outages.
    #[arg(long, value_enum, default_value = "all")]
    pub outages: OutageSet,
    /// Two lines at a time instead, screened by outage factors.
    #[arg(long)]
    pub pairs: bool,
    /// Only the outage with this name, e.g. "line A1-A2".
    #[arg(long, value_name = "NAME")]
    pub only: Option<String>,
    /// Run the whole loop with real stewards instead of the static cascade.
    #[arg(long)]
    pub closed_loop: bool,
    /// Length of each closed-loop run in s.
    #[arg(long, value_name = "S", default_value_t = 60.0)]
    pub seconds: f64,
    /// Show per outage the rung and MW that the stewards would need, most demanding first.
    #[arg(long)]
    pub forecast: bool,
    /// Threads [default: one per core].
    #[arg(long, value_name = "N", default_value_t = 0)]
    pub threads: usize,
    /// Go on with a sweep that was stopped (same grid and options).
    #[arg(long)]
    pub resume: bool,
    /// Directory for the results [default: hedgerow-out/sweep-<grid>].
    #[arg(long, value_name = "DIR")]
    pub out: Option<PathBuf>,
    /// Write over files that are there.
    #[arg(long)]
    pub force: bool,
    /// Print the result as one JSON document instead of text.
    #[arg(long)]
    pub json: bool,
    /// No progress, and no text but what was written.
    #[arg(long)]
    pub quiet: bool,
}

impl From<SchemeName> for Balancing {
    fn from(name: SchemeName) -> Balancing {
        match name {
            SchemeName::Steward => Balancing::Steward,
            SchemeName::AreaControlError => Balancing::AreaControlError,
            SchemeName::Droop => Balancing::Droop,
            SchemeName::Proportional => Balancing::Proportional,
            SchemeName::Redispatch5 => Balancing::Redispatch5,
            SchemeName::Redispatch15 => Balancing::Redispatch15,
        }
    }
}

impl From<FormName> for Form {
    fn from(name: FormName) -> Form {
        match name {
            FormName::AsItIs => Form::AsItIs,
            FormName::Divided => Form::Divided,
        }
    }
}

/// Run it.
///
/// Errors: [`Failure::Input`] for the grid, the options and the directory given,
/// [`Failure::Environment`] for what the machine refuses.
pub fn run(args: &Args) -> Result<Ending, Failure> {
    let (dir, existing) = target(args);
    if !args.resume {
        report::check_dir(&dir, existing).map_err(refused)?;
    }
    let setup = Setup::new(args)?;
    let stop = stop_flag()?;
    std::fs::create_dir_all(&dir).map_err(|e| cannot_write(&dir, &e))?;
    let partial_path = dir.join(PARTIAL_FILE);
    let (partial, done) =
        Partial::open(&partial_path, &setup.plan, args.resume).map_err(failure)?;
    let shared = Mutex::new((partial, Rate::new(args.quiet, done.len()), None));
    let observe = |finished: Finished<'_>| {
        let Ok(mut shared) = shared.lock() else { return false };
        let (partial, rate, failed) = &mut *shared;
        rate.at(finished.done, finished.total);
        if let Err(why) = partial.append(finished.task, finished.rows) {
            *failed = Some(why);
            return false;
        }
        !stop.load(Ordering::Relaxed)
    };
    let swept = sweep(&setup.plan, args.threads, done, &observe).map_err(failure)?;
    let kept = shared.into_inner().ok().and_then(|(_, _, failed)| failed);
    if let Some(why) = kept {
        return Err(failure(why));
    }
    let mode = if args.closed_loop { "closed-loop" } else { "static" };
    let document =
        Document::new(&setup.grid_name, mode, setup.notes.clone(), swept.stopped, swept.rows);
    let written = write_all(args, &dir, &document)?;
    if !swept.stopped {
        std::fs::remove_file(&partial_path).map_err(|e| cannot_write(&partial_path, &e))?;
    }
    put(&shown(args, &document, &written)?)?;
    Ok(if swept.stopped { Ending::Interrupted } else { Ending::Kept })
}

fn cannot_write(path: &Path, error: &std::io::Error) -> Failure {
    Failure::Environment(format!("cannot write {}: {error}", path.display()))
}

/// Whose fault an error is.
fn failure(error: SweepError) -> Failure {
    match error {
        SweepError::Files(text) => Failure::Environment(text),
        other => Failure::Input(other.to_string()),
    }
}

/// Where the results go, and what may be written over there.
fn target(args: &Args) -> (PathBuf, Existing) {
    if let Some(dir) = &args.out {
        return (dir.clone(), if args.force { Existing::Replace } else { Existing::Refuse });
    }
    let stem = args.grid.as_deref().and_then(Path::file_name).map_or("quillon".into(), |name| {
        name.to_string_lossy().trim_end_matches(".toml").trim_end_matches(".grid").to_owned()
    });
    let dir = Path::new("hedgerow-out").join(format!("sweep-{stem}"));
    let ours = dir.join(PARTIAL_FILE).is_file();
    (dir, if args.force || ours { Existing::Replace } else { Existing::ReplaceOwn })
}

fn write_all(args: &Args, dir: &Path, document: &Document) -> Result<Vec<PathBuf>, Failure> {
    let files = [
        ("report.html", page::page(document, &|row| show::replay(args, row))),
        ("outages.csv", csv_text(&document.rows).map_err(failure)?),
        // Last, since it marks the directory as complete.
        (report::RESULT_FILE, document.json().map_err(failure)?),
    ];
    let mut written = Vec::with_capacity(files.len());
    for (name, content) in files {
        let path = dir.join(name);
        std::fs::write(&path, content).map_err(|e| cannot_write(&path, &e))?;
        written.push(path);
    }
    Ok(written)
}

/// What goes to stdout.
fn shown(args: &Args, document: &Document, written: &[PathBuf]) -> Result<String, Failure> {
    if args.json {
        return document.json().map_err(failure);
    }
    let mut out = String::new();
    if args.forecast {
        out.push_str(&forecast::text(&document.rows));
    } else if !args.quiet {
        out.push_str(&show::summary(args, document));
    }
    out.push_str("\nWritten\n");
    written.iter().for_each(|path| out.push_str(&format!("  {}\n", path.display())));
    Ok(out)
}

#[cfg(test)]
mod tests {
    use clap::Parser;

    use super::super::{Cli, Command};
    use super::*;

    fn parsed(line: &str) -> Args {
        match Cli::parse_from(line.split_whitespace()).command {
            Command::Sweep(args) => args,
            other => panic!("{other:?} is another command"),
        }
    }

    #[test]
    fn without_arguments_it_sweeps_all_schemes_on_both_forms() {
        let setup = Setup::new(&parsed("hedgerow sweep")).unwrap();
        assert_eq!(setup.plan.schemes, Balancing::ALL);
        assert_eq!(setup.plan.outages.len(), 2);
    }

    #[test]
    fn an_unknown_outage_is_wrong_input_and_names_a_near_one() {
        let mut args = parsed("hedgerow sweep");
        args.only = Some("line A1-A22".to_owned());
        let Err(Failure::Input(text)) = Setup::new(&args) else { panic!("found it") };
        assert!(text.contains("line A"), "{text}");
    }

    #[test]
    fn the_replay_of_a_row_sweeps_that_row_alone() {
        let mut args = parsed("hedgerow sweep --rating-factor 1.2,1.5");
        let all = Setup::new(&args).unwrap().plan;
        let whole = sweep(&all, 1, Default::default(), &|_| true).unwrap().rows;
        let row = whole.iter().max_by(|a, b| a.load_lost_mw.total_cmp(&b.load_lost_mw)).unwrap();
        let words = shell_words(&show::replay(&args, row));
        args = match Cli::parse_from(words).command {
            Command::Sweep(args) => args,
            other => panic!("{other:?}"),
        };
        let again =
            sweep(&Setup::new(&args).unwrap().plan, 1, Default::default(), &|_| true).unwrap();
        assert_eq!(csv_text(&again.rows).unwrap(), csv_text(std::slice::from_ref(row)).unwrap());
    }

    /// Words of a command line with double quotes.
    fn shell_words(line: &str) -> Vec<String> {
        line.split('"')
            .enumerate()
            .flat_map(|(i, part)| match i % 2 {
                0 => part.split_whitespace().map(str::to_owned).collect::<Vec<_>>(),
                _ => vec![part.to_owned()],
            })
            .collect()
    }
}
