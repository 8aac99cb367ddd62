//! Writes a finished run down: terminal text, JSON, CSV, pictures, one page.
//!
//! Contract: reads a [`Bundle`] and changes nothing in it. Everything but
//! `meta` depends only on grid, play and seed, so the same run gives the same
//! bytes. Nothing is overwritten unless the caller says so.
//! Data flow: `figures` turns a run and its judgement into one [`figures::Document`];
//! `summary`, `json`, `html` and `compare` show it, `csv`, `picture` and `map`
//! read the recording itself.

pub mod compare;
pub mod csv;
pub mod figures;
pub mod html;
pub mod json;
mod lanes;
pub mod map;
pub mod picture;
pub mod summary;
pub(crate) mod svg;

#[cfg(test)]
pub(crate) mod sample;
#[cfg(test)]
mod tests;

use std::path::{Path, PathBuf};

use thiserror::Error;

use crate::case::model::{Grid, Play};
use crate::judge::Judgement;
use crate::record::{Recording, SaidVerdict, Scheme};

/// A run, its judgement, and what the report needs beside them.
#[derive(Clone, Copy, Debug)]
pub struct Bundle<'a> {
    /// The grid.
    pub grid: &'a Grid,
    /// The play.
    pub play: &'a Play,
    /// The run.
    pub recording: &'a Recording,
    /// What the judge says of it.
    pub judgement: &'a Judgement,
    /// The same play under other schemes, for comparison.
    pub others: &'a [(Recording, Judgement)],
    /// Facts of the machine and the clock, kept apart from the results.
    pub meta: &'a figures::Meta,
}

/// What to do with files that are there already.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Existing {
    /// Refuse to write into a directory that has anything in it.
    Refuse,
    /// Write over an earlier result of ours, refuse anything else.
    ReplaceOwn,
    /// Write over whatever has the same name.
    Replace,
}

/// Why a report could not be written.
#[derive(Debug, Error)]
pub enum ReportError {
    /// The directory has files in it and may not be written over.
    #[error("{} already has files in it; name another with --out, or add --force to write over them", .0.display())]
    Occupied(PathBuf),
    /// The file system refused.
    #[error("cannot write {}: {source}", path.display())]
    Write {
        /// What was to be written.
        path: PathBuf,
        /// Why it was not.
        source: std::io::Error,
    },
    /// A result could not be put into its format.
    #[error("cannot lay out {what}: {why}")]
    Layout {
        /// Which file.
        what: &'static str,
        /// What the library said.
        why: String,
    },
}

/// Name of the file that marks a directory as ours.
pub const RESULT_FILE: &str = "result.json";

/// Refuse a directory that may not be written into, before a run is spent on it.
///
/// Errors: [`ReportError::Occupied`], or what the file system says.
pub fn check_dir(dir: &Path, existing: Existing) -> Result<(), ReportError> {
    let Ok(mut entries) = std::fs::read_dir(dir) else {
        return Ok(()); // not there yet, or no directory: creating it will tell
    };
    let occupied = entries.next().is_some();
    let ours = dir.join(RESULT_FILE).is_file();
    match existing {
        Existing::Replace => Ok(()),
        Existing::ReplaceOwn if ours || !occupied => Ok(()),
        Existing::Refuse if !occupied => Ok(()),
        Existing::ReplaceOwn | Existing::Refuse => Err(ReportError::Occupied(dir.to_owned())),
    }
}

/// Write every file of a report and return their paths in the order written.
///
/// Errors: an occupied directory, or the first file that could not be written.
pub fn write_all(
    dir: &Path,
    bundle: &Bundle,
    existing: Existing,
) -> Result<Vec<PathBuf>, ReportError> {
    check_dir(dir, existing)?;
    let mut files: Vec<(String, String)> = vec![
        ("report.html".into(), html::page(bundle)),
        ("picture.svg".into(), picture::svg(bundle.grid, &bundle.play.events, bundle.recording)),
        ("map.svg".into(), map::svg(bundle.grid, &bundle.recording.end)),
        ("trace.csv".into(), csv::trace(bundle.grid, bundle.recording)?),
    ];
    for (recording, _) in bundle.others {
        let name = format!("trace-{}.csv", scheme_word(recording.scheme));
        files.push((name, csv::trace(bundle.grid, recording)?));
    }
    // Last, since it marks the directory as complete.
    files.push((RESULT_FILE.into(), json::document(bundle)?));
    let failed = |path: &Path| {
        let path = path.to_owned();
        move |source| ReportError::Write { path, source }
    };
    std::fs::create_dir_all(dir).map_err(failed(dir))?;
    let mut written = Vec::with_capacity(files.len());
    for (name, content) in files {
        let path = dir.join(name);
        std::fs::write(&path, content).map_err(failed(&path))?;
        written.push(path);
    }
    Ok(written)
}

/// Word of a rung.
pub fn rung_word(rung: u8) -> &'static str {
    match rung {
        0 => "keep",
        1 => "lean",
        2 => "stretch",
        _ => "shed",
    }
}

/// Word of a scheme, as on the command line.
pub fn scheme_word(scheme: Scheme) -> &'static str {
    match scheme {
        Scheme::Steward => "steward",
        Scheme::Droop => "droop",
        Scheme::AreaControlError => "area-control-error",
    }
}

/// Word of a verdict.
pub fn verdict_word(verdict: SaidVerdict) -> &'static str {
    match verdict {
        SaidVerdict::Settled => "settled",
        SaidVerdict::Working => "working",
        SaidVerdict::Impossible => "impossible",
        SaidVerdict::Blind => "blind",
    }
}
