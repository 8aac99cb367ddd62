//! Dividing a grid: the choice of ties against brute force, and what a tree promises.
//!
//! Data flow: published systems of `tests/data` and made-up grids -> `divide` ->
//! every subset of ties solved from scratch, every outage solved from scratch.

mod choices;
mod pockets;
mod speed;

use hedgerow::case::model::Grid;
use hedgerow::case::parse_grid;
use hedgerow::case::synthetic::synthetic;
use hedgerow::divide::base::{BaseCase, with_areas};
use hedgerow::divide::propose::{Weight, propose};
use hedgerow_tests::table::data_grid;

/// Give every line 1.5 times the larger of its base flow and 5 % of the largest.
fn rate_by_base_flow(grid: &mut Grid) {
    let base_mw = BaseCase::of_file(grid).unwrap().flow_mw;
    let largest_mw = base_mw.iter().fold(0.0_f64, |most, flow| most.max(flow.abs()));
    for (line, flow_mw) in grid.lines.iter_mut().zip(base_mw) {
        line.rating_mw = 1.5 * flow_mw.abs().max(0.05 * largest_mw);
    }
}

/// The 39-bus system in its published split.
fn split_39(parts: usize) -> Grid {
    let mut grid = data_grid(&format!("ieee39_{parts}areas.grid.toml"));
    rate_by_base_flow(&mut grid);
    grid
}

/// A published system with proposed areas.
fn proposed(file: &str, parts: usize, weight: Weight) -> Grid {
    let mut grid = data_grid(file);
    rate_by_base_flow(&mut grid);
    let base = BaseCase::of_file(&grid).unwrap();
    let made = propose(&grid, &base, parts, weight).unwrap();
    with_areas(&grid, &made.area_of_bus, parts)
}

/// 39, 57 and 118 buses in 2, 3 and 4 areas: the published split of 39, and proposals of all.
fn published() -> Vec<(String, Grid)> {
    let mut list = Vec::new();
    for parts in [2, 3, 4] {
        list.push((format!("39 split in {parts}"), split_39(parts)));
        for file in ["ieee39_2areas.grid.toml", "ieee57.grid.toml", "ieee118.grid.toml"] {
            for weight in [Weight::Flow, Weight::Susceptance] {
                list.push((format!("{file} {parts} {weight:?}"), proposed(file, parts, weight)));
            }
        }
    }
    list
}

/// A made-up grid of 3 to 6 areas; its size follows from the seed.
fn made_up(seed: u64) -> Grid {
    made_up_of(3 + seed as usize % 4, seed)
}

/// A made-up grid of areas of 8 to 18 buses, by the seed.
fn made_up_of(areas: usize, seed: u64) -> Grid {
    let text = synthetic(areas * (8 + seed as usize % 11), areas, seed).unwrap();
    parse_grid(&text, "made-up").unwrap_or_else(|problems| panic!("{problems}"))
}
