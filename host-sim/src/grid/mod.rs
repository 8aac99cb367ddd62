//! The network as a graph and as a DC model.
//!
//! Contract: `graph` knows nodes and edges only; `dc` solves flows over the
//! closed lines of a grid, one reference bus per island; `sensitivity` derives
//! transfer and outage factors from it. All of it is exact up to rounding in
//! the lossless DC model (susceptance 1/x, no taps, no shunts), and every solve
//! has its residual checked.
//!
//! Data flow: `Grid` + closed lines -> `DcNetwork` -> flows, `Sensitivity`.

pub mod dc;
pub mod graph;
pub mod sensitivity;

use crate::case::model::Grid;

/// End buses of every line, in the grid's order.
pub fn line_ends(grid: &Grid) -> Vec<(usize, usize)> {
    grid.lines.iter().map(|line| (line.from, line.to)).collect()
}

#[cfg(test)]
pub(crate) mod samples;
