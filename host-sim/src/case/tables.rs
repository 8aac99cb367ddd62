//! From text to tables: syntax, `format = 1`, and tables nobody knows.
//!
//! Contract: after a syntax error nothing else is reported, since what follows
//! it may have been misread; anything else lets the reading go on.

use std::ops::Range;

use toml::Spanned;
use toml::de::{DeTable, DeValue};

use super::fields::type_name;
use super::nearest::suggestion;
use super::problems::Problem;

/// Parse a text, check `format = 1` and the names of its tables.
pub(crate) fn read_root<'i>(
    text: &'i str,
    tables: &[&str],
    log: &mut Vec<Problem>,
) -> Option<DeTable<'i>> {
    let (root, errors) = DeTable::parse_recoverable(text);
    if !errors.is_empty() {
        log.extend(errors.iter().map(|err| {
            Problem::new(err.span().unwrap_or(0..0), err.message().trim())
                .found("cannot be read as TOML")
        }));
        return None;
    }
    let root = root.into_inner();
    check_format(&root, text, log);
    for key in root.keys() {
        let name = key.get_ref().as_ref();
        if name != "format" && !tables.contains(&name) {
            let problem = Problem::new(key.span(), format!("unknown table or key `{name}`"))
                .found("nothing of this name belongs here")
                .right(suggestion(name, "a table", tables));
            log.push(problem);
        }
    }
    Some(root)
}

/// `format = 1` must stand first.
fn check_format(root: &DeTable<'_>, text: &str, log: &mut Vec<Problem>) {
    const RIGHT: &str = "this version reads `format = 1`, written before the first table";
    let Some(value) = root.get("format") else {
        let first_line = 0..text.lines().next().map_or(0, str::len);
        log.push(Problem::new(first_line, "`format` is missing").right(RIGHT));
        return;
    };
    let first = root.iter().map(|(key, _)| key.span().start).min();
    let key_at =
        root.keys().find(|key| key.get_ref() == "format").map(Spanned::span).unwrap_or_default();
    match value.get_ref() {
        DeValue::Integer(digits) if digits.as_str() == "1" => {
            if first != Some(key_at.start) {
                log.push(Problem::new(key_at, "`format` must come first").right(RIGHT));
            }
        }
        DeValue::Integer(digits) => {
            let found = format!("this file is of format {digits}");
            log.push(Problem::new(value.span(), "unknown format").found(found).right(RIGHT));
        }
        other => {
            let found = format!("this is {}", type_name(other));
            log.push(
                Problem::new(value.span(), "`format` must be a number").found(found).right(RIGHT),
            );
        }
    }
}

/// A table such as `[run]`; an empty one stands in where it is absent.
pub(crate) fn read_table<'a, 'i>(
    root: &'a DeTable<'i>,
    name: &str,
    log: &mut Vec<Problem>,
) -> Option<(&'a DeTable<'i>, Range<usize>)> {
    let value = root.get(name)?;
    match value.get_ref() {
        DeValue::Table(table) => Some((table, value.span())),
        other => {
            let problem = Problem::new(value.span(), format!("`{name}` must be a table"))
                .found(format!("this is {}", type_name(other)))
                .right(format!("write `[{name}]` on a line of its own"));
            log.push(problem);
            None
        }
    }
}

/// The entries of a list of tables such as `[[bus]]`.
pub(crate) fn read_list<'a, 'i>(
    root: &'a DeTable<'i>,
    name: &str,
    log: &mut Vec<Problem>,
) -> Vec<(&'a DeTable<'i>, Range<usize>)> {
    let Some(value) = root.get(name) else {
        return Vec::new();
    };
    let mut wrong = |span: Range<usize>, other: &DeValue<'_>| {
        let problem = Problem::new(span, format!("`{name}` must be a list of tables"))
            .found(format!("this is {}", type_name(other)))
            .right(format!("write `[[{name}]]` above each entry"));
        log.push(problem);
    };
    let DeValue::Array(items) = value.get_ref() else {
        wrong(value.span(), value.get_ref());
        return Vec::new();
    };
    let mut entries = Vec::with_capacity(items.len());
    for item in items.iter() {
        match item.get_ref() {
            DeValue::Table(table) => entries.push((table, item.span())),
            other => wrong(item.span(), other),
        }
    }
    entries
}
