//! `hedgerow fit`: what each area's steward takes of each chip, measured now.
//!
//! Contract: without arguments it measures the built-in grid on all cores. A
//! missing emulator or target is exit 3 with the two commands that install
//! them; an area that does not fit a chip is exit 1.

use std::path::{Path, PathBuf};
use std::sync::atomic::Ordering;

use super::bench::parse_positive;
use super::check::input_failure;
use super::progress::Progress;
use super::rehearse::{refused, stop_flag};
use super::{Ending, Failure, put};
use crate::bench::image::Images;
use crate::bench::node::Core;
use crate::case::model::Grid;
use crate::case::{builtin_grid, read_grid, read_play};
use crate::fit::{Fit, FitError, Options, fit, page, show};
use crate::report::{self, Existing, RESULT_FILE};

/// Arguments of `fit`.
#[derive(Clone, Debug, clap::Args)]
#[command(after_help = "\
Examples:
  hedgerow fit                                  the built-in grid on all cores
  hedgerow fit my.grid.toml --core m4 --mhz 168 --flash-kib 512 --ram-kib 128

Instructions are counted under an emulator; they are not cycles.")]
pub struct Args {
    /// Grid or play file; without one, the built-in grid.
    pub grid: Option<PathBuf>,
    /// Core to measure: m3, m4, m7 or m33; may be repeated [default: all].
    #[arg(long = "core", value_name = "CORE")]
    pub cores: Vec<Core>,
    /// Clock of the cores, MHz [default: m3 72, m4 168, m7 400, m33 160].
    #[arg(long, value_parser = parse_positive)]
    pub mhz: Option<f64>,
    /// Cycles that an instruction is taken to need: an assumption, not a measurement.
    #[arg(long, value_name = "N", default_value = "1.5", value_parser = parse_positive)]
    pub cycles_per_instruction: f64,
    /// Speed of the serial link, bit/s; a byte takes ten.
    #[arg(long, value_name = "BIT/S", default_value = "460800", value_parser = parse_positive)]
    pub baud: f64,
    /// Flash of the chip for which the largest area is asked, KiB.
    #[arg(long, value_name = "KIB", default_value = "512", value_parser = parse_positive)]
    pub flash_kib: f64,
    /// RAM of that chip, KiB.
    #[arg(long, value_name = "KIB", default_value = "128", value_parser = parse_positive)]
    pub ram_kib: f64,
    /// Directory for page and result [default: hedgerow-out/fit].
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
/// Errors: [`Failure::Input`] for the grid and the directory given,
/// [`Failure::Environment`] for a missing emulator or target.
pub fn run(args: &Args) -> Result<Ending, Failure> {
    let grid = read(args.grid.as_deref())?;
    let (dir, existing) = match (&args.out, args.force) {
        (Some(dir), true) => (dir.clone(), Existing::Replace),
        (Some(dir), false) => (dir.clone(), Existing::Refuse),
        (None, true) => (Path::new("hedgerow-out").join("fit"), Existing::Replace),
        (None, false) => (Path::new("hedgerow-out").join("fit"), Existing::ReplaceOwn),
    };
    report::check_dir(&dir, existing).map_err(refused)?;
    let cores = if args.cores.is_empty() { Core::ALL.to_vec() } else { args.cores.clone() };
    let options = Options {
        cores,
        mhz: args.mhz,
        cycles_per_instruction: args.cycles_per_instruction,
        baud: args.baud,
        flash_kib: args.flash_kib,
        ram_kib: args.ram_kib,
        images: Images::default(),
    };
    let stop = stop_flag()?;
    let mut progress = Progress::new(&format!("fit of {}", grid.name), args.quiet);
    let found = fit(&grid, &options, &mut |share| {
        progress.at(share);
        !stop.load(Ordering::Relaxed)
    })
    .map_err(|error| match error {
        FitError::Environment(text) => Failure::Environment(text),
        FitError::Input(text) => Failure::Input(text),
    })?;
    drop(progress);
    write(&dir, &found)?;
    put(&match args.json {
        true => show::json(&found),
        false => format!("{}written to {}\n", show::text(&found), dir.display()),
    })?;
    Ok(match (stop.load(Ordering::Relaxed), fits(&found)) {
        (true, _) => Ending::Interrupted,
        (false, true) => Ending::Kept,
        (false, false) => Ending::Broken,
    })
}

/// A grid, or the grid of a play.
fn read(path: Option<&Path>) -> Result<Grid, Failure> {
    match path {
        None => Ok(builtin_grid()),
        Some(path) if path.to_string_lossy().ends_with(".play.toml") => {
            read_play(path).map(|(grid, _)| grid).map_err(|problems| input_failure(&problems))
        }
        Some(path) => read_grid(path).map_err(|problems| input_failure(&problems)),
    }
}

/// Whether everything was measured and no tick or link is too short.
fn fits(found: &Fit) -> bool {
    let within = |share: Option<f64>| share.is_none_or(|share| share <= 1.0);
    found.cores.iter().all(|core| {
        core.not_measured.is_none()
            && core.areas.iter().all(|area| within(area.tick_share) && within(area.link_share))
    })
}

fn write(dir: &Path, found: &Fit) -> Result<(), Failure> {
    let files = [("fit.html", page::page(found)), (RESULT_FILE, show::json(found))];
    std::fs::create_dir_all(dir)
        .map_err(|e| Failure::Environment(format!("cannot write {}: {e}", dir.display())))?;
    for (name, content) in files {
        let path = dir.join(name);
        std::fs::write(&path, content)
            .map_err(|e| Failure::Environment(format!("cannot write {}: {e}", path.display())))?;
    }
    Ok(())
}
