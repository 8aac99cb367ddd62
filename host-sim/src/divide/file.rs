//! The divided grid as a grid file: the file it came from, comments kept.
//!
//! Contract: only what the division changes is touched: `closed` of opened ties,
//! `schedule_mw` of ties that the division makes meaningless, and, where areas
//! were proposed, `[[area]]` and each bus's `area`. The caution stands on top.
//! The text reads back without a problem, or it is not handed out.
//!
//! Data flow: text of the grid file + `Division` -> edited document -> text.

use std::fmt::Write as _;

use thiserror::Error;
use toml_edit::{ArrayOfTables, DocumentMut, Item, Table, TableLike, Value, value};

use super::base::is_tie;
use super::{Division, text};
use crate::case::{Problems, parse_grid};

/// Why the file could not be written.
#[derive(Debug, Error)]
pub enum FileError {
    /// The text is no TOML.
    #[error("the grid file cannot be edited: {0}")]
    Syntax(#[from] toml_edit::TomlError),
    /// The text does not hold the grid that was divided.
    #[error(
        "the grid file has {found} entries of `{table}`; the grid that was divided has {expected}"
    )]
    Entries {
        /// Which list.
        table: &'static str,
        /// Entries in the file.
        found: usize,
        /// Entries of the grid.
        expected: usize,
    },
    /// The edited file does not pass its own check.
    #[error("the divided grid does not pass the check of grid files:\n{0}")]
    Check(#[from] Problems),
}

/// Edit the text of the grid file.
///
/// Errors: a text that is not that of the divided grid, or a result that fails its check.
pub fn divided_text(source: &str, division: &Division) -> Result<String, FileError> {
    let mut document: DocumentMut = source.parse()?;
    let stale = edit_lines(&mut document, division)?;
    if division.proposal.is_some() {
        edit_areas(&mut document, division)?;
    }
    caution(&mut document, division, stale);
    let text = document.to_string();
    parse_grid(&text, "divided.grid.toml")?;
    Ok(text)
}

/// The entries of a list of tables, whichever way the file writes it.
fn entries<'a>(
    document: &'a mut DocumentMut,
    table: &'static str,
    expected: usize,
) -> Result<Vec<&'a mut dyn TableLike>, FileError> {
    let found: Vec<&mut dyn TableLike> = match document.get_mut(table) {
        Some(Item::ArrayOfTables(list)) => {
            list.iter_mut().map(|entry| entry as &mut dyn TableLike).collect()
        }
        Some(Item::Value(Value::Array(list))) => list
            .iter_mut()
            .filter_map(Value::as_inline_table_mut)
            .map(|entry| entry as &mut dyn TableLike)
            .collect(),
        _ => Vec::new(),
    };
    if found.len() == expected {
        Ok(found)
    } else {
        Err(FileError::Entries { table, found: found.len(), expected })
    }
}

/// Open ties; returns whether an agreed flow was taken out.
fn edit_lines(document: &mut DocumentMut, division: &Division) -> Result<bool, FileError> {
    let mut stale = false;
    let grid = &division.grid;
    let lines = entries(document, "line", grid.lines.len())?;
    for (line, entry) in lines.into_iter().enumerate() {
        if division.before.closed[line] && !division.after.closed[line] {
            set(entry, "closed", false.into());
        }
        // An agreed flow of before no longer adds up with the ties that are left.
        if is_tie(grid, line) || division.proposal.is_some() {
            stale |= entry.remove("schedule_mw").is_some();
        }
    }
    Ok(stale)
}

/// Set a key, keeping the white space and the comment around its value.
fn set(entry: &mut dyn TableLike, key: &str, new: Value) {
    let decor = entry.get(key).and_then(Item::as_value).map(|old| old.decor().clone());
    let mut item = value(new);
    if let (Some(decor), Some(new)) = (decor, item.as_value_mut()) {
        *new.decor_mut() = decor;
    }
    entry.insert(key, item);
}

fn edit_areas(document: &mut DocumentMut, division: &Division) -> Result<(), FileError> {
    let grid = &division.grid;
    for (bus, entry) in entries(document, "bus", grid.buses.len())?.into_iter().enumerate() {
        set(entry, "area", grid.areas[grid.buses[bus].area].name.as_str().into());
    }
    let first =
        document.get("area").and_then(Item::as_array_of_tables).and_then(|list| list.get(0));
    let (position, decor) = match first {
        Some(table) => (table.position(), Some(table.decor().clone())),
        None => (None, None),
    };
    let mut list = ArrayOfTables::new();
    for (index, area) in grid.areas.iter().enumerate() {
        let mut table = Table::new();
        table.insert("name", value(area.name.as_str()));
        if let Some(word) = ["keep", "lean", "stretch"].get(usize::from(area.lowest_rung)) {
            table.insert("lowest_rung", value(*word));
        }
        table.set_position(position);
        table.decor_mut().set_prefix("\n");
        if let (0, Some(decor)) = (index, &decor) {
            *table.decor_mut() = decor.clone();
        }
        list.push(table);
    }
    document.insert("area", Item::ArrayOfTables(list));
    Ok(())
}

/// Put the caution above everything else.
fn caution(document: &mut DocumentMut, division: &Division, stale: bool) {
    let mut head = String::from("# Divided by hedgerow. ");
    let opened = division.price.opened.len();
    let _ = writeln!(
        head,
        "{opened} of {} ties are left open (`closed = false`).",
        division.choices.ties.len()
    );
    for sentence in text::CAUTION {
        for line in wrapped(sentence, 92) {
            let _ = writeln!(head, "# {line}");
        }
    }
    if let Some(proposal) = &division.proposal {
        let _ = writeln!(head, "# The {} areas were proposed by the program.", proposal.area_count);
    }
    if stale {
        let _ = writeln!(
            head,
            "# Agreed tie flows (`schedule_mw`) were taken out: a tree of ties has one flow only."
        );
    }
    head.push_str("#\n");
    let Some(mut key) = document.as_table_mut().key_mut("format") else {
        return;
    };
    let decor = key.leaf_decor_mut();
    let before = decor.prefix().and_then(|prefix| prefix.as_str()).unwrap_or("").to_owned();
    decor.set_prefix(format!("{head}{before}"));
}

/// Words of a sentence on lines of limited length.
fn wrapped(sentence: &str, width: usize) -> Vec<String> {
    let mut lines = vec![String::new()];
    for word in sentence.split(' ') {
        let last = lines.len() - 1;
        if !lines[last].is_empty() && lines[last].len() + 1 + word.len() > width {
            lines.push(word.to_owned());
        } else {
            if !lines[last].is_empty() {
                lines[last].push(' ');
            }
            lines[last].push_str(word);
        }
    }
    lines
}
