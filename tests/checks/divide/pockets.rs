//! What a tree of areas promises: outages stay where they are.

use super::{made_up, published};
use hedgerow::case::builtin_grid;
use hedgerow::case::model::Grid;
use hedgerow::divide::base::BaseCase;
use hedgerow::divide::outages::change_outside_mw;
use hedgerow::divide::{Settings, divide};
use hedgerow::grid::dc::DcNetwork;
use hedgerow::grid::graph::blocks;
use hedgerow::grid::line_ends;

/// Largest flow change outside in pu over all outages inside that do not split the grid.
fn largest_outside_pu(name: &str, grid: &Grid) -> (usize, f64) {
    let division = divide(grid, &Settings::default(), &mut |_| true).unwrap();
    let grid = &division.grid;
    assert_eq!(division.outages.leaks, 0, "{name}");
    let tie = |line: usize| {
        grid.buses[grid.lines[line].from].area != grid.buses[grid.lines[line].to].area
    };
    let bridge = blocks(grid.buses.len(), &line_ends(grid), &division.after.closed).is_bridge;
    let closed_ties = (0..grid.lines.len()).filter(|&l| division.after.closed[l] && tie(l));
    assert_eq!(closed_ties.clone().count(), grid.areas.len() - 1, "{name}");
    assert!(closed_ties.into_iter().all(|line| bridge[line]), "{name}");
    let mut largest = 0.0_f64;
    let mut count = 0;
    for (line, _) in bridge.iter().enumerate().filter(|(_, is_bridge)| !**is_bridge) {
        if division.after.closed[line] {
            let change_mw = change_outside_mw(grid, &division.after, line).unwrap();
            largest = largest.max(change_mw / grid.base_mva);
            count += 1;
        }
    }
    assert!(largest < 1e-9, "{name}: {largest} pu");
    // The table before agrees with a solution from scratch as well.
    for row in division.outages.rows.iter().take(10) {
        let Some(effect) = row.before else { continue };
        let again_mw = change_outside_mw(grid, &division.before, row.line).unwrap();
        assert!((effect.outside_mw - again_mw).abs() < 1e-6 * (1.0 + again_mw), "{name}");
    }
    (count, largest)
}

/// Worst loading of some lines when one of them goes out, solved from scratch.
fn worst_after(grid: &Grid, base: &BaseCase, out: usize, among: &dyn Fn(usize) -> bool) -> f64 {
    let mut closed = base.closed.clone();
    closed[out] = false;
    let network = DcNetwork::new(grid, &closed).unwrap();
    let flow_mw = network.flows_mw(&base.injection_mw).unwrap().flow_mw;
    let lines = (0..grid.lines.len()).filter(|&line| among(line));
    lines.map(|line| flow_mw[line].abs() / grid.lines[line].rating_mw).fold(0.0, f64::max)
}

/// Source: outage factors against each outage solved from scratch on the 39-, 57- and 118-bus systems, divided and not; tolerance 1e-8 of the loading.
#[test]
fn loadings_after_each_outage_are_those_of_a_fresh_solution() {
    for (name, grid) in published() {
        let division = divide(&grid, &Settings::default(), &mut |_| true).unwrap();
        for row in &division.outages.rows {
            let inside = |line: usize| {
                let data = &grid.lines[line];
                [data.from, data.to].iter().all(|&bus| grid.buses[bus].area == row.area)
            };
            if let Some(before) = row.before {
                let again = worst_after(&grid, &division.before, row.line, &|_| true);
                assert!((before.worst_loading - again).abs() < 1e-8 * again, "{name}");
            }
            if let Some(after) = row.after {
                let again = worst_after(&grid, &division.after, row.line, &inside);
                assert!((after.worst_loading - again).abs() < 1e-8 * again, "{name}");
            }
        }
    }
}

/// Source: locality of outages across bridges, each outage solved from scratch on the 39-, 57- and 118-bus systems, the example and made-up grids; tolerance 1e-9 pu.
#[test]
fn outages_inside_a_pocket_leave_the_flows_outside_alone() {
    let mut grids = published();
    grids.push(("example".to_owned(), builtin_grid()));
    for seed in 0..40 {
        grids.push((format!("made-up {seed}"), made_up(seed)));
    }
    let (mut outages, mut largest) = (0, 0.0_f64);
    for (name, grid) in &grids {
        let (count, change_pu) = largest_outside_pu(name, grid);
        outages += count;
        largest = largest.max(change_pu);
    }
    println!("{} grids, {outages} outages: largest change outside {largest:.1e} pu", grids.len());
    assert!(outages > 500);
}
