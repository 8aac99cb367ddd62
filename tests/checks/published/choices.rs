//! Which ties of the split 39-bus system may stay open: every choice that joins
//! the parts in a tree, with the worst loading it leaves.

use super::{base_injection_mw, solve, system};
use hedgerow::case::model::Grid;
use hedgerow::grid::dc::DcNetwork;
use hedgerow::grid::graph::components;

/// Worst loading of a choice of lines in service.
fn worst_loading(grid: &Grid, closed: &[bool], rating_mw: &[f64]) -> f64 {
    let flow_mw =
        DcNetwork::new(grid, closed).unwrap().flows_mw(&base_injection_mw(grid)).unwrap().flow_mw;
    flow_mw.iter().zip(rating_mw).map(|(flow, rating)| flow.abs() / rating).fold(0.0, f64::max)
}

/// Loadings of every choice of ties that is a tree, least first.
fn loadings(parts: usize) -> Vec<f64> {
    let grid = system(&format!("ieee39_{parts}areas.grid.toml"), "ieee39.dc.csv").grid;
    let base_mw = solve(&grid, &base_injection_mw(&grid)).flow_mw;
    let largest_mw = base_mw.iter().fold(0.0_f64, |most, flow| most.max(flow.abs()));
    let rating_mw: Vec<f64> =
        base_mw.iter().map(|flow| 1.5 * flow.abs().max(0.05 * largest_mw)).collect();
    let area = |bus: usize| grid.buses[bus].area;
    let ties: Vec<usize> = (0..grid.lines.len())
        .filter(|&line| area(grid.lines[line].from) != area(grid.lines[line].to))
        .collect();
    let ends: Vec<_> =
        ties.iter().map(|&tie| (area(grid.lines[tie].from), area(grid.lines[tie].to))).collect();
    let mut found = Vec::new();
    for choice in 0_u32..1 << ties.len() {
        let kept: Vec<bool> = (0..ties.len()).map(|tie| choice >> tie & 1 == 1).collect();
        let is_tree =
            choice.count_ones() as usize == parts - 1 && components(parts, &ends, &kept).1 == 1;
        if is_tree {
            let mut closed = vec![true; grid.lines.len()];
            for (&tie, &keep) in ties.iter().zip(&kept) {
                closed[tie] = keep;
            }
            found.push(worst_loading(&grid, &closed, &rating_mw));
        }
    }
    found.sort_by(f64::total_cmp);
    found
}

/// Source: 39-bus system (Athay, Podmore, Virmani 1979), every tree of ties recomputed by two methods, ratings 1.5 max(base flow, 5 % of the largest); tolerance 1e-9.
#[test]
fn least_worst_loading_over_all_trees_of_ties_is_the_enumerated_one() {
    for (parts, choices, attained) in [(2, 3, 1), (3, 5, 1), (4, 10, 2)] {
        let found = loadings(parts);
        assert_eq!(found.len(), choices);
        for (rank, loading) in found.iter().enumerate().take(attained + 1) {
            let expected = if rank < attained { 1.670_682_730_9 } else { 2.335_742_971_9 };
            assert!((loading - expected).abs() < 1e-9, "{parts} parts: {loading}");
        }
    }
}
