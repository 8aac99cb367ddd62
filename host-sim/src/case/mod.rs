//! Grid and play files: read with places, checked whole, built-in example, import.
//!
//! Contract: what comes out of `read_grid`, `read_play`, `parse_grid` and
//! `parse_play` has passed every check; what is wrong comes out as [`Problems`],
//! all of them at once, each with its place in the file.
//! Data flow: text -> `fields` (typed look-ups with spans) -> `grid_file` /
//! `play_file` (model plus marks of where each value stood) -> `validate` /
//! `timeline` (checks across entries) -> [`model`].

mod bounds;
pub mod builtin;
pub mod capacity;
pub mod cdf;

pub mod defaults;
mod fields;
mod grid_file;
mod marks;
pub mod model;
pub(crate) mod nearest;
pub mod network;
mod play_file;
pub mod problems;
pub mod starter;
pub mod synthetic;
mod tables;
mod timeline;
mod validate;

use std::path::Path;

pub use builtin::{builtin_grid, builtin_play, builtin_plays};
pub use capacity::fits_largest_steward;
pub use grid_file::parse_grid;
pub use play_file::{parse_play, read_play};
pub use problems::{Problem, Problems};

use model::Grid;

/// Read and check a grid file.
///
/// Errors: everything that is wrong with the file, or that it cannot be read.
pub fn read_grid(path: &Path) -> Result<Grid, Problems> {
    let text = read_text(path)?;
    parse_grid(&text, &path.display().to_string())
}

/// Read a file as UTF-8, or say why not.
fn read_text(path: &Path) -> Result<String, Problems> {
    let file = path.display().to_string();
    let bytes = std::fs::read(path).map_err(|err| {
        Problems::without_text(&file, Problem::new(0..0, format!("cannot read {file}: {err}")))
    })?;
    String::from_utf8(bytes).map_err(|err| {
        let at = err.utf8_error().valid_up_to();
        let problem = Problem::new(0..0, format!("{file} is no UTF-8 text (byte {at})"))
            .right("save the file as UTF-8");
        Problems::without_text(&file, problem)
    })
}

#[cfg(test)]
mod tests;
