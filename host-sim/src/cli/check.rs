//! `hedgerow check`: read a grid or a play and say what it holds, or what is wrong.
//!
//! Contract: nothing is run and nothing is written. Which of the two a file is
//! follows from its name, or from its tables where the name does not say.

use std::fmt::Write as _;
use std::io::{IsTerminal, Write as _};
use std::path::{Path, PathBuf};

use crate::case::model::{Grid, Play, UnitStatus};
use crate::case::{Problems, builtin_grid, builtin_play, builtin_plays, read_grid, read_play};

use super::{Ending, Failure};

/// Check a grid or play file; without one, the built-in example.
#[derive(Clone, Debug, clap::Args)]
#[command(after_help = "Example:\n  hedgerow check storm.play.toml")]
pub struct Args {
    /// File to check: NAME.grid.toml or NAME.play.toml.
    pub file: Option<PathBuf>,
    /// Print the summary as JSON.
    #[arg(long)]
    pub json: bool,
}

/// Run the command.
pub fn run(args: &Args) -> Result<Ending, Failure> {
    let out = match &args.file {
        None => builtin(args.json),
        Some(path) if is_play(path) => {
            let (grid, play) = read_play(path).map_err(|problems| input_failure(&problems))?;
            summary(&path.display().to_string(), &grid, &[play], args.json)
        }
        Some(path) => {
            let grid = read_grid(path).map_err(|problems| input_failure(&problems))?;
            summary(&path.display().to_string(), &grid, &[], args.json)
        }
    };
    // A reader that closes the pipe early has seen what it wanted.
    let _ = std::io::stdout().write_all(out.as_bytes());
    Ok(Ending::Kept)
}

/// Problems as the failure of a command, in colour where stderr is a terminal and nobody objects.
pub fn input_failure(problems: &Problems) -> Failure {
    let quiet = std::env::var_os("NO_COLOR").is_some_and(|value| !value.is_empty());
    let colour = !quiet && std::io::stderr().is_terminal();
    Failure::Input(problems.render(colour))
}

/// Whether a file is a play: by its name, else by its tables.
fn is_play(path: &Path) -> bool {
    let name = path.file_name().map(|name| name.to_string_lossy().into_owned()).unwrap_or_default();
    if name.ends_with(".play.toml") || name.ends_with(".grid.toml") {
        return name.ends_with(".play.toml");
    }
    let text = std::fs::read_to_string(path).unwrap_or_default();
    text.lines().any(|line| matches!(line.trim(), "[run]" | "[[event]]"))
}

/// The built-in grid with all its plays.
fn builtin(json: bool) -> String {
    let plays: Vec<Play> = builtin_plays()
        .iter()
        .filter_map(|(name, _)| builtin_play(name))
        .map(|(_, play)| play)
        .collect();
    summary("built-in example", &builtin_grid(), &plays, json)
}

/// What the files hold.
fn summary(file: &str, grid: &Grid, plays: &[Play], json: bool) -> String {
    let facts = Facts::of(grid);
    if json { as_json(file, grid, plays, &facts) } else { as_text(file, grid, plays, &facts) }
}

/// Totals of a grid.
struct Facts {
    ties: usize,
    load_mw: f64,
    generation_mw: f64,
    feeders_mw: f64,
}

impl Facts {
    fn of(grid: &Grid) -> Self {
        let area = |bus: usize| grid.buses[bus].area;
        let in_service = grid.units.iter().filter(|unit| unit.status != UnitStatus::Off);
        Self {
            ties: grid.lines.iter().filter(|line| area(line.from) != area(line.to)).count(),
            load_mw: total(grid.buses.iter().map(|bus| bus.load_mw)),
            generation_mw: total(in_service.map(|unit| unit.base_mw)),
            feeders_mw: total(grid.feeders.iter().map(|feeder| feeder.load_mw)),
        }
    }
}

/// A sum that is 0 and not -0 where there is nothing to add.
fn total(values: impl Iterator<Item = f64>) -> f64 {
    values.fold(0.0, |sum, value| sum + value)
}

fn as_text(file: &str, grid: &Grid, plays: &[Play], facts: &Facts) -> String {
    let mut out = format!("ok  {file}\n");
    let _ = writeln!(
        out,
        "    grid        {} ({} Hz, base {} MVA)",
        grid.name, grid.nominal_hz, grid.base_mva
    );
    let _ = writeln!(out, "    areas       {:>8}", grid.areas.len());
    let _ = writeln!(out, "    buses       {:>8}", grid.buses.len());
    let _ = writeln!(out, "    lines       {:>8}, of which {} ties", grid.lines.len(), facts.ties);
    let _ = writeln!(out, "    load        {:>8.1} MW", facts.load_mw);
    let _ = writeln!(
        out,
        "    generation  {:>8.1} MW from {} units",
        facts.generation_mw,
        grid.units.len()
    );
    let _ = writeln!(out, "    feeders     {:>8.1} MW in {}", facts.feeders_mw, grid.feeders.len());
    for (index, area) in grid.areas.iter().enumerate() {
        let (mut buses, mut load_mw) = (0, 0.0);
        for bus in grid.buses.iter().filter(|bus| bus.area == index) {
            buses += 1;
            load_mw += bus.load_mw;
        }
        let inside = |bus: usize| grid.buses[bus].area == index;
        let base_mw =
            total(grid.units.iter().filter(|unit| inside(unit.bus)).map(|unit| unit.base_mw));
        let _ = writeln!(
            out,
            "    area        {}: {buses} buses, load {load_mw:.1} MW, generation {base_mw:.1} MW",
            area.name
        );
    }
    for play in plays {
        let _ = writeln!(
            out,
            "    play        {} ({} s, {} events): {}",
            play.name,
            play.run.duration_s,
            play.events.len(),
            play.title
        );
    }
    out
}

fn as_json(file: &str, grid: &Grid, plays: &[Play], facts: &Facts) -> String {
    let plays: Vec<serde_json::Value> = plays
        .iter()
        .map(|play| {
            serde_json::json!({
                "name": play.name,
                "title": play.title,
                "duration_s": play.run.duration_s,
                "events": play.events.len(),
            })
        })
        .collect();
    let document = serde_json::json!({
        "schema": 1,
        "ok": true,
        "file": file,
        "grid": grid.name,
        "areas": grid.areas.len(),
        "buses": grid.buses.len(),
        "lines": grid.lines.len(),
        "ties": facts.ties,
        "units": grid.units.len(),
        "feeders": grid.feeders.len(),
        "load_mw": facts.load_mw,
        "generation_mw": facts.generation_mw,
        "feeders_mw": facts.feeders_mw,
        "plays": plays,
    });
    format!("{document:#}\n")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn sums_the_built_in_example_up() {
        let text = builtin(false);
        assert!(text.starts_with("ok  built-in example\n"));
        assert!(text.contains("49, of which 5 ties"));
        assert!(text.contains("1400.0 MW"));
        assert!(text.contains("play        quillon"));
    }

    #[test]
    fn prints_one_json_document() {
        let document: serde_json::Value = serde_json::from_str(&builtin(true)).expect("JSON");
        assert_eq!(document["buses"], 30);
        assert_eq!(document["plays"].as_array().map(Vec::len), Some(builtin_plays().len()));
    }

    #[test]
    fn says_wrong_input_for_a_file_that_is_not_there() {
        let args = Args { file: Some(PathBuf::from("no/such.play.toml")), json: false };
        assert!(
            matches!(run(&args), Err(Failure::Input(text)) if text.contains("no/such.play.toml"))
        );
    }

    #[test]
    fn tells_a_play_by_its_name() {
        assert!(is_play(Path::new("a.play.toml")));
        assert!(!is_play(Path::new("run.grid.toml")));
    }
}
