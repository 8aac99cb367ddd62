//! Published test systems: flows, Kirchhoff's laws, spanning trees, import.
//!
//! Data flow: grid files of `tests/data` -> `case` and `grid` -> figures that
//! other programs made of the archived data (`*.dc.csv`), or identities that
//! hold for any network.

mod choices;
mod flows;
mod import;
mod kirchhoff;
mod outages;
mod trees;

use hedgerow::case::model::Grid;
use hedgerow::grid::dc::{DcNetwork, DcSolution};
use hedgerow_tests::table::{data_grid, data_text, rows_of};

/// Grid file and reference table of every published system.
const SYSTEMS: [(&str, &str); 6] = [
    ("ieee14.grid.toml", "ieee14.dc.csv"),
    ("ieee30.grid.toml", "ieee30.dc.csv"),
    ("ieee39_2areas.grid.toml", "ieee39.dc.csv"),
    ("ieee57.grid.toml", "ieee57.dc.csv"),
    ("ieee118.grid.toml", "ieee118.dc.csv"),
    ("ieee300.grid.toml", "ieee300.dc.csv"),
];

/// A published system with its reference figures.
struct System {
    grid: Grid,
    /// Index of the bus whose angle is zero in the reference.
    slack: usize,
    angle_rad: Vec<f64>,
    injection_mw: Vec<f64>,
    flow_mw: Vec<f64>,
    shift_rad: Vec<f64>,
}

/// Read a system; the table must name the same buses and lines in the same order.
fn system(grid_file: &str, table_file: &str) -> System {
    let grid = data_grid(grid_file);
    let text = data_text(table_file);
    let buses = rows_of(&text, "bus");
    let lines = rows_of(&text, "line");
    let named = |number: f64| format!("B{number}");
    let bus_names: Vec<String> = buses.iter().map(|row| named(row[0])).collect();
    let slack = named(rows_of(&text, "slack")[0][0]);
    assert!(grid.buses.iter().map(|bus| &bus.name).eq(&bus_names), "{grid_file}: other buses");
    assert_eq!(grid.lines.len(), lines.len(), "{grid_file}");
    for (line, row) in grid.lines.iter().zip(&lines) {
        assert_eq!(grid.buses[line.from].name, named(row[0]), "{}", line.name);
        assert_eq!(grid.buses[line.to].name, named(row[1]), "{}", line.name);
    }
    System {
        slack: bus_names.iter().position(|name| *name == slack).unwrap(),
        angle_rad: buses.iter().map(|row| row[1]).collect(),
        injection_mw: buses.iter().map(|row| row[2]).collect(),
        flow_mw: lines.iter().map(|row| row[2]).collect(),
        shift_rad: lines.iter().map(|row| row[3].to_radians()).collect(),
        grid,
    }
}

/// All of them.
fn systems() -> impl Iterator<Item = System> {
    SYSTEMS.iter().map(|(grid, table)| system(grid, table))
}

/// Injections of a grid at its base points.
fn base_injection_mw(grid: &Grid) -> Vec<f64> {
    let mut injection_mw: Vec<f64> = grid.buses.iter().map(|bus| -bus.load_mw).collect();
    for unit in &grid.units {
        injection_mw[unit.bus] += unit.base_mw;
    }
    injection_mw
}

/// Flows with every line in service.
fn solve(grid: &Grid, injection_mw: &[f64]) -> DcSolution {
    let closed = vec![true; grid.lines.len()];
    DcNetwork::new(grid, &closed).unwrap().flows_mw(injection_mw).unwrap()
}
