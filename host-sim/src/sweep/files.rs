//! What a sweep writes, and the partial file that it can be resumed from.
//!
//! Contract: the partial file begins with the plan's fingerprint; each finished
//! task is appended as whole lines, so a killed sweep loses at most the tasks
//! that were running. A last line without its end is dropped on reading. The
//! results are made from rows alone: resumed or not, the bytes are the same.

use std::collections::BTreeMap;
use std::fs::{File, OpenOptions};
use std::io::Write;
use std::path::{Path, PathBuf};

use serde::Serialize;

use super::SweepError;
use super::row::{HEADS, Row};
use super::run::Plan;
use super::totals::{Totals, totals};

/// Name of the partial file in the output directory.
pub const PARTIAL_FILE: &str = "sweep.partial";

/// First word of a partial file.
const PARTIAL_MARK: &str = "hedgerow-sweep-partial";

fn failed(path: &Path) -> impl Fn(std::io::Error) -> SweepError {
    let path = path.to_owned();
    move |e| SweepError::Files(format!("cannot write {}: {e}", path.display()))
}

/// An open partial file.
#[derive(Debug)]
pub struct Partial {
    file: File,
    path: PathBuf,
}

impl Partial {
    /// Begin a new one, or go on with the one that is there; also what it holds.
    ///
    /// Errors: a file of another plan, or what the file system says.
    pub fn open(
        path: &Path,
        plan: &Plan,
        resume: bool,
    ) -> Result<(Partial, BTreeMap<usize, Vec<Row>>), SweepError> {
        let head = format!("{PARTIAL_MARK},1,{:016x}\n", plan.fingerprint());
        let mut done = BTreeMap::new();
        if resume {
            let text = std::fs::read_to_string(path).map_err(|e| {
                SweepError::Resume(format!(
                    "nothing to resume: cannot read {}: {e}; leave out --resume to begin anew",
                    path.display()
                ))
            })?;
            if !text.starts_with(&head) {
                return Err(SweepError::Resume(format!(
                    "{} belongs to another grid or other options; give the same ones, or leave out --resume to begin anew",
                    path.display()
                )));
            }
            done = whole_tasks(&text, plan);
        }
        // Written anew, so that a line cut short does not stay in the middle.
        let mut text = head;
        for (task, rows) in &done {
            text.push_str(&task_text(*task, rows)?);
        }
        std::fs::write(path, text).map_err(failed(path))?;
        let file = OpenOptions::new().append(true).open(path).map_err(failed(path))?;
        Ok((Partial { file, path: path.to_owned() }, done))
    }

    /// Append a finished task.
    ///
    /// Errors: what the file system says.
    pub fn append(&mut self, task: usize, rows: &[Row]) -> Result<(), SweepError> {
        let text = task_text(task, rows)?;
        self.file
            .write_all(text.as_bytes())
            .and_then(|()| self.file.flush())
            .map_err(failed(&self.path))
    }
}

/// Rows of a task as lines `task,place,fields...`.
fn task_text(task: usize, rows: &[Row]) -> Result<String, SweepError> {
    let mut table = csv::Writer::from_writer(Vec::new());
    for (place, row) in rows.iter().enumerate() {
        let mut fields = vec![task.to_string(), place.to_string()];
        fields.extend(row.fields());
        table.write_record(&fields).map_err(|e| SweepError::Files(e.to_string()))?;
    }
    into_text(table)
}

fn into_text(table: csv::Writer<Vec<u8>>) -> Result<String, SweepError> {
    let bytes = table.into_inner().map_err(|e| SweepError::Files(e.to_string()))?;
    String::from_utf8(bytes).map_err(|e| SweepError::Files(e.to_string()))
}

/// Tasks of which every row is there.
fn whole_tasks(text: &str, plan: &Plan) -> BTreeMap<usize, Vec<Row>> {
    let whole = text.rfind('\n').map_or("", |end| &text[..=end]);
    let mut reader =
        csv::ReaderBuilder::new().has_headers(false).flexible(true).from_reader(whole.as_bytes());
    let mut found: BTreeMap<usize, Vec<Row>> = BTreeMap::new();
    for record in reader.records().skip(1).flatten() {
        let fields: Vec<&str> = record.iter().collect();
        let task = fields.first().and_then(|f| f.parse::<usize>().ok());
        let place = fields.get(1).and_then(|f| f.parse::<usize>().ok());
        let row = fields.get(2..).and_then(Row::from_fields);
        if let (Some(task), Some(place), Some(row)) = (task, place, row) {
            let rows = found.entry(task).or_default();
            if rows.len() == place {
                rows.push(row);
            }
        }
    }
    let tasks = plan.tasks();
    found.retain(|&t, rows| tasks.get(t).is_some_and(|task| task.cells.len() == rows.len()));
    found
}

/// The rows as a table.
///
/// Errors: what the library says.
pub fn csv_text(rows: &[Row]) -> Result<String, SweepError> {
    let mut table = csv::Writer::from_writer(Vec::new());
    table.write_record(HEADS).map_err(|e| SweepError::Files(e.to_string()))?;
    for row in rows {
        table.write_record(row.fields()).map_err(|e| SweepError::Files(e.to_string()))?;
    }
    into_text(table)
}

/// What the result file holds.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Document {
    /// Version of this layout.
    pub schema: u32,
    /// Name of the grid.
    pub grid: String,
    /// `static` or `closed-loop`.
    pub mode: String,
    /// What was assumed, in sentences.
    pub notes: Vec<String>,
    /// Whether it was stopped before its end.
    pub stopped: bool,
    /// Totals per factor, form and scheme.
    pub totals: Vec<Totals>,
    /// Every row.
    pub rows: Vec<Row>,
}

impl Document {
    /// Make it from rows.
    pub fn new(grid: &str, mode: &str, notes: Vec<String>, stopped: bool, rows: Vec<Row>) -> Self {
        Self {
            schema: 1,
            grid: grid.to_owned(),
            mode: mode.to_owned(),
            notes,
            stopped,
            totals: totals(&rows),
            rows,
        }
    }

    /// As JSON.
    ///
    /// Errors: what the library says.
    pub fn json(&self) -> Result<String, SweepError> {
        let mut text =
            serde_json::to_string_pretty(self).map_err(|e| SweepError::Files(e.to_string()))?;
        text.push('\n');
        Ok(text)
    }
}
