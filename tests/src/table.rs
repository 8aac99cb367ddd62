//! Small tables of numbers in `tests/data`, and where that folder is.
//!
//! Contract: a table is lines of comma-separated cells; `#` starts a comment
//! line. What is missing or no number is a broken test, hence a panic.

use hedgerow::case::model::Grid;
use std::path::PathBuf;

/// Path of a file in `tests/data`.
pub fn data_path(name: &str) -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("data").join(name)
}

/// Text of a file in `tests/data`.
pub fn data_text(name: &str) -> String {
    let path = data_path(name);
    std::fs::read_to_string(&path).unwrap_or_else(|err| panic!("{}: {err}", path.display()))
}

/// Grid of a file in `tests/data`.
pub fn data_grid(name: &str) -> Grid {
    hedgerow::case::read_grid(&data_path(name)).unwrap_or_else(|problems| panic!("{problems}"))
}

/// Rows of a table without its comments; the first cell may be a word.
pub fn rows(text: &str) -> Vec<Vec<&str>> {
    text.lines()
        .filter(|line| !line.starts_with('#') && !line.is_empty())
        .map(|line| line.split(',').collect())
        .collect()
}

/// The numbers behind a row's first word.
pub fn numbers(row: &[&str]) -> Vec<f64> {
    let number = |cell: &&str| cell.parse().unwrap_or_else(|_| panic!("no number: {cell}"));
    row[1..].iter().map(number).collect()
}

/// The numbers of every row that begins with a word.
pub fn rows_of(text: &str, word: &str) -> Vec<Vec<f64>> {
    rows(text).iter().filter(|row| row[0] == word).map(|row| numbers(row)).collect()
}
