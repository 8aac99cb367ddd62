use super::*;

fn all(edges: &[(usize, usize)]) -> Vec<bool> {
    vec![true; edges.len()]
}

#[test]
fn numbers_components_by_lowest_node_and_ignores_open_edges() {
    let edges = [(0, 1), (2, 3), (1, 2), (4, 4)];
    let (component, count) = components(5, &edges, &[true, true, false, true]);
    assert_eq!(component, vec![0, 0, 1, 1, 2]);
    assert_eq!(count, 3);
}

#[test]
fn finds_the_bridge_between_two_triangles() {
    let edges = [(0, 1), (1, 2), (2, 0), (2, 3), (3, 4), (4, 5), (5, 3)];
    let found = blocks(6, &edges, &all(&edges));
    assert_eq!(found.count, 3);
    assert_eq!(found.is_bridge, vec![false, false, false, true, false, false, false]);
    assert_eq!(found.is_cut_node, vec![false, false, true, true, false, false]);
    assert_ne!(found.block_of_edge[0], found.block_of_edge[4]);
    assert_eq!(found.block_of_edge[4], found.block_of_edge[6]);
}

#[test]
fn parallel_edges_are_no_bridges_until_one_opens() {
    let edges = [(0, 1), (0, 1), (1, 2)];
    let found = blocks(3, &edges, &all(&edges));
    assert_eq!(found.is_bridge, vec![false, false, true]);
    let found = blocks(3, &edges, &[true, false, true]);
    assert_eq!(found.is_bridge, vec![true, false, true]);
    assert_eq!(found.block_of_edge[1], None);
}

#[test]
fn bridges_are_exactly_the_edges_whose_opening_splits() {
    // Deterministic pseudo-random multigraphs, checked against the definition.
    let mut state = 1_u64;
    let mut draw = |below: usize| {
        state = state.wrapping_mul(6364136223846793005).wrapping_add(1);
        (state >> 33) as usize % below
    };
    for _ in 0..200 {
        let nodes = 2 + draw(9);
        let edges: Vec<_> = (0..draw(14)).map(|_| (draw(nodes), draw(nodes))).collect();
        let mut closed: Vec<bool> = edges.iter().map(|_| draw(5) > 0).collect();
        let found = blocks(nodes, &edges, &closed);
        let before = components(nodes, &edges, &closed).1;
        for edge in 0..edges.len() {
            let was = std::mem::replace(&mut closed[edge], false);
            let splits = components(nodes, &edges, &closed).1 > before;
            closed[edge] = was;
            assert_eq!(found.is_bridge[edge], splits, "{edges:?} {closed:?} {edge}");
        }
    }
}

#[test]
fn a_long_path_does_not_overflow_the_stack() {
    let edges: Vec<_> = (0..200_000).map(|node| (node, node + 1)).collect();
    let found = blocks(200_001, &edges, &all(&edges));
    assert_eq!(found.count, 200_000);
    assert!(found.is_bridge.iter().all(|&bridge| bridge));
}

#[test]
fn counts_trees_of_complete_graphs_by_cayleys_formula() {
    for (nodes, trees) in [(1, 1), (2, 1), (5, 125), (8, 262_144)] {
        let edges: Vec<_> = (0..nodes).flat_map(|a| (a + 1..nodes).map(move |b| (a, b))).collect();
        assert_eq!(spanning_tree_count(nodes, &edges, &all(&edges)), TreeCount::Exact(trees));
    }
}

#[test]
fn counts_parallel_edges_apart_and_split_graphs_as_none() {
    let edges = [(0, 1), (0, 1), (1, 2)];
    assert_eq!(spanning_tree_count(3, &edges, &all(&edges)), TreeCount::Exact(2));
    assert_eq!(spanning_tree_count(3, &edges, &[true, true, false]), TreeCount::Exact(0));
}

#[test]
fn gives_the_logarithm_where_the_number_is_too_large() {
    // Cayley: 60^58 trees, far beyond 128 bits.
    let edges: Vec<_> = (0..60).flat_map(|a| (a + 1..60).map(move |b| (a, b))).collect();
    match spanning_tree_count(60, &edges, &all(&edges)) {
        TreeCount::Logarithm(log) => assert!((log - 58.0 * 60_f64.ln()).abs() < 1e-9),
        TreeCount::Exact(count) => panic!("{count} cannot be exact"),
    }
}

#[test]
fn counts_the_trees_of_the_39_bus_network() {
    // 421380 by exact determinant and by a library count (reference set).
    let grid = crate::grid::samples::new_england();
    let edges = crate::grid::line_ends(&grid);
    assert_eq!(spanning_tree_count(39, &edges, &all(&edges)), TreeCount::Exact(421_380));
}
