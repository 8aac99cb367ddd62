//! Import of the IEEE Common Data Format.
//!
//! Contract: bytes of a file in, text of a grid file and the rules that were
//! applied out; the text reads back without a problem or the import fails.
//! Data flow: `read` (fixed columns) -> `convert` (what the model lacks or
//! cannot hold, by stated rules) -> `areas` (each in one piece) -> `flow` (base
//! flows for ratings) -> `write`.
//! Source: IEEE Working Group, "Common Format for Exchange of Solved Load Flow
//! Data", IEEE Trans. PAS-92(6), 1973, columns from memory.

mod areas;
mod convert;
pub(super) mod flow;
mod read;
mod write;

use super::problems::{Problem, Problems};

/// A grid made from a Common Data Format file.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Imported {
    /// Text of the grid file.
    pub text: String,
    /// What was added, changed or left out, one sentence each.
    pub rules: Vec<String>,
}

/// Turn the bytes of a Common Data Format file into a grid file.
///
/// Errors: records that cannot be read, at their lines; a network that cannot be
/// one grid, at the lines of the text made from it.
pub fn import(bytes: &[u8], file_name: &str) -> Result<Imported, Problems> {
    // One character per byte keeps the columns in place whatever the code page was.
    let source: String = bytes.iter().map(|&byte| char::from(byte)).collect();
    let case = read::read(&source).map_err(|list| Problems::of_text(file_name, &source, list))?;
    let network = convert::convert(case).map_err(|sentence| {
        let problem = Problem::new(0..0, sentence).right("this file is no single network");
        Problems::of_text(file_name, &source, vec![problem])
    })?;
    let text = write::write(&network);
    super::parse_grid(&text, &format!("{file_name} (as a grid)"))?;
    Ok(Imported { text, rules: network.rules })
}

#[cfg(test)]
mod tests;
