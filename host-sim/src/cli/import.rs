//! `hedgerow import`: turn an IEEE Common Data Format file into a grid file.
//!
//! Contract: prints every rule that was applied; the file it writes passes
//! `hedgerow check`. Nothing is overwritten without `--force`.

use std::io::Write as _;
use std::path::{Path, PathBuf};

use crate::case::cdf::{Imported, import};

use super::check::input_failure;
use super::new::{cannot_write, refuse_overwrite};
use super::{Ending, Failure};

/// Turn an IEEE Common Data Format file into a grid file.
#[derive(Clone, Debug, clap::Args)]
#[command(after_help = "Example:\n  hedgerow import case39.cdf --out case39.grid.toml")]
pub struct Args {
    /// File in the Common Data Format of 1973.
    pub file: PathBuf,
    /// Grid file to write; without it, the source's name with .grid.toml, beside it.
    #[arg(long)]
    pub out: Option<PathBuf>,
    /// Overwrite the grid file if it is there already.
    #[arg(long)]
    pub force: bool,
    /// Print the rules as JSON.
    #[arg(long)]
    pub json: bool,
}

/// Run the command.
pub fn run(args: &Args) -> Result<Ending, Failure> {
    let source = args.file.display();
    let bytes = std::fs::read(&args.file)
        .map_err(|err| Failure::Input(format!("cannot read {source}: {err}")))?;
    let target = args.out.clone().unwrap_or_else(|| args.file.with_extension("grid.toml"));
    refuse_overwrite(&target, args.force)?;
    let imported =
        import(&bytes, &source.to_string()).map_err(|problems| input_failure(&problems))?;
    std::fs::write(&target, &imported.text).map_err(|err| cannot_write(&target, &err))?;
    let _ = std::io::stdout().write_all(told(&target, &imported, args.json).as_bytes());
    Ok(Ending::Kept)
}

/// What was written and by which rules.
fn told(target: &Path, imported: &Imported, json: bool) -> String {
    let target = target.display().to_string();
    if json {
        let document = serde_json::json!({ "schema": 1, "wrote": target, "rules": imported.rules });
        return format!("{document:#}\n");
    }
    let mut out = format!("wrote {target}\nrules applied:\n");
    for rule in &imported.rules {
        out.push_str(&format!("  - {rule}\n"));
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn says_wrong_input_for_a_file_that_is_no_case() {
        let path = std::env::temp_dir().join(format!("hedgerow-nocase-{}.cdf", std::process::id()));
        std::fs::write(&path, "nothing of the kind\n").expect("a file");
        let args = Args { file: path.clone(), out: None, force: false, json: false };
        let ending = run(&args);
        std::fs::remove_file(&path).expect("the test's file goes again");
        assert!(matches!(ending, Err(Failure::Input(text)) if text.contains("BUS DATA FOLLOWS")));
        assert!(!path.with_extension("grid.toml").exists());
    }

    #[test]
    fn prints_the_rules_as_one_json_document() {
        let imported = Imported { text: String::new(), rules: vec!["a rule".to_owned()] };
        let text = told(Path::new("x.grid.toml"), &imported, true);
        let document: serde_json::Value = serde_json::from_str(&text).expect("JSON");
        assert_eq!(document["rules"][0], "a rule");
    }
}
