use super::*;
use crate::grid::samples::{add_bus, add_line, empty, new_england};

fn injections(grid: &Grid) -> Vec<f64> {
    let mut injection: Vec<f64> = grid.buses.iter().map(|bus| -bus.load_mw).collect();
    for unit in &grid.units {
        injection[unit.bus] += unit.base_mw;
    }
    injection
}

fn closed(grid: &Grid) -> Vec<bool> {
    grid.lines.iter().map(|line| line.closed).collect()
}

#[test]
fn splits_a_triangle_by_reactance() {
    let mut grid = empty(50.0);
    for _ in 0..3 {
        add_bus(&mut grid, 0.0);
    }
    add_line(&mut grid, 0, 1, 0.1);
    add_line(&mut grid, 1, 2, 0.1);
    add_line(&mut grid, 0, 2, 0.1);
    let network = DcNetwork::new(&grid, &[true; 3]).unwrap();
    let solution = network.flows_mw(&[90.0, 0.0, -90.0]).unwrap();
    for (flow, expected) in solution.flow_mw.iter().zip([30.0, 30.0, 60.0]) {
        assert!((flow - expected).abs() < 1e-12);
    }
    assert!((solution.angle_rad[2] + 0.06).abs() < 1e-15);
}

#[test]
fn meets_the_39_bus_flows_of_the_reference_set() {
    // Reference set: DC flows, susceptance 1/x, taps ignored.
    let grid = new_england();
    let solution =
        DcNetwork::new(&grid, &closed(&grid)).unwrap().flows_mw(&injections(&grid)).unwrap();
    let expected = [
        (0, -129.07499714),
        (2, 377.1416863),
        (5, 109.65032283),
        (23, -10.67468003),
        (33, -508.0),
        (45, -830.0),
    ];
    for (line, flow_mw) in expected {
        assert!((solution.flow_mw[line] - flow_mw).abs() < 1e-6, "{line}");
    }
}

#[test]
fn solves_each_island_for_itself_and_names_the_unbalanced_one() {
    let mut grid = empty(50.0);
    for _ in 0..4 {
        add_bus(&mut grid, 0.0);
    }
    add_line(&mut grid, 0, 1, 0.1);
    add_line(&mut grid, 1, 2, 0.1);
    add_line(&mut grid, 2, 3, 0.2);
    let network = DcNetwork::new(&grid, &[true, false, true]).unwrap();
    let solution = network.flows_mw(&[5.0, -5.0, -7.0, 7.0]).unwrap();
    assert_eq!(solution.island, vec![0, 0, 1, 1]);
    assert_eq!(solution.flow_mw[1], 0.0);
    assert!((solution.flow_mw[2] + 7.0).abs() < 1e-12);
    match network.flows_mw(&[5.0, -5.0, 1.0, 0.5]) {
        Err(DcError::Imbalance { bus, imbalance_mw }) => {
            assert_eq!(bus, "B3");
            assert!((imbalance_mw - 1.5).abs() < 1e-12);
        }
        other => panic!("{other:?}"),
    }
}

#[test]
fn takes_a_negative_reactance_where_the_matrix_is_not_definite() {
    let mut grid = empty(50.0);
    for _ in 0..3 {
        add_bus(&mut grid, 0.0);
    }
    add_line(&mut grid, 0, 1, 0.2);
    add_line(&mut grid, 1, 2, -0.05);
    add_line(&mut grid, 0, 2, 0.1);
    let solution =
        DcNetwork::new(&grid, &[true; 3]).unwrap().flows_mw(&[100.0, 0.0, -100.0]).unwrap();
    // Path 1-2-3 has 0.15 pu against 0.1 pu: it takes 40 of 100 MW.
    assert!((solution.flow_mw[0] - 40.0).abs() < 1e-10);
    assert!((solution.flow_mw[1] - 40.0).abs() < 1e-10);
    assert!((solution.flow_mw[2] - 60.0).abs() < 1e-10);
}

#[test]
fn refuses_reactances_that_cancel() {
    let mut grid = empty(50.0);
    add_bus(&mut grid, 0.0);
    add_bus(&mut grid, 0.0);
    add_line(&mut grid, 0, 1, 0.1);
    add_line(&mut grid, 0, 1, -0.1);
    let answer = DcNetwork::new(&grid, &[true; 2]).and_then(|n| n.flows_mw(&[1.0, -1.0]));
    assert_eq!(answer, Err(DcError::Singular));
}

#[test]
fn refuses_zero_reactance_with_the_name_of_the_line() {
    let mut grid = empty(50.0);
    add_bus(&mut grid, 0.0);
    add_bus(&mut grid, 0.0);
    add_line(&mut grid, 0, 1, 0.0);
    let said = DcNetwork::new(&grid, &[true]).err().unwrap().to_string();
    assert!(said.contains("line L1"), "{said}");
}

#[test]
fn refuses_a_list_of_the_wrong_length() {
    let mut grid = empty(50.0);
    add_bus(&mut grid, 0.0);
    let network = DcNetwork::new(&grid, &[]).unwrap();
    assert_eq!(network.flows_mw(&[0.0]).unwrap().angle_rad, vec![0.0]);
    assert!(matches!(network.flows_mw(&[]), Err(DcError::Length { expected: 1, .. })));
}
