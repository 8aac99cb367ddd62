//! Kirchhoff's laws on every published system.

use super::{base_injection_mw, solve, systems};
use hedgerow::case::model::Grid;

/// Source: Kirchhoff's first law (1845) on the six published systems; tolerance 1e-6 MW at every bus.
#[test]
fn what_flows_into_a_bus_flows_out_of_it() {
    for system in systems() {
        let grid = &system.grid;
        let injection_mw = base_injection_mw(grid);
        let solved = solve(grid, &injection_mw);
        let mut left_mw = injection_mw;
        for (line, flow_mw) in grid.lines.iter().zip(&solved.flow_mw) {
            left_mw[line.from] -= flow_mw;
            left_mw[line.to] += flow_mw;
        }
        for (bus, mw) in grid.buses.iter().zip(&left_mw) {
            assert!(mw.abs() < 1e-6, "{} {}: {mw:e}", grid.name, bus.name);
        }
    }
}

/// Line towards the root and parent of every bus, of a tree grown from bus 0.
fn grow_tree(grid: &Grid) -> (Vec<Option<(usize, usize)>>, Vec<bool>) {
    let mut parent = vec![None; grid.buses.len()];
    let mut reached = vec![false; grid.buses.len()];
    let mut in_tree = vec![false; grid.lines.len()];
    reached[0] = true;
    // Each pass reaches at least one more bus of a connected grid.
    for _ in 0..grid.buses.len() {
        for (index, line) in grid.lines.iter().enumerate() {
            for (near, far) in [(line.from, line.to), (line.to, line.from)] {
                if reached[near] && !reached[far] {
                    reached[far] = true;
                    parent[far] = Some((index, near));
                    in_tree[index] = true;
                }
            }
        }
    }
    assert!(reached.iter().all(|&reached| reached));
    (parent, in_tree)
}

/// Sum of reactance times flow from a bus to the root.
fn drop_to_root_pu(
    grid: &Grid,
    flow_mw: &[f64],
    parent: &[Option<(usize, usize)>],
    mut bus: usize,
) -> f64 {
    let mut sum = 0.0;
    while let Some((index, next)) = parent[bus] {
        let line = &grid.lines[index];
        let sign = if line.from == bus { 1.0 } else { -1.0 };
        sum += sign * line.reactance_pu * flow_mw[index] / grid.base_mva;
        bus = next;
    }
    sum
}

/// Source: Kirchhoff's second law (1845) around every loop of a tree's complement, six published systems; tolerance 1e-9 pu.
#[test]
fn angles_add_up_to_nothing_around_every_loop() {
    let mut loops = 0;
    for system in systems() {
        let grid = &system.grid;
        let flow_mw = solve(grid, &base_injection_mw(grid)).flow_mw;
        let (parent, in_tree) = grow_tree(grid);
        for (index, line) in grid.lines.iter().enumerate().filter(|(index, _)| !in_tree[*index]) {
            let across = line.reactance_pu * flow_mw[index] / grid.base_mva;
            let back = drop_to_root_pu(grid, &flow_mw, &parent, line.to)
                - drop_to_root_pu(grid, &flow_mw, &parent, line.from);
            assert!((across + back).abs() < 1e-9, "{} {}", grid.name, line.name);
            loops += 1;
        }
    }
    // Lines less buses plus one, of each: 7 + 12 + 8 + 24 + 69 + 112.
    assert_eq!(loops, 232);
}
