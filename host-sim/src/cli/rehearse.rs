//! `hedgerow rehearse`: run a play in closed loop, judge its end, write it down.
//!
//! Contract: without arguments it runs the first built-in play. The directory
//! is checked before a run is spent on it. Ctrl-C ends the run at the next tick;
//! what is finished is judged and written all the same.

use std::fmt::Write as _;
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::Instant;

use clap::ValueEnum;

use super::check::input_failure;
use super::progress::Progress;
use super::{Ending, Failure, put, stdout_colour};
use crate::case::model::{Grid, Play};
use crate::case::nearest::nearest;
use crate::case::{builtin_play, builtin_plays, read_play};
use crate::judge::{Judgement, Outcome, judge};
use crate::record::{Recording, Scheme};
use crate::rehearsal::rehearse;
use crate::report::figures::Meta;
use crate::report::{self, Bundle, Existing, ReportError, scheme_word};

/// Play that runs when none is named.
const DEFAULT_PLAY: &str = "quillon";

/// Ending of a play's file name.
const PLAY_ENDING: &str = ".play.toml";

/// Who balances the areas.
#[derive(Clone, Copy, Debug, PartialEq, Eq, ValueEnum)]
pub enum SchemeName {
    /// Hedgerow's stewards.
    Steward,
    /// Governor droop alone.
    Droop,
    /// Droop with integration of the area control error.
    AreaControlError,
}

impl From<SchemeName> for Scheme {
    fn from(name: SchemeName) -> Scheme {
        match name {
            SchemeName::Steward => Scheme::Steward,
            SchemeName::Droop => Scheme::Droop,
            SchemeName::AreaControlError => Scheme::AreaControlError,
        }
    }
}

/// Arguments of `rehearse`.
#[derive(Clone, Debug, clap::Args)]
#[command(after_help = "\
Examples:
  hedgerow rehearse                         the built-in play `quillon`
  hedgerow rehearse shed --compare          a built-in play under all schemes
  hedgerow rehearse storm.play.toml --out storm --json > storm.json")]
pub struct Args {
    /// Name of a built-in play, or path of a *.play.toml file.
    #[arg(default_value = DEFAULT_PLAY)]
    pub play: String,
    /// List the built-in plays and stop.
    #[arg(long)]
    pub list: bool,
    /// Directory for the report [default: hedgerow-out/<play>].
    #[arg(long, value_name = "DIR")]
    pub out: Option<PathBuf>,
    /// Write over files that are there.
    #[arg(long)]
    pub force: bool,
    /// Print the result as one JSON document instead of text.
    #[arg(long)]
    pub json: bool,
    /// Who balances the areas.
    #[arg(long, value_enum, default_value = "steward")]
    pub scheme: SchemeName,
    /// Run the other schemes too and set them side by side.
    #[arg(long)]
    pub compare: bool,
    /// Seed of every random stream, in place of the play's.
    #[arg(long, value_name = "N")]
    pub seed: Option<u64>,
    /// No progress bar, and no text but the outcome and what was written.
    #[arg(long)]
    pub quiet: bool,
}

/// Run it.
///
/// Errors: [`Failure::Input`] for the play and the directory given,
/// [`Failure::Environment`] for what the machine refuses.
pub fn run(args: &Args) -> Result<Ending, Failure> {
    if args.list {
        put(&list(args.json)?)?;
        return Ok(Ending::Kept);
    }
    let (grid, mut play) = find(&args.play)?;
    play.run.seed = args.seed.unwrap_or(play.run.seed);
    let (dir, existing) = target(args, &play);
    report::check_dir(&dir, existing).map_err(refused)?;
    let stop = stop_flag()?;
    let begun = Instant::now();
    let mut runs = Vec::new();
    for scheme in schemes(args) {
        if !runs.is_empty() && stop.load(Ordering::Relaxed) {
            break;
        }
        runs.push(run_one(&grid, &play, scheme, args, &stop)?);
    }
    let run_wall_s = begun.elapsed().as_secs_f64();
    let begun = Instant::now();
    let mut judged = runs.into_iter().map(|r| {
        let judgement = judge(&grid, &play, &r);
        (r, judgement)
    });
    let Some((recording, judgement)) = judged.next() else {
        return Ok(Ending::Interrupted);
    };
    let others: Vec<(Recording, Judgement)> = judged.collect();
    let meta = Meta {
        version: env!("CARGO_PKG_VERSION").to_owned(),
        run_wall_s,
        judge_wall_s: begun.elapsed().as_secs_f64(),
    };
    let bundle = Bundle {
        grid: &grid,
        play: &play,
        recording: &recording,
        judgement: &judgement,
        others: &others,
        meta: &meta,
    };
    let written = report::write_all(&dir, &bundle, existing).map_err(refused)?;
    put(&shown(args, &bundle, &written)?)?;
    Ok(match (stop.load(Ordering::Relaxed), judgement.outcome) {
        (true, _) => Ending::Interrupted,
        (false, Outcome::Kept) => Ending::Kept,
        (false, Outcome::Broken) => Ending::Broken,
    })
}

/// The list of built-in plays, as text or JSON.
fn list(json: bool) -> Result<String, Failure> {
    let plays = builtin_plays();
    if json {
        let items: Vec<_> = plays
            .iter()
            .map(|(name, title)| serde_json::json!({ "name": name, "title": title }))
            .collect();
        let document = serde_json::json!({ "schema": report::figures::SCHEMA, "plays": items });
        return Ok(format!("{document:#}\n"));
    }
    let mut out = String::new();
    for (name, title) in plays {
        let _ = writeln!(out, "{name:<18}{title}");
    }
    Ok(out)
}

/// A play by built-in name or by path.
pub(super) fn find(name: &str) -> Result<(Grid, Play), Failure> {
    if let Some(found) = builtin_play(name) {
        return Ok(found);
    }
    let path = Path::new(name);
    let looks_like_path =
        path.exists() || name.ends_with(".toml") || name.contains(std::path::is_separator);
    if looks_like_path {
        return read_play(path).map_err(|problems| input_failure(&problems));
    }
    let known: Vec<&str> = builtin_plays().iter().map(|(name, _)| *name).collect();
    let near = nearest(name, known.iter().copied());
    let near = near.map_or_else(String::new, |near| format!("; did you mean `{near}`?"));
    Err(Failure::Input(format!(
        "no built-in play and no file is called `{name}`{near}\nbuilt-in plays: {}\na file's name ends in {PLAY_ENDING}",
        known.join(", ")
    )))
}

/// Where the report goes, and what may be written over there.
fn target(args: &Args, play: &Play) -> (PathBuf, Existing) {
    match (&args.out, args.force) {
        (Some(dir), true) => (dir.clone(), Existing::Replace),
        (Some(dir), false) => (dir.clone(), Existing::Refuse),
        (None, force) => {
            let dir = Path::new("hedgerow-out").join(dir_name(&play.name));
            (dir, if force { Existing::Replace } else { Existing::ReplaceOwn })
        }
    }
}

/// A play's name as the name of a directory.
pub(super) fn dir_name(play: &str) -> String {
    let safe: String = play
        .chars()
        .map(|c| if c.is_alphanumeric() || "-_.".contains(c) { c } else { '-' })
        .collect();
    match safe.trim_matches('.') {
        "" => "play".to_owned(),
        name => name.to_owned(),
    }
}

pub(super) fn refused(error: ReportError) -> Failure {
    match error {
        ReportError::Occupied(_) => Failure::Input(error.to_string()),
        ReportError::Write { .. } | ReportError::Layout { .. } => {
            Failure::Environment(error.to_string())
        }
    }
}

/// A flag that Ctrl-C sets.
pub(super) fn stop_flag() -> Result<Arc<AtomicBool>, Failure> {
    let flag = Arc::new(AtomicBool::new(false));
    let seen = Arc::clone(&flag);
    ctrlc::set_handler(move || seen.store(true, Ordering::Relaxed))
        .map_err(|e| Failure::Environment(format!("cannot catch Ctrl-C: {e}")))?;
    Ok(flag)
}

/// Schemes to run, that of the report first.
fn schemes(args: &Args) -> Vec<Scheme> {
    let first = Scheme::from(args.scheme);
    let mut out = vec![first];
    if args.compare {
        let all = [Scheme::Steward, Scheme::Droop, Scheme::AreaControlError];
        out.extend(all.into_iter().filter(|s| *s != first));
    }
    out
}

fn run_one(
    grid: &Grid,
    play: &Play,
    scheme: Scheme,
    args: &Args,
    stop: &AtomicBool,
) -> Result<Recording, Failure> {
    let mut progress =
        Progress::new(&format!("{} ({})", play.name, scheme_word(scheme)), args.quiet);
    rehearse(grid, play, scheme, &mut |share| {
        progress.at(share);
        !stop.load(Ordering::Relaxed)
    })
    .map_err(|error| {
        Failure::Input(format!("the rehearsal of {} cannot go on: {error}", play.name))
    })
}

/// What goes to stdout.
fn shown(args: &Args, bundle: &Bundle, written: &[PathBuf]) -> Result<String, Failure> {
    if args.json {
        return report::json::document(bundle).map_err(refused);
    }
    let mut out = match args.quiet {
        true => report::summary::brief(bundle),
        false => report::summary::text(bundle, stdout_colour()),
    };
    out.push_str("\nWritten\n");
    for path in written {
        let _ = writeln!(out, "  {}", path.display());
    }
    Ok(out)
}

#[cfg(test)]
mod tests {
    use clap::Parser;

    use super::super::Cli;
    use super::*;

    fn parsed(line: &str) -> Args {
        match Cli::parse_from(line.split_whitespace()).command {
            super::super::Command::Rehearse(args) => args,
            other => panic!("{other:?} is another command"),
        }
    }

    #[test]
    fn the_default_is_the_first_built_in_play_under_stewards() {
        let args = parsed("hedgerow rehearse");
        assert_eq!(args.play, builtin_plays()[0].0);
        assert_eq!(schemes(&args), [Scheme::Steward]);
    }

    #[test]
    fn compare_keeps_the_chosen_scheme_first() {
        let args = parsed("hedgerow rehearse shed --compare --scheme droop");
        assert_eq!(schemes(&args), [Scheme::Droop, Scheme::Steward, Scheme::AreaControlError]);
    }

    #[test]
    fn an_unknown_play_names_the_known_ones() {
        let Err(Failure::Input(text)) = find("storm") else { panic!("found it") };
        assert!(text.contains("`storm`") && text.contains(DEFAULT_PLAY), "{text}");
    }

    #[test]
    fn a_missing_file_is_wrong_input() {
        assert!(matches!(find("no/such.play.toml"), Err(Failure::Input(_))));
    }

    #[test]
    fn only_our_own_directory_is_written_over_without_force() {
        let (_, play) = builtin_play(DEFAULT_PLAY).unwrap();
        let (dir, existing) = target(&parsed("hedgerow rehearse"), &play);
        assert_eq!(
            (dir.as_path(), existing),
            (Path::new("hedgerow-out/quillon"), Existing::ReplaceOwn)
        );
        assert_eq!(target(&parsed("hedgerow rehearse --out x"), &play).1, Existing::Refuse);
        assert_eq!(
            target(&parsed("hedgerow rehearse --out x --force"), &play).1,
            Existing::Replace
        );
    }

    #[test]
    fn a_play_name_cannot_leave_the_output_directory() {
        assert_eq!(dir_name("../../etc"), "-..-etc");
        assert_eq!(dir_name(".."), "play");
        assert_eq!(dir_name("a b/c"), "a-b-c");
    }

    #[test]
    fn the_command_line_is_consistent() {
        use clap::CommandFactory;
        Cli::command().debug_assert();
    }

    #[test]
    fn every_command_shows_an_example() {
        use clap::CommandFactory;
        for command in Cli::command().get_subcommands() {
            let help = command.get_after_help().map(ToString::to_string).unwrap_or_default();
            assert!(help.contains("Example"), "{} has none", command.get_name());
        }
    }
}
