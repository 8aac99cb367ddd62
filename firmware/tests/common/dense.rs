//! Graphs and inverse Laplacians in f64: the second opinion.

use hedgerow_protocol::charter::Line;

/// A dense matrix by rows.
pub type Matrix = Vec<Vec<f64>>;

/// Number of the piece that each bus belongs to.
pub fn pieces(buses: usize, lines: &[Line], closed: &[bool]) -> Vec<usize> {
    let mut piece: Vec<usize> = (0..buses).collect();
    for _ in 0..buses {
        for (line, _) in lines.iter().zip(closed).filter(|(_, closed)| **closed) {
            let (from, to) = (usize::from(line.from), usize::from(line.to));
            let least = piece[from].min(piece[to]);
            (piece[from], piece[to]) = (least, least);
        }
    }
    piece
}

/// Whether opening a closed line would cut its piece.
pub fn is_bridge(buses: usize, lines: &[Line], closed: &[bool], index: usize) -> bool {
    let mut without = closed.to_vec();
    without[index] = false;
    let piece = pieces(buses, lines, &without);
    piece[usize::from(lines[index].from)] != piece[usize::from(lines[index].to)]
}

/// Inverse Laplacian of the closed lines between kept buses, grounded at `root`; zero elsewhere.
pub fn inverse_laplacian(
    buses: usize,
    lines: &[Line],
    closed: &[bool],
    kept: &[bool],
    root: usize,
) -> Matrix {
    let mut laplacian = vec![vec![0.0; buses]; buses];
    for (line, _) in lines.iter().zip(closed).filter(|(_, closed)| **closed) {
        let (from, to) = (usize::from(line.from), usize::from(line.to));
        let b = f64::from(line.susceptance);
        if kept[from] && kept[to] {
            laplacian[from][from] += b;
            laplacian[to][to] += b;
            laplacian[from][to] -= b;
            laplacian[to][from] -= b;
        }
    }
    let grounded = |bus: usize| bus == root || !kept[bus];
    for bus in (0..buses).filter(|&bus| grounded(bus)) {
        laplacian[bus].fill(0.0);
        laplacian.iter_mut().for_each(|row| row[bus] = 0.0);
        laplacian[bus][bus] = 1.0;
    }
    let mut inverse = invert(laplacian);
    for bus in (0..buses).filter(|&bus| grounded(bus)) {
        inverse[bus][bus] = 0.0;
    }
    inverse
}

/// Gauss-Jordan with partial pivoting.
fn invert(mut a: Matrix) -> Matrix {
    let n = a.len();
    let mut inverse: Matrix =
        (0..n).map(|i| (0..n).map(|j| if i == j { 1.0 } else { 0.0 }).collect()).collect();
    for k in 0..n {
        let pivot = (k..n).max_by(|&i, &j| a[i][k].abs().total_cmp(&a[j][k].abs())).unwrap();
        a.swap(k, pivot);
        inverse.swap(k, pivot);
        let p = a[k][k];
        assert!(p.abs() > 1e-12, "the area is not connected");
        for value in a[k].iter_mut().chain(&mut inverse[k]) {
            *value /= p;
        }
        for i in (0..n).filter(|&i| i != k) {
            let factor = a[i][k];
            if factor != 0.0 {
                for j in 0..n {
                    let (left, right) = (a[k][j], inverse[k][j]);
                    a[i][j] -= factor * left;
                    inverse[i][j] -= factor * right;
                }
            }
        }
    }
    inverse
}
