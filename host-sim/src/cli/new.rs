//! `hedgerow new`: write a commented grid and play to start from.
//!
//! Contract: either both files are written or, where one is there already and
//! `--force` is not given, none. With `--synthetic` a made-up grid is written
//! instead, as one file.

use std::io::Write as _;
use std::path::{Path, PathBuf};

use crate::case::starter::FILES;
use crate::case::synthetic::synthetic;

use super::{Ending, Failure};

/// Write a commented grid and play to start from, or a made-up grid.
#[derive(clap::Args, Clone, Debug)]
#[command(after_help = "\
Examples:
  hedgerow new my-grid && hedgerow check my-grid/starter.play.toml
  hedgerow new my-grid --synthetic 300 --areas 6 --seed 1")]
pub struct Args {
    /// Directory to write into; made if it is not there.
    pub dir: PathBuf,
    /// Make up a grid of this many buses (up to 10 000) instead.
    #[arg(long, value_name = "BUSES")]
    pub synthetic: Option<usize>,
    /// Areas of the made-up grid.
    #[arg(long, value_name = "N", default_value_t = 3, requires = "synthetic")]
    pub areas: usize,
    /// Seed of the made-up grid.
    #[arg(long, value_name = "S", default_value_t = 1, requires = "synthetic")]
    pub seed: u64,
    /// Overwrite files that are there already.
    #[arg(long)]
    pub force: bool,
}

/// Run the command.
///
/// Errors: a file that is there already, sizes that make no grid, or what the
/// file system says.
pub fn run(args: &Args) -> Result<Ending, Failure> {
    if let Some(buses) = args.synthetic {
        return make_up(args, buses);
    }
    let paths: Vec<PathBuf> = FILES.iter().map(|(name, _)| args.dir.join(name)).collect();
    for path in &paths {
        refuse_overwrite(path, args.force)?;
    }
    std::fs::create_dir_all(&args.dir).map_err(|err| cannot_write(&args.dir, &err))?;
    let mut out = String::new();
    for (path, (_, text)) in paths.iter().zip(FILES) {
        std::fs::write(path, text).map_err(|err| cannot_write(path, &err))?;
        out.push_str(&format!("wrote {}\n", path.display()));
    }
    if let Some(play) = paths.last() {
        out.push_str(&format!("next: hedgerow rehearse {}\n", play.display()));
    }
    let _ = std::io::stdout().write_all(out.as_bytes());
    Ok(Ending::Kept)
}

/// Write a made-up grid.
fn make_up(args: &Args, buses: usize) -> Result<Ending, Failure> {
    let path = args.dir.join("synthetic.grid.toml");
    refuse_overwrite(&path, args.force)?;
    let text = synthetic(buses, args.areas, args.seed)
        .map_err(|error| Failure::Input(error.to_string()))?;
    std::fs::create_dir_all(&args.dir).map_err(|err| cannot_write(&args.dir, &err))?;
    std::fs::write(&path, text).map_err(|err| cannot_write(&path, &err))?;
    let shown = path.display();
    let out = format!("wrote {shown}\nnext: hedgerow divide {shown}\n");
    let _ = std::io::stdout().write_all(out.as_bytes());
    Ok(Ending::Kept)
}

/// Refuse to overwrite a file unless told to.
pub fn refuse_overwrite(path: &Path, force: bool) -> Result<(), Failure> {
    if path.exists() && !force {
        return Err(Failure::Input(format!(
            "{} is there already; give another name, or --force to overwrite it",
            path.display()
        )));
    }
    Ok(())
}

/// A file that cannot be written.
pub fn cannot_write(path: &Path, err: &std::io::Error) -> Failure {
    Failure::Environment(format!("cannot write {}: {err}", path.display()))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::case::read_play;

    fn args(force: bool) -> Args {
        Args { dir: PathBuf::new(), synthetic: None, areas: 3, seed: 1, force }
    }

    /// A directory of this test alone, removed at the end.
    struct Dir(PathBuf);

    impl Dir {
        fn new(name: &str) -> Self {
            Self(std::env::temp_dir().join(format!("hedgerow-{name}-{}", std::process::id())))
        }
    }

    impl Drop for Dir {
        fn drop(&mut self) {
            let _ = std::fs::remove_dir_all(&self.0);
        }
    }

    #[test]
    fn writes_a_play_that_reads_back_with_its_grid() {
        let dir = Dir::new("new");
        let args = Args { dir: dir.0.join("deep"), ..args(false) };
        assert_eq!(run(&args), Ok(Ending::Kept));
        let (grid, play) = read_play(&args.dir.join("starter.play.toml")).expect("it is right");
        assert_eq!((grid.name.as_str(), play.events.len()), ("Starter", 2));
    }

    #[test]
    fn writes_a_made_up_grid_that_reads_back() {
        let dir = Dir::new("made-up");
        let args = Args { dir: dir.0.clone(), synthetic: Some(24), ..args(false) };
        assert_eq!(run(&args), Ok(Ending::Kept));
        let grid = crate::case::read_grid(&dir.0.join("synthetic.grid.toml")).expect("it is right");
        assert_eq!((grid.buses.len(), grid.areas.len()), (24, 3));
        assert!(matches!(run(&args), Err(Failure::Input(text)) if text.contains("--force")));
        let few = Args { synthetic: Some(5), force: true, ..args };
        assert!(matches!(run(&few), Err(Failure::Input(text)) if text.contains("buses per area")));
    }

    #[test]
    fn overwrites_only_when_told_to_and_then_both() {
        let dir = Dir::new("again");
        let args = |force| Args { dir: dir.0.clone(), ..args(force) };
        std::fs::create_dir_all(&dir.0).expect("a directory");
        let mine = dir.0.join("starter.play.toml");
        std::fs::write(&mine, "mine").expect("a file");
        assert!(matches!(run(&args(false)), Err(Failure::Input(text)) if text.contains("--force")));
        assert_eq!(std::fs::read_to_string(&mine).expect("still there"), "mine");
        assert!(!dir.0.join("starter.grid.toml").exists(), "none is written when one is refused");
        assert_eq!(run(&args(true)), Ok(Ending::Kept));
        assert!(std::fs::read_to_string(&mine).expect("written").starts_with("# A play"));
    }
}
