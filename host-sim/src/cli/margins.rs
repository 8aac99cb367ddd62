//! `hedgerow margins`: how far each imperfection can go before a play stops settling.
//!
//! Contract: without arguments it searches the built-in play `lean`. Ctrl-C
//! ends the search; what is finished is written. Nothing is overwritten without
//! `--force` but an earlier result in the default directory.

use std::path::{Path, PathBuf};
use std::sync::Mutex;
use std::sync::atomic::Ordering;

use clap::ValueEnum;

use super::progress::Progress;
use super::rehearse::{find, refused, stop_flag};
use super::{Ending, Failure, put};
use crate::margins::MarginsError;
use crate::margins::figures::{Document, recommended_tick_s, swings, text};
use crate::margins::knob::Knob;
use crate::margins::page::page;
use crate::margins::search::{least_iterations, map, margins};
use crate::margins::trial::Subject;
use crate::report::{self, Existing};

/// Play that is searched when none is named.
const DEFAULT_PLAY: &str = "lean";

/// An imperfection.
#[derive(Clone, Copy, Debug, PartialEq, Eq, ValueEnum)]
#[allow(missing_docs, reason = "each is explained by its knob")]
pub enum KnobName {
    LinkDelay,
    PlantDelay,
    Loss,
    Tick,
    ActuatorLag,
    ActuatorGain,
    Sensitivity,
    MeterClass,
    MeterScan,
    FrequencyNoise,
}

impl From<KnobName> for Knob {
    fn from(name: KnobName) -> Knob {
        Knob::ALL[name as usize]
    }
}

/// Find how far each imperfection can go before a play stops settling.
#[derive(Clone, Debug, clap::Args)]
#[command(after_help = "\
Examples:
  hedgerow margins                                  the built-in play `lean`
  hedgerow margins absorb --only link-delay,loss --seeds 5
  hedgerow margins absorb --map plant-delay,loss    a map over two")]
pub struct Args {
    /// Name of a built-in play, or path of a *.play.toml file.
    #[arg(default_value = DEFAULT_PLAY)]
    pub play: String,
    /// Only these imperfections.
    #[arg(long, value_enum, value_delimiter = ',', value_name = "NAME,...")]
    pub only: Vec<KnobName>,
    /// Also map two imperfections against each other.
    #[arg(long, value_enum, value_delimiter = ',', num_args = 1, value_name = "ACROSS,UP")]
    pub map: Vec<KnobName>,
    /// Values per side of the map.
    #[arg(long, value_name = "N", default_value_t = 6)]
    pub map_steps: usize,
    /// Seeds that must all keep a value.
    #[arg(long, value_name = "N", default_value_t = 2)]
    pub seeds: u64,
    /// Threads [default: one per core].
    #[arg(long, value_name = "N", default_value_t = 0)]
    pub threads: usize,
    /// Directory for the results [default: hedgerow-out/margins-<play>].
    #[arg(long, value_name = "DIR")]
    pub out: Option<PathBuf>,
    /// Write over files that are there.
    #[arg(long)]
    pub force: bool,
    /// Print the result as one JSON document instead of text.
    #[arg(long)]
    pub json: bool,
    /// No progress bar.
    #[arg(long)]
    pub quiet: bool,
}

/// Run it.
///
/// Errors: [`Failure::Input`] for the play and the options given,
/// [`Failure::Environment`] for what the machine refuses.
pub fn run(args: &Args) -> Result<Ending, Failure> {
    check_numbers(args)?;
    let (grid, play) = find(&args.play)?;
    let (dir, existing) = target(args, &play.name);
    report::check_dir(&dir, existing).map_err(refused)?;
    let stop = stop_flag()?;
    let subject = Subject::new(grid, play).map_err(failure)?;
    let first = subject.play.run.seed;
    let seeds: Vec<u64> = (first..first + args.seeds).collect();
    let knobs: Vec<Knob> = match args.only.is_empty() {
        true => Knob::ALL.to_vec(),
        false => args.only.iter().map(|&k| k.into()).collect(),
    };
    let progress = Mutex::new((Progress::new("margins", args.quiet), 0_usize));
    let observe = || {
        if let Ok(mut shared) = progress.lock() {
            shared.1 += 1;
            let share = shared.1 as f64 / (2 * knobs.len()) as f64;
            shared.0.at(share);
        }
        !stop.load(Ordering::Relaxed)
    };
    let found = margins(&subject, &knobs, &seeds, args.threads, &observe).map_err(failure)?;
    drop(progress);
    let document = document(args, &subject, seeds, found, &stop)?;
    let written = write_all(&dir, &document, &subject)?;
    let mut out = match args.json {
        true => json(&document)?,
        false => text(&document),
    };
    if !args.json {
        out.push_str("\nWritten\n");
        written.iter().for_each(|path| out.push_str(&format!("  {}\n", path.display())));
    }
    put(&out)?;
    Ok(if document.stopped { Ending::Interrupted } else { Ending::Kept })
}

fn check_numbers(args: &Args) -> Result<(), Failure> {
    if !matches!(args.map.len(), 0 | 2) {
        return Err(Failure::Input(
            "--map needs two imperfections, e.g. --map plant-delay,loss".to_owned(),
        ));
    }
    if !(2..=40).contains(&args.map_steps) || !(1..=100).contains(&args.seeds) {
        return Err(Failure::Input(
            "--map-steps must be from 2 to 40, --seeds from 1 to 100".to_owned(),
        ));
    }
    Ok(())
}

/// Everything beside the margins themselves; left out once stopped.
fn document(
    args: &Args,
    subject: &Subject,
    seeds: Vec<u64>,
    margins: Vec<crate::margins::search::Margin>,
    stop: &std::sync::atomic::AtomicBool,
) -> Result<Document, Failure> {
    let stopped = stop.load(Ordering::Relaxed);
    let wants_all = args.only.is_empty() && !stopped;
    let map = match (stopped, args.map.as_slice()) {
        (false, [across, up]) => {
            let pair = (Knob::from(*across), Knob::from(*up));
            Some(map(subject, pair, args.map_steps, &seeds, args.threads).map_err(failure)?)
        }
        _ => None,
    };
    let (swing_steward, swing_droop) =
        if stopped { (None, None) } else { swings(subject).map_err(failure)? };
    let least = match wants_all {
        true => Some(least_iterations(subject, &seeds).map_err(failure)?),
        false => None,
    };
    Ok(Document {
        schema: 1,
        grid: subject.grid.name.clone(),
        play: subject.play.name.clone(),
        areas: subject.grid.areas.iter().map(|a| a.name.clone()).collect(),
        seeds,
        stopped,
        recommended_tick_s: recommended_tick_s(&margins),
        margins,
        map,
        swing_steward,
        swing_droop,
        least_iterations: least,
        recommended_iterations: least.map(|l| l.saturating_mul(2)),
    })
}

fn failure(error: MarginsError) -> Failure {
    match error {
        MarginsError::Threads(_) => Failure::Environment(error.to_string()),
        MarginsError::Run { .. } | MarginsError::Unsettled(_) => Failure::Input(error.to_string()),
    }
}

/// Where the results go, and what may be written over there.
fn target(args: &Args, play: &str) -> (PathBuf, Existing) {
    match (&args.out, args.force) {
        (Some(dir), true) => (dir.clone(), Existing::Replace),
        (Some(dir), false) => (dir.clone(), Existing::Refuse),
        (None, force) => {
            let name = super::rehearse::dir_name(play);
            let dir = Path::new("hedgerow-out").join(format!("margins-{name}"));
            (dir, if force { Existing::Replace } else { Existing::ReplaceOwn })
        }
    }
}

fn json(document: &Document) -> Result<String, Failure> {
    serde_json::to_string_pretty(document)
        .map(|text| text + "\n")
        .map_err(|error| Failure::Environment(format!("cannot lay out result.json: {error}")))
}

fn write_all(dir: &Path, document: &Document, subject: &Subject) -> Result<Vec<PathBuf>, Failure> {
    let files = [
        ("report.html", page(document, &subject.play)),
        // Last, since it marks the directory as complete.
        (report::RESULT_FILE, json(document)?),
    ];
    let failed = |path: &Path, error: std::io::Error| {
        Failure::Environment(format!("cannot write {}: {error}", path.display()))
    };
    std::fs::create_dir_all(dir).map_err(|error| failed(dir, error))?;
    let mut written = Vec::with_capacity(files.len());
    for (name, content) in files {
        let path = dir.join(name);
        std::fs::write(&path, content).map_err(|error| failed(&path, error))?;
        written.push(path);
    }
    Ok(written)
}
