//! `hedgerow divide`: choose the ties to leave open, say what that does and costs.
//!
//! Contract: without arguments it divides the built-in example. Ctrl-C ends the
//! search; what is finished is written all the same. Nothing is overwritten
//! without `--force` but an earlier result in the default directory.

use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};

use clap::ValueEnum;

use super::progress::Progress;
use super::{Ending, Failure, put};
use crate::case::builtin::GRID_TEXT;
use crate::case::parse_grid;
use crate::divide::propose::Weight;
use crate::divide::{Division, Settings, divide, figures, file, page, text};
use crate::report::{self, Existing, ReportError};

/// What makes a line worth keeping inside a proposed area.
#[derive(Clone, Copy, Debug, PartialEq, Eq, ValueEnum)]
pub enum WeightName {
    /// The flow it carries in the base case.
    Flow,
    /// Its susceptance.
    Susceptance,
}

/// Choose the tie lines to leave open so that the areas form a tree.
#[derive(Clone, Debug, clap::Args)]
#[command(after_help = "\
Examples:
  hedgerow divide                                   the built-in example
  hedgerow divide my.grid.toml --areas 4            propose four areas first
  hedgerow divide my.grid.toml --out parted --json > parted.json

Leaving ties open is a planning decision with voltage, stability and fault-level
consequences that this tool does not study; in a tree every closed tie is a
single point of separation.")]
pub struct Args {
    /// Grid file (*.grid.toml); without it, the built-in example.
    pub grid: Option<PathBuf>,
    /// Propose this many areas instead of taking the file's.
    #[arg(long, value_name = "N")]
    pub areas: Option<usize>,
    /// What makes a line worth keeping inside a proposed area; without it both
    /// are tried and the areas that load the lines less are taken.
    #[arg(long, value_enum)]
    pub weight: Option<WeightName>,
    /// Directory for the results [default: hedgerow-out/divide-<grid>].
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
/// [`Failure::Environment`] for what the machine refuses.
pub fn run(args: &Args) -> Result<Ending, Failure> {
    let stop = stop_flag()?;
    run_until(args, &stop)
}

/// Run it until it ends or the flag is set.
fn run_until(args: &Args, stop: &AtomicBool) -> Result<Ending, Failure> {
    let (source, shown) = source(args)?;
    let grid =
        parse_grid(&source, &shown).map_err(|problems| super::check::input_failure(&problems))?;
    let (dir, existing) = target(args);
    report::check_dir(&dir, existing).map_err(refused)?;
    let mut progress = Progress::new(&format!("dividing {}", grid.name), args.quiet);
    let settings =
        Settings { areas: args.areas, weight: args.weight.map(weight), ..Settings::default() };
    let division = divide(&grid, &settings, &mut |share| {
        progress.at(share);
        !stop.load(Ordering::Relaxed)
    })
    .map_err(|error| Failure::Input(format!("{shown}: {error}")))?;
    drop(progress);
    let document = figures::document(&division);
    let written = write_all(&dir, &source, &division, &document)?;
    let mut out = match args.json {
        true => json(&document)?,
        false => text::summary(&document),
    };
    if !args.json {
        out.push_str("\nWritten\n");
        written.iter().for_each(|path| out.push_str(&format!("  {}\n", path.display())));
    }
    put(&out)?;
    Ok(match (division.stopped, document.outcome) {
        (true, _) => Ending::Interrupted,
        (false, "kept") => Ending::Kept,
        (false, _) => Ending::Broken,
    })
}

fn weight(name: WeightName) -> Weight {
    match name {
        WeightName::Flow => Weight::Flow,
        WeightName::Susceptance => Weight::Susceptance,
    }
}

/// Text of the grid and what to call it.
fn source(args: &Args) -> Result<(String, String), Failure> {
    let Some(path) = &args.grid else {
        return Ok((GRID_TEXT.to_owned(), "built-in example".to_owned()));
    };
    let shown = path.display().to_string();
    let text = std::fs::read_to_string(path)
        .map_err(|error| Failure::Input(format!("cannot read {shown}: {error}")))?;
    Ok((text, shown))
}

/// Where the results go, and what may be written over there.
fn target(args: &Args) -> (PathBuf, Existing) {
    if let Some(dir) = &args.out {
        return (dir.clone(), if args.force { Existing::Replace } else { Existing::Refuse });
    }
    let stem = args.grid.as_deref().and_then(Path::file_name).map_or("quillon".into(), |name| {
        name.to_string_lossy().trim_end_matches(".toml").trim_end_matches(".grid").to_owned()
    });
    let dir = Path::new("hedgerow-out").join(format!("divide-{stem}"));
    (dir, if args.force { Existing::Replace } else { Existing::ReplaceOwn })
}

fn json(document: &figures::Document) -> Result<String, Failure> {
    serde_json::to_string_pretty(document)
        .map(|text| text + "\n")
        .map_err(|error| Failure::Environment(format!("cannot lay out result.json: {error}")))
}

/// The outage table as comma-separated values.
fn outages_csv(document: &figures::Document) -> Result<String, csv::Error> {
    let mut table = csv::Writer::from_writer(Vec::new());
    table.write_record([
        "line",
        "area",
        "pocket",
        "flow_before_mw",
        "flow_after_mw",
        "outside_before_mw",
        "outside_before_line",
        "worst_loading_before",
        "worst_line_before",
        "outside_after_mw",
        "worst_loading_after",
        "worst_line_after",
    ])?;
    for row in &document.outages {
        let cells = |effect: &Option<figures::EffectFigures>| match effect {
            Some(e) => (
                e.outside_mw.to_string(),
                e.outside_line.clone().unwrap_or_default(),
                e.worst_loading.to_string(),
                e.worst_line.clone().unwrap_or_default(),
            ),
            None => ("splits".to_owned(), String::new(), String::new(), String::new()),
        };
        let (before, after) = (cells(&row.before), cells(&row.after));
        table.write_record([
            row.line.clone(),
            row.area.clone(),
            row.pocket.map(|pocket| pocket.to_string()).unwrap_or_default(),
            row.flow_before_mw.to_string(),
            row.flow_after_mw.to_string(),
            before.0,
            before.1,
            before.2,
            before.3,
            after.0,
            after.2,
            after.3,
        ])?;
    }
    let bytes = table.into_inner().map_err(|error| error.into_error())?;
    Ok(String::from_utf8_lossy(&bytes).into_owned())
}

/// Write every file; returns their paths.
fn write_all(
    dir: &Path,
    source: &str,
    division: &Division,
    document: &figures::Document,
) -> Result<Vec<PathBuf>, Failure> {
    let layout = |error: &dyn std::fmt::Display| {
        Failure::Environment(format!("cannot lay out the results: {error}"))
    };
    let (before, after) = page::maps(division);
    let files = [
        ("divided.grid.toml", file::divided_text(source, division).map_err(|e| layout(&e))?),
        ("report.html", page::page(division, document)),
        ("map-before.svg", before),
        ("map-after.svg", after),
        ("outages.csv", outages_csv(document).map_err(|e| layout(&e))?),
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

fn refused(error: ReportError) -> Failure {
    match error {
        ReportError::Occupied(_) => Failure::Input(error.to_string()),
        ReportError::Write { .. } | ReportError::Layout { .. } => {
            Failure::Environment(error.to_string())
        }
    }
}

/// A flag that Ctrl-C sets.
fn stop_flag() -> Result<Arc<AtomicBool>, Failure> {
    let flag = Arc::new(AtomicBool::new(false));
    let seen = Arc::clone(&flag);
    ctrlc::set_handler(move || seen.store(true, Ordering::Relaxed))
        .map_err(|e| Failure::Environment(format!("cannot catch Ctrl-C: {e}")))?;
    Ok(flag)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A directory of this test alone, removed at the end.
    struct Dir(PathBuf);

    impl Dir {
        fn new(name: &str) -> Self {
            Self(
                std::env::temp_dir().join(format!("hedgerow-divide-{name}-{}", std::process::id())),
            )
        }
    }

    impl Drop for Dir {
        fn drop(&mut self) {
            let _ = std::fs::remove_dir_all(&self.0);
        }
    }

    fn args(dir: &Dir) -> Args {
        Args {
            grid: None,
            areas: None,
            weight: None,
            out: Some(dir.0.clone()),
            force: false,
            json: true,
            quiet: true,
        }
    }

    fn ended(args: &Args) -> Result<Ending, Failure> {
        run_until(args, &AtomicBool::new(false))
    }

    #[test]
    fn divides_the_built_in_example_and_writes_every_file_once() {
        let dir = Dir::new("files");
        assert_eq!(ended(&args(&dir)), Ok(Ending::Kept));
        for name in
            ["divided.grid.toml", "report.html", "map-after.svg", "outages.csv", "result.json"]
        {
            assert!(dir.0.join(name).is_file(), "{name}");
        }
        let grid =
            crate::case::read_grid(&dir.0.join("divided.grid.toml")).expect("it passes its check");
        assert_eq!(grid.lines.iter().filter(|line| !line.closed).count(), 3);
        let text = std::fs::read_to_string(dir.0.join("result.json")).expect("a file");
        let document: serde_json::Value = serde_json::from_str(&text).expect("JSON");
        assert_eq!((&document["outcome"], &document["trees"]), (&"kept".into(), &8.0.into()));
        assert!(
            matches!(ended(&args(&dir)), Err(Failure::Input(text)) if text.contains("--force"))
        );
        assert_eq!(ended(&Args { force: true, ..args(&dir) }), Ok(Ending::Kept));
    }

    #[test]
    fn a_line_above_its_rating_is_a_bad_result() {
        let dir = Dir::new("bad");
        std::fs::create_dir_all(&dir.0).expect("a directory");
        let path = dir.0.join("weak.grid.toml");
        std::fs::write(&path, GRID_TEXT.replace("rating_mw = 115.0", "rating_mw = 110.5"))
            .expect("a file");
        // Ashmere is short of 110 MW, which one tie must bring.
        let out = Some(dir.0.join("out"));
        let weak = Args { grid: Some(path.clone()), out: out.clone(), ..args(&dir) };
        assert_eq!(ended(&weak), Ok(Ending::Kept));
        let text = std::fs::read_to_string(&path)
            .expect("a file")
            .replace("rating_mw = 110.5", "rating_mw = 109.0");
        std::fs::write(&path, text).expect("a file");
        assert_eq!(ended(&Args { force: true, ..weak }), Ok(Ending::Broken));
    }

    #[test]
    fn wrong_input_says_what_would_be_right() {
        let dir = Dir::new("wrong");
        let missing = Args { grid: Some("no/such.grid.toml".into()), ..args(&dir) };
        assert!(
            matches!(ended(&missing), Err(Failure::Input(text)) if text.contains("no/such.grid.toml"))
        );
        let many = Args { areas: Some(40), ..args(&dir) };
        assert!(
            matches!(ended(&many), Err(Failure::Input(text)) if text.contains("a third of the buses"))
        );
        assert!(!dir.0.exists(), "nothing is written");
    }

    #[test]
    fn a_set_flag_ends_as_interrupted_with_files_written() {
        let dir = Dir::new("stop");
        assert_eq!(run_until(&args(&dir), &AtomicBool::new(true)), Ok(Ending::Interrupted));
        assert!(dir.0.join("result.json").is_file());
    }
}
