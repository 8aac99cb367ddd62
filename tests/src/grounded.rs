//! The Laplacian of lines and its grounded inverse, in f64, apart from the steward's own.

/// Laplacian of lines given as (from, to, reactance).
pub fn laplacian(n: usize, lines: &[(usize, usize, f64)]) -> Vec<Vec<f64>> {
    let mut laplacian = vec![vec![0.0; n]; n];
    for &(from, to, x) in lines {
        let b = 1.0 / x;
        laplacian[from][from] += b;
        laplacian[to][to] += b;
        laplacian[from][to] -= b;
        laplacian[to][from] -= b;
    }
    laplacian
}

/// Inverse of a Laplacian without its first row and column, those zero (Gauss-Jordan, pivots on the diagonal).
pub fn inverse(mut laplacian: Vec<Vec<f64>>) -> Vec<Vec<f64>> {
    let n = laplacian.len();
    let mut inverse: Vec<Vec<f64>> =
        (0..n).map(|i| (0..n).map(|j| f64::from(u8::from(i == j && i > 0))).collect()).collect();
    for k in 1..n {
        let pivot = laplacian[k][k];
        laplacian[k].iter_mut().chain(&mut inverse[k]).for_each(|v| *v /= pivot);
        let (row, right) = (laplacian[k].clone(), inverse[k].clone());
        for i in (1..n).filter(|&i| i != k) {
            let factor = laplacian[i][k];
            for j in 1..n {
                laplacian[i][j] -= factor * row[j];
                inverse[i][j] -= factor * right[j];
            }
        }
    }
    inverse
}
