//! DC flows, transfer and outage factors of two textbook networks.

use super::{Machine, Text, USUAL, close};
use hedgerow::case::model::Grid;
use hedgerow::grid::dc::{DcNetwork, DcSolution};
use hedgerow::grid::sensitivity::{Outage, Sensitivity};
use hedgerow_tests::table::{data_grid, data_text, rows_of};

fn sensitivity(grid: &Grid) -> Sensitivity {
    Sensitivity::new(grid, &vec![true; grid.lines.len()]).unwrap()
}

fn base_case(grid: &Grid) -> DcSolution {
    let mut injection_mw: Vec<f64> = grid.buses.iter().map(|bus| -bus.load_mw).collect();
    for unit in &grid.units {
        injection_mw[unit.bus] += unit.base_mw;
    }
    DcNetwork::new(grid, &vec![true; grid.lines.len()]).unwrap().flows_mw(&injection_mw).unwrap()
}

/// Factors of the outage of one line.
fn outage(sensitivity: &Sensitivity, line: usize) -> Vec<f64> {
    match sensitivity.outage(line).unwrap() {
        Outage::Factors(factors) => factors,
        other => panic!("{other:?}"),
    }
}

/// Source: A. Wood, B. Wollenberg, six-bus sample system, DC flows as printed, from memory, recomputed; tolerance 0.06 MW (one decimal printed; line 2-3 is 1.8 or 1.9 in memory).
#[test]
fn flows_of_the_six_bus_system_are_the_printed_ones() {
    let flow_mw = base_case(&data_grid("six_bus.grid.toml")).flow_mw;
    let printed_mw = [25.3, 41.6, 33.1, 1.9, 32.5, 16.2, 24.8, 16.9, 44.9, 4.1, 0.3];
    for (found, printed) in flow_mw.iter().zip(printed_mw) {
        close(*found, printed, 0.06);
    }
    let recomputed_mw = [25.32836, 41.56716, 33.10448, 1.853709, 32.47761, 16.2189];
    for (found, recomputed) in flow_mw.iter().zip(recomputed_mw) {
        close(*found, recomputed, 1e-5);
    }
}

/// Printed shift factors: line by place, of bus 2 and of bus 3.
const PRINTED: [(f64, f64); 11] = [
    (-0.47, -0.40),
    (-0.31, -0.29),
    (-0.21, -0.30),
    (0.05, -0.34),
    (0.31, 0.22),
    (0.10, -0.03),
    (0.06, -0.24),
    (0.06, 0.29),
    (-0.01, 0.37),
    (0.0, -0.08),
    (-0.06, -0.13),
];

/// Source: A. Wood, B. Wollenberg, six-bus generation shift factors of buses 2 and 3, bus 1 slack, from memory; tolerance 0.005 (two decimals printed).
#[test]
fn shift_factors_of_the_six_bus_system_are_the_printed_ones() {
    let sensitivity = sensitivity(&data_grid("six_bus.grid.toml"));
    let (second, third) =
        (sensitivity.ptdf_column(1).unwrap(), sensitivity.ptdf_column(2).unwrap());
    for (line, (of_second, of_third)) in PRINTED.into_iter().enumerate() {
        close(second[line], of_second, 0.005);
        close(third[line], of_third, 0.005);
    }
}

/// Source: six-bus sample system of Wood and Wollenberg, full matrix of shift factors recomputed to six decimals; tolerance 1e-6.
#[test]
fn all_shift_factors_of_the_six_bus_system_equal_the_recomputed_ones() {
    let sensitivity = sensitivity(&data_grid("six_bus.grid.toml"));
    let table = rows_of(&data_text("six_bus.factors.csv"), "transfer");
    assert_eq!(table.len(), 11);
    for bus in 0..6 {
        for (found, row) in sensitivity.ptdf_column(bus).unwrap().iter().zip(&table) {
            close(*found, row[bus], 1e-6);
        }
    }
}

/// Source: A. Wood, B. Wollenberg, six-bus line outage factors (four entries), values from memory, places settled by recomputation; tolerance 0.005 (two decimals printed).
#[test]
fn outage_factors_of_the_six_bus_system_are_the_printed_ones() {
    let sensitivity = sensitivity(&data_grid("six_bus.grid.toml"));
    let (without_1_2, without_1_4) = (outage(&sensitivity, 0), outage(&sensitivity, 1));
    close(without_1_2[1], 0.59, 0.005);
    close(without_1_2[2], 0.41, 0.006);
    close(without_1_4[0], 0.64, 0.005);
    close(without_1_4[2], 0.36, 0.005);
}

/// Source: six-bus sample system of Wood and Wollenberg, full matrix of outage factors recomputed to six decimals; tolerance 1e-6.
#[test]
fn all_outage_factors_of_the_six_bus_system_equal_the_recomputed_ones() {
    let sensitivity = sensitivity(&data_grid("six_bus.grid.toml"));
    let table = rows_of(&data_text("six_bus.factors.csv"), "outage");
    assert_eq!(table.len(), 11);
    for out in 0..11 {
        for (found, row) in outage(&sensitivity, out).iter().zip(&table) {
            close(*found, row[out], 1e-6);
        }
    }
}

/// Source: Glover, Sarma, Overbye, 5th ed., example 6.17 (five-bus DC flow), from memory, recomputed; tolerance 5e-5 rad on -0.3263, 0.0091, -0.0349, -0.0720 rad.
#[test]
fn angles_of_the_five_bus_system_are_the_printed_ones() {
    let unit = |base_mw: f64| Machine { base_mw, ..USUAL };
    let grid = Text::new(1)
        .bus("B1", 1, 0.0, 0.0)
        .bus("B2", 1, 800.0, 0.0)
        .bus("B3", 1, 80.0, 0.0)
        .bus("B4", 1, 0.0, 0.0)
        .bus("B5", 1, 0.0, 0.0)
        .line("B1", "B5", 1.0 / 50.0)
        .line("B2", "B4", 1.0 / 10.0)
        .line("B2", "B5", 1.0 / 20.0)
        .line("B3", "B4", 1.0 / 100.0)
        .line("B4", "B5", 1.0 / 40.0)
        .unit("G1", "B1", unit(360.0))
        .unit("G3", "B3", unit(520.0))
        .grid();
    let angle_rad = base_case(&grid).angle_rad;
    let printed_rad = [0.0, -0.3263, 0.0091, -0.0349, -0.0720];
    for (found, printed) in angle_rad.iter().zip(printed_rad) {
        close(*found, printed, 5e-5);
    }
}
