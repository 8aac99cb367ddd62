//! `hedgerow bench`: run a play with boards in the loop and keep every frame.
//!
//! Contract: without arguments it runs the first built-in play on emulated
//! Cortex-M4F boards. What is finished is judged and written however the run
//! ends; a board that is lost, or a frame that differs, is exit 1.

use std::fmt::Write as _;
use std::path::{Path, PathBuf};
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::Duration;

use serde::Serialize;

use super::progress::Progress;
use super::rehearse::{dir_name, find, refused, stop_flag};
use super::{Ending, Failure, put};
use crate::bench::compare::Difference;
use crate::bench::image::Images;
use crate::bench::logbook::Logbook;
use crate::bench::node::{Assignment, Core, LinkKind, NodeKind, assign};
use crate::bench::{BenchError, Benched, Setup, bench};
use crate::case::model::{Grid, Play};
use crate::judge::{Judgement, Outcome, judge};
use crate::rehearsal::RehearsalError;
use crate::report::figures::Meta;
use crate::report::{self, Bundle, Existing, summary};

/// Name of the logbook in the output directory.
pub const LOGBOOK_FILE: &str = "logbook.hlog";

/// Arguments of `bench`.
#[derive(Clone, Debug, clap::Args)]
#[command(after_help = "\
Examples:
  hedgerow bench                                      `quillon` on emulated Cortex-M4F boards
  hedgerow bench shed --node all=emulated:m7 --side-by-side
  hedgerow bench storm.play.toml --node ashmere=emulated:m4 --link uart

Boards keep time by the plant's measurements: virtual time, not real time.")]
pub struct Args {
    /// Name of a built-in play, or path of a *.play.toml file.
    #[arg(default_value = "quillon")]
    pub play: String,
    /// What sits in an area: AREA=in-process or AREA=emulated:CORE (m3, m4, m7, m33); AREA may be
    /// `all`. Areas not named sit in-process; with no --node at all, all=emulated:m4.
    #[arg(long = "node", value_name = "AREA=KIND")]
    pub nodes: Vec<Assignment>,
    /// How bytes get to emulated boards.
    #[arg(long, value_enum, default_value = "fifo")]
    pub link: LinkKind,
    /// Run the same steward in this process beside each board and compare every frame.
    #[arg(long)]
    pub side_by_side: bool,
    /// Image to run on a core, in place of one built now: CORE=FILE.
    #[arg(long = "image", value_name = "CORE=FILE", value_parser = parse_image)]
    pub images: Vec<(Core, PathBuf)>,
    /// Run only this much of the play, s.
    #[arg(long, value_name = "S", value_parser = parse_positive)]
    pub for_s: Option<f64>,
    /// How long a board may take for a tick before it counts as gone, s.
    #[arg(long, value_name = "S", default_value = "5", value_parser = parse_positive)]
    pub time_out_s: f64,
    /// Seed of every random stream, in place of the play's.
    #[arg(long, value_name = "N")]
    pub seed: Option<u64>,
    /// Directory for report and logbook [default: hedgerow-out/bench-<play>].
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

fn parse_image(text: &str) -> Result<(Core, PathBuf), String> {
    let (core, path) = text.split_once('=').ok_or("write CORE=FILE, say m4=board.elf")?;
    Ok((core.parse()?, PathBuf::from(path)))
}

pub(super) fn parse_positive(text: &str) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(value) if value.is_finite() && value > 0.0 => Ok(value),
        _ => Err("a number above 0 is wanted".to_owned()),
    }
}

/// Run it.
///
/// Errors: [`Failure::Input`] for the play, the areas and the directory given,
/// [`Failure::Environment`] for a missing emulator or target and for silent boards.
pub fn run(args: &Args) -> Result<Ending, Failure> {
    let (grid, mut play) = find(&args.play)?;
    play.run.seed = args.seed.unwrap_or(play.run.seed);
    if let Some(for_s) = args.for_s {
        play.run.duration_s = play.run.duration_s.min(for_s);
    }
    let kinds = assign(&grid, &args.nodes).map_err(|e| Failure::Input(e.to_string()))?;
    let (dir, existing) = target(args, &play);
    report::check_dir(&dir, existing).map_err(refused)?;
    let setup = Setup {
        link: args.link,
        images: Images::given(args.images.clone()),
        side_by_side: args.side_by_side,
        time_out: Duration::from_secs_f64(args.time_out_s),
        ..Setup::of(kinds)
    };
    let stop = stop_flag()?;
    let begun = begin_logbook(&dir)?;
    let done = run_it(&grid, &play, &setup, begun, args.quiet, &stop)
        .inspect_err(|_| forget_logbook(&dir))?;
    let judgement = judge(&grid, &play, &done.attended.recording);
    let written = write(&dir, &grid, &play, &done, &judgement)?;
    if let Some(why) = &done.logbook_error {
        return Err(Failure::Environment(format!("the logbook could not be written: {why}")));
    }
    let result = Figures::of(&grid, &play, &setup, &done, &judgement, &written);
    put(&match args.json {
        true => result.json(),
        false => result.text(&dir),
    })?;
    let bad = judgement.outcome == Outcome::Broken
        || done.difference.is_some()
        || !done.attended.lost.is_empty();
    Ok(match (stop.load(Ordering::Relaxed), bad) {
        (true, _) => Ending::Interrupted,
        (false, true) => Ending::Broken,
        (false, false) => Ending::Kept,
    })
}

fn run_it(
    grid: &Grid,
    play: &Play,
    setup: &Setup,
    logbook: Logbook,
    quiet: bool,
    stop: &AtomicBool,
) -> Result<Benched, Failure> {
    let mut progress = Progress::new(&format!("{} on the bench", play.name), quiet);
    bench(grid, play, setup, Some(logbook), &mut |share| {
        progress.at(share);
        !stop.load(Ordering::Relaxed)
    })
    .map_err(|error| failure(&error))
}

/// A run that could not begin, as the failure of a command.
pub(super) fn failure(error: &RehearsalError) -> Failure {
    let input = match error {
        RehearsalError::Seat { why, .. } => {
            why.downcast_ref::<BenchError>().is_some_and(BenchError::is_input)
        }
        RehearsalError::Plant(_) | RehearsalError::Charter(_) | RehearsalError::Refused { .. } => {
            true
        }
    };
    let text = format!("the bench cannot begin: {error}");
    if input { Failure::Input(text) } else { Failure::Environment(text) }
}

/// Where report and logbook go, and what may be written over there.
fn target(args: &Args, play: &Play) -> (PathBuf, Existing) {
    match (&args.out, args.force) {
        (Some(dir), true) => (dir.clone(), Existing::Replace),
        (Some(dir), false) => (dir.clone(), Existing::Refuse),
        (None, force) => {
            let dir = Path::new("hedgerow-out").join(format!("bench-{}", dir_name(&play.name)));
            (dir, if force { Existing::Replace } else { Existing::ReplaceOwn })
        }
    }
}

fn begin_logbook(dir: &Path) -> Result<Logbook, Failure> {
    let path = dir.join(LOGBOOK_FILE);
    let begun = std::fs::create_dir_all(dir).and_then(|()| Logbook::create(&path));
    begun.map_err(|e| Failure::Environment(format!("cannot write {}: {e}", path.display())))
}

/// Take an empty logbook away again: the run did not begin.
fn forget_logbook(dir: &Path) {
    // A directory that holds anything else stays; whatever fails is not worth a word.
    let _gone = std::fs::remove_file(dir.join(LOGBOOK_FILE));
    let _gone = std::fs::remove_dir(dir);
}

fn write(
    dir: &Path,
    grid: &Grid,
    play: &Play,
    done: &Benched,
    judgement: &Judgement,
) -> Result<Vec<PathBuf>, Failure> {
    let meta = Meta {
        version: env!("CARGO_PKG_VERSION").to_owned(),
        run_wall_s: done.run_wall_s,
        judge_wall_s: 0.0,
    };
    let recording = &done.attended.recording;
    let bundle = Bundle { grid, play, recording, judgement, others: &[], meta: &meta };
    // The directory was checked before the run; what is in it now is ours.
    let mut written = report::write_all(dir, &bundle, Existing::Replace).map_err(refused)?;
    written.push(dir.join(LOGBOOK_FILE));
    Ok(written)
}

/// One area's node, for the result.
#[derive(Clone, Debug, Serialize)]
struct NodeFigures {
    area: String,
    node: String,
    core: Option<String>,
    firmware: Option<String>,
    boots: u32,
    ended_when_told: Option<bool>,
    frames_sent: u64,
    frames_refused: u64,
    heard_bytes_per_tick_max: Option<usize>,
    said_bytes_per_tick_max: Option<usize>,
}

/// A board that was lost.
#[derive(Clone, Debug, Serialize)]
struct LostFigures {
    area: String,
    tick: u32,
    at_s: f64,
    why: String,
}

/// What a bench is printed as.
#[derive(Clone, Debug, Serialize)]
struct Figures {
    schema: u32,
    play: String,
    seed: u64,
    link: &'static str,
    outcome: &'static str,
    stopped: bool,
    duration_s: f64,
    nodes: Vec<NodeFigures>,
    lost: Vec<LostFigures>,
    side_by_side: bool,
    frames_compared: u64,
    difference: Option<Difference>,
    start_wall_s: f64,
    run_wall_s: f64,
    times_real: f64,
    written: Vec<String>,
    #[serde(skip)]
    brief: String,
}

impl Figures {
    fn of(
        grid: &Grid,
        play: &Play,
        setup: &Setup,
        done: &Benched,
        judgement: &Judgement,
        written: &[PathBuf],
    ) -> Self {
        let recording = &done.attended.recording;
        let lost = done.attended.lost.iter().map(|lost| LostFigures {
            area: grid.areas[lost.area].name.clone(),
            tick: lost.tick,
            at_s: f64::from(lost.tick) * play.run.tick_s,
            why: lost.why.clone(),
        });
        let meta = Meta {
            version: env!("CARGO_PKG_VERSION").to_owned(),
            run_wall_s: done.run_wall_s,
            judge_wall_s: 0.0,
        };
        let bundle = Bundle { grid, play, recording, judgement, others: &[], meta: &meta };
        Self {
            schema: 1,
            play: play.name.clone(),
            seed: play.run.seed,
            link: setup.link.word(),
            outcome: if judgement.outcome == Outcome::Kept { "kept" } else { "broken" },
            stopped: recording.stopped,
            duration_s: recording.duration_s,
            nodes: (0..grid.areas.len())
                .map(|area| node_figures(grid, setup, done, area))
                .collect(),
            lost: lost.collect(),
            side_by_side: setup.side_by_side,
            frames_compared: done.frames_compared,
            difference: done.difference.clone(),
            start_wall_s: done.start_wall_s,
            run_wall_s: done.run_wall_s,
            times_real: done.times_real(),
            written: written.iter().map(|path| path.display().to_string()).collect(),
            brief: summary::brief(&bundle),
        }
    }

    fn json(&self) -> String {
        serde_json::to_string_pretty(self).unwrap_or_default() + "\n"
    }

    fn text(&self, dir: &Path) -> String {
        let mut out = self.brief.clone();
        let _ = writeln!(
            out,
            "\n{:<14} {:<14} {:>6} {:>8} {:>8} {:>12} {:>12}",
            "area", "node", "boots", "frames", "refused", "bytes in", "bytes out"
        );
        for node in &self.nodes {
            let bytes = |most: Option<usize>| most.map_or("-".to_owned(), |m| m.to_string());
            let _ = writeln!(
                out,
                "{:<14} {:<14} {:>6} {:>8} {:>8} {:>12} {:>12}",
                node.area,
                node.node,
                node.boots,
                node.frames_sent,
                node.frames_refused,
                bytes(node.heard_bytes_per_tick_max),
                bytes(node.said_bytes_per_tick_max),
            );
        }
        let _ = writeln!(
            out,
            "bytes are the most in one tick, as on the wire; {:.1} s of the play took {:.2} s, {:.1} times real time",
            self.duration_s, self.run_wall_s, self.times_real
        );
        if self.side_by_side {
            let _ = match &self.difference {
                None => writeln!(
                    out,
                    "side by side: {} frames, every one equal byte for byte",
                    self.frames_compared
                ),
                Some(found) => writeln!(out, "side by side: FIRST DIFFERENCE: {found}"),
            };
        }
        for lost in &self.lost {
            let _ = writeln!(
                out,
                "LOST the board of {} at {:.1} s (tick {}): {}",
                lost.area, lost.at_s, lost.tick, lost.why
            );
        }
        let _ = writeln!(out, "written to {}", dir.display());
        out
    }
}

fn node_figures(grid: &Grid, setup: &Setup, done: &Benched, area: usize) -> NodeFigures {
    let board = done.boards.iter().find(|board| board.area == area);
    let frames = done.attended.recording.frames.get(area).copied().unwrap_or_default();
    let kind = setup.kinds.get(area).copied().unwrap_or(NodeKind::InProcess);
    NodeFigures {
        area: grid.areas[area].name.clone(),
        node: kind.to_string(),
        core: board.map(|board| board.greeting.core.clone()),
        firmware: board.map(|board| {
            let [major, minor, patch] = board.greeting.version;
            format!("{major}.{minor}.{patch}")
        }),
        boots: board.map_or(1, |board| board.boots),
        ended_when_told: board.and_then(|board| board.ended),
        frames_sent: frames.sent,
        frames_refused: frames.refused,
        heard_bytes_per_tick_max: board
            .and_then(|board| board.traffic.iter().map(|t| t.heard_bytes).max()),
        said_bytes_per_tick_max: board
            .and_then(|board| board.traffic.iter().map(|t| t.said_bytes).max()),
    }
}
