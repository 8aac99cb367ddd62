//! Components, blocks, bridges and spanning trees of a multigraph.
//!
//! Contract: nodes are `0..node_count`, edges are pairs of node indices and are
//! identified by position, so parallel edges are distinct (and never bridges);
//! `closed[e]` says whether edge `e` is there. Loops (`a == b`) belong to no
//! block and to no tree. Everything is iterative and linear in nodes and edges,
//! the tree count apart.

/// Component of every node over the closed edges, numbered from 0 by lowest node.
///
/// Shapes: one entry per node; `closed` one per edge.
pub fn components(
    node_count: usize,
    edges: &[(usize, usize)],
    closed: &[bool],
) -> (Vec<usize>, usize) {
    let adjacency = Adjacency::new(node_count, edges, closed);
    let mut component = vec![usize::MAX; node_count];
    let mut count = 0;
    let mut stack = Vec::new();
    for start in 0..node_count {
        if component[start] != usize::MAX {
            continue;
        }
        component[start] = count;
        stack.push(start);
        // Bounded: every node is pushed once, when it gets its number.
        while let Some(node) = stack.pop() {
            for &(_, other) in adjacency.of(node) {
                if component[other] == usize::MAX {
                    component[other] = count;
                    stack.push(other);
                }
            }
        }
        count += 1;
    }
    (component, count)
}

/// Closed edges around every node, as one flat list.
struct Adjacency {
    start: Vec<usize>,
    /// (edge, node at its other end)
    list: Vec<(usize, usize)>,
}

impl Adjacency {
    fn new(node_count: usize, edges: &[(usize, usize)], closed: &[bool]) -> Self {
        let used = || edges.iter().enumerate().filter(|&(edge, &(a, b))| closed[edge] && a != b);
        let mut start = vec![0; node_count + 1];
        for (_, &(a, b)) in used() {
            start[a + 1] += 1;
            start[b + 1] += 1;
        }
        for node in 0..node_count {
            start[node + 1] += start[node];
        }
        let mut next = start.clone();
        let mut list = vec![(0, 0); start[node_count]];
        for (edge, &(a, b)) in used() {
            list[next[a]] = (edge, b);
            next[a] += 1;
            list[next[b]] = (edge, a);
            next[b] += 1;
        }
        Self { start, list }
    }

    fn of(&self, node: usize) -> &[(usize, usize)] {
        &self.list[self.start[node]..self.start[node + 1]]
    }
}

/// Blocks (biconnected components) and bridges over the closed edges.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Blocks {
    /// Block of every edge; none = open edge or loop.
    pub block_of_edge: Vec<Option<usize>>,
    /// Number of blocks; a bridge is a block of its own.
    pub count: usize,
    /// Whether the edge is a bridge: its opening splits its component.
    pub is_bridge: Vec<bool>,
    /// Whether the node lies in more than one block.
    pub is_cut_node: Vec<bool>,
}

/// Working arrays of the depth-first search behind [`blocks`].
struct Search {
    depth: Vec<usize>,
    low: Vec<usize>,
    /// (node, edge it was entered by, position in its adjacency)
    path: Vec<(usize, usize, usize)>,
    open_edges: Vec<usize>,
}

/// Find blocks and bridges by one depth-first search with an explicit stack.
///
/// Cost: linear in nodes and edges.
/// Source: Hopcroft and Tarjan, "Algorithm 447: efficient algorithms for graph
/// manipulation", Comm. ACM 16(6), 1973; edges are kept apart by index, which
/// makes parallel edges a block of two instead of two bridges.
pub fn blocks(node_count: usize, edges: &[(usize, usize)], closed: &[bool]) -> Blocks {
    let adjacency = Adjacency::new(node_count, edges, closed);
    let mut found = Blocks {
        block_of_edge: vec![None; edges.len()],
        count: 0,
        is_bridge: vec![false; edges.len()],
        is_cut_node: vec![false; node_count],
    };
    let mut search = Search {
        depth: vec![0; node_count],
        low: vec![0; node_count],
        path: Vec::new(),
        open_edges: Vec::new(),
    };
    for root in 0..node_count {
        if search.depth[root] == 0 {
            search.depth[root] = 1;
            search.low[root] = 1;
            search.path.push((root, usize::MAX, 0));
            search.run(&adjacency, &mut found);
        }
    }
    mark_cut_nodes(edges, &mut found);
    found
}

impl Search {
    /// Walk one component; every edge is looked at twice, once from each end.
    fn run(&mut self, adjacency: &Adjacency, found: &mut Blocks) {
        while let Some(&mut (node, entered_by, ref mut position)) = self.path.last_mut() {
            if let Some(&(edge, other)) = adjacency.of(node).get(*position) {
                *position += 1;
                self.visit(node, entered_by, edge, other);
            } else {
                self.path.pop();
                if let Some(&(parent, _, _)) = self.path.last() {
                    self.low[parent] = self.low[parent].min(self.low[node]);
                    if self.low[node] >= self.depth[parent] {
                        self.close_block(entered_by, found);
                    }
                }
            }
        }
    }

    fn visit(&mut self, node: usize, entered_by: usize, edge: usize, other: usize) {
        if edge == entered_by {
            return;
        }
        if self.depth[other] == 0 {
            self.depth[other] = self.depth[node] + 1;
            self.low[other] = self.depth[other];
            self.open_edges.push(edge);
            self.path.push((other, edge, 0));
        } else if self.depth[other] < self.depth[node] {
            self.open_edges.push(edge);
            self.low[node] = self.low[node].min(self.depth[other]);
        }
    }

    /// All edges above and including `last` form the block just completed.
    fn close_block(&mut self, last: usize, found: &mut Blocks) {
        let block = found.count;
        found.count += 1;
        let mut size = 0;
        while let Some(edge) = self.open_edges.pop() {
            found.block_of_edge[edge] = Some(block);
            size += 1;
            if edge == last {
                break;
            }
        }
        found.is_bridge[last] = size == 1;
    }
}

fn mark_cut_nodes(edges: &[(usize, usize)], found: &mut Blocks) {
    let mut seen: Vec<Option<usize>> = vec![None; found.is_cut_node.len()];
    for (edge, &(a, b)) in edges.iter().enumerate() {
        let Some(block) = found.block_of_edge[edge] else {
            continue;
        };
        for node in [a, b] {
            match seen[node] {
                None => seen[node] = Some(block),
                Some(first) if first != block => found.is_cut_node[node] = true,
                Some(_) => {}
            }
        }
    }
}

/// How many spanning trees a graph has.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum TreeCount {
    /// The exact number; 0 where the graph is not connected.
    Exact(u128),
    /// Too large for exact integers: the natural logarithm of the number.
    Logarithm(f64),
}

/// Count the spanning trees over the closed edges (parallel edges count apart).
///
/// Cost: cubic in the nodes.
/// Source: matrix-tree theorem (Kirchhoff 1847); fraction-free elimination
/// after Bareiss, Math. Comp. 22(103), 1968.
pub fn spanning_tree_count(
    node_count: usize,
    edges: &[(usize, usize)],
    closed: &[bool],
) -> TreeCount {
    if node_count == 0 || components(node_count, edges, closed).1 > 1 {
        return TreeCount::Exact(0);
    }
    let reduced = reduced_laplacian(node_count, edges, closed);
    match exact_determinant(reduced.clone()) {
        Some(count) => TreeCount::Exact(count),
        None => TreeCount::Logarithm(log_determinant(&reduced)),
    }
}

/// Laplacian of the multigraph without its last node's row and column.
fn reduced_laplacian(
    node_count: usize,
    edges: &[(usize, usize)],
    closed: &[bool],
) -> Vec<Vec<i128>> {
    let size = node_count - 1;
    let mut matrix = vec![vec![0; size]; size];
    for (&(a, b), _) in edges.iter().zip(closed).filter(|&(_, &is_closed)| is_closed) {
        if a == b {
            continue;
        }
        for (row, column, value) in [(a, a, 1), (b, b, 1), (a, b, -1), (b, a, -1)] {
            if row < size && column < size {
                matrix[row][column] += value;
            }
        }
    }
    matrix
}

/// Determinant of a positive definite integer matrix; none on overflow.
fn exact_determinant(mut matrix: Vec<Vec<i128>>) -> Option<u128> {
    let size = matrix.len();
    let mut previous = 1_i128;
    for pivot in 0..size {
        // Leading minors of the reduced Laplacian of a connected graph are
        // positive, so no row exchange is needed.
        let (above, below) = matrix.split_at_mut(pivot + 1);
        let pivot_row = &above[pivot];
        for row in below.iter_mut() {
            for column in pivot + 1..size {
                let product = pivot_row[pivot].checked_mul(row[column])?;
                let crossed = row[pivot].checked_mul(pivot_row[column])?;
                row[column] = product.checked_sub(crossed)? / previous;
            }
            row[pivot] = 0;
        }
        previous = pivot_row[pivot];
    }
    u128::try_from(previous).ok()
}

fn log_determinant(matrix: &[Vec<i128>]) -> f64 {
    let size = matrix.len();
    let mut work: Vec<Vec<f64>> =
        matrix.iter().map(|row| row.iter().map(|&value| value as f64).collect()).collect();
    let mut log = 0.0;
    for pivot in 0..size {
        let (above, below) = work.split_at_mut(pivot + 1);
        let pivot_row = &above[pivot];
        log += pivot_row[pivot].ln();
        for row in below.iter_mut() {
            let factor = row[pivot] / pivot_row[pivot];
            for column in pivot..size {
                row[column] -= factor * pivot_row[column];
            }
        }
    }
    log
}

#[cfg(test)]
#[path = "graph_tests.rs"]
mod tests;
