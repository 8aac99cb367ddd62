//! Spanning trees of the published systems and of their area graphs.

use super::system;
use hedgerow::grid::graph::{TreeCount, spanning_tree_count};
use hedgerow::grid::line_ends;

/// Count the trees of a published system over all its lines.
fn trees(grid_file: &str, table_file: &str) -> TreeCount {
    let grid = system(grid_file, table_file).grid;
    spanning_tree_count(grid.buses.len(), &line_ends(&grid), &vec![true; grid.lines.len()])
}

/// Source: 14-bus system, 3909 spanning trees, from memory, recomputed exactly (matrix-tree theorem, Kirchhoff 1847); tolerance none.
#[test]
fn tree_count_of_the_14_bus_system_is_the_known_one() {
    assert_eq!(trees("ieee14.grid.toml", "ieee14.dc.csv"), TreeCount::Exact(3909));
}

/// Source: matrix-tree theorem (Kirchhoff 1847) in exact integers on the 30-, 39- and 57-bus systems, recomputed; tolerance none.
#[test]
fn tree_counts_of_the_30_39_and_57_bus_systems_are_exact() {
    assert_eq!(trees("ieee30.grid.toml", "ieee30.dc.csv"), TreeCount::Exact(7_824_000));
    assert_eq!(trees("ieee39_2areas.grid.toml", "ieee39.dc.csv"), TreeCount::Exact(421_380));
    assert_eq!(trees("ieee57.grid.toml", "ieee57.dc.csv"), TreeCount::Exact(219_294_086_084_880));
}

/// Natural logarithm of a count, whichever way it was found.
fn log(count: TreeCount) -> f64 {
    match count {
        TreeCount::Exact(number) => (number as f64).ln(),
        TreeCount::Logarithm(log) => log,
    }
}

/// Source: matrix-tree theorem in exact integers on the 118- and 300-bus systems (2.159e35 and 2.366e64 trees), recomputed; tolerance 1e-9 in the logarithm.
#[test]
fn tree_counts_of_the_118_and_300_bus_systems_agree_in_the_logarithm() {
    let ln_118 = 215_911_553_039_283_453_509_914_348_878_743_040_f64.ln();
    let ln_300 =
        23_656_654_445_153_767_988_521_215_344_774_649_805_273_493_534_886_501_487_047_475_200_f64
            .ln();
    assert!((log(trees("ieee118.grid.toml", "ieee118.dc.csv")) - ln_118).abs() < 1e-9);
    assert!((log(trees("ieee300.grid.toml", "ieee300.dc.csv")) - ln_300).abs() < 1e-9);
}

/// Source: area graphs of the 39-bus system in 2, 3 and 4 parts: 3, 5 and 10 choices of ties, enumerated; tolerance none.
#[test]
fn area_graphs_of_the_39_bus_system_have_as_many_trees_as_enumerated() {
    for (parts, choices) in [(2, 3), (3, 5), (4, 10)] {
        let grid = system(&format!("ieee39_{parts}areas.grid.toml"), "ieee39.dc.csv").grid;
        let area = |bus: usize| grid.buses[bus].area;
        let ends = grid.lines.iter().map(|line| (area(line.from), area(line.to)));
        let ties: Vec<(usize, usize)> = ends.filter(|(from, to)| from != to).collect();
        let count = spanning_tree_count(parts, &ties, &vec![true; ties.len()]);
        assert_eq!(count, TreeCount::Exact(choices), "{parts} parts");
    }
}

/// All pairs of `count` nodes.
fn complete(count: usize) -> Vec<(usize, usize)> {
    (0..count).flat_map(|a| (a + 1..count).map(move |b| (a, b))).collect()
}

/// Source: A. Cayley, "A theorem on trees", 1889 (n^(n-2)); Fiedler and Sedlacek 1958 for complete bipartite graphs (m^(n-1) n^(m-1)); tolerance none.
#[test]
fn tree_counts_of_complete_graphs_follow_cayley() {
    for nodes in 2..=12_usize {
        let edges = complete(nodes);
        let count = spanning_tree_count(nodes, &edges, &vec![true; edges.len()]);
        assert_eq!(count, TreeCount::Exact((nodes as u128).pow(nodes as u32 - 2)));
    }
    for (m, n) in [(2_usize, 3_usize), (3, 3), (4, 5)] {
        let edges: Vec<_> = (0..m).flat_map(|a| (0..n).map(move |b| (a, m + b))).collect();
        let count = spanning_tree_count(m + n, &edges, &vec![true; edges.len()]);
        let known = (m as u128).pow(n as u32 - 1) * (n as u128).pow(m as u32 - 1);
        assert_eq!(count, TreeCount::Exact(known));
    }
}

/// Edges of a square grid of `side` by `side` nodes.
fn square(side: usize) -> Vec<(usize, usize)> {
    let mut edges = Vec::new();
    for row in 0..side {
        for column in 0..side {
            let node = row * side + column;
            if column + 1 < side {
                edges.push((node, node + 1));
            }
            if row + 1 < side {
                edges.push((node, node + side));
            }
        }
    }
    edges
}

/// Source: standard counts: Petersen graph 2000, 3-cube 384, grids 192 and 100352, wheel of five 121, from memory, recomputed; tolerance none.
#[test]
fn tree_counts_of_well_known_graphs_are_the_printed_ones() {
    let petersen: Vec<_> =
        (0..5).flat_map(|k| [(k, (k + 1) % 5), (k, k + 5), (k + 5, (k + 2) % 5 + 5)]).collect();
    let cube: Vec<_> = (0..8_usize)
        .flat_map(|a| [1, 2, 4].map(|bit| (a, a ^ bit)))
        .filter(|(a, b)| a < b)
        .collect();
    let wheel: Vec<_> = (0..5).flat_map(|k| [(k, (k + 1) % 5), (k, 5)]).collect();
    let known = [
        (10, petersen, 2000),
        (8, cube, 384),
        (9, square(3), 192),
        (16, square(4), 100_352),
        (6, wheel, 121),
        (2, vec![(0, 1); 5], 5),
        (3, vec![(0, 1)], 0),
    ];
    for (nodes, edges, count) in known {
        let found = spanning_tree_count(nodes, &edges, &vec![true; edges.len()]);
        assert_eq!(found, TreeCount::Exact(count));
    }
}
