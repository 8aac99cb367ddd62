//! Dense kernels in a fixed order of operations: the same bits on every machine.
//!
//! Contract: matrices are column-major slices; lengths agree (checked where the
//! matrices are made). No fused operations and no run-time choice of kernels,
//! so a run is reproducible from one processor to the next.

/// y += A x.
///
/// Shapes: `y` rows, `x` columns, `a` rows * columns.
/// Cost: rows * columns multiply-adds, no allocation.
pub fn add_product(y: &mut [f64], a: &[f64], x: &[f64]) {
    let rows = y.len();
    if rows == 0 {
        return;
    }
    let mut blocks = a.chunks_exact(4 * rows);
    let mut quads = x.chunks_exact(4);
    for (block, quad) in blocks.by_ref().zip(quads.by_ref()) {
        let (left, right) = block.split_at(2 * rows);
        let (a0, a1) = left.split_at(rows);
        let (a2, a3) = right.split_at(rows);
        for ((((y, a0), a1), a2), a3) in y.iter_mut().zip(a0).zip(a1).zip(a2).zip(a3) {
            *y += (a0 * quad[0] + a1 * quad[1]) + (a2 * quad[2] + a3 * quad[3]);
        }
    }
    let columns = blocks.remainder().chunks_exact(rows);
    for (column, &factor) in columns.zip(quads.remainder()) {
        add_scaled(y, column, factor);
    }
}

/// y += factor * a.
pub fn add_scaled(y: &mut [f64], a: &[f64], factor: f64) {
    for (y, a) in y.iter_mut().zip(a) {
        *y += a * factor;
    }
}

/// A square matrix, column-major.
#[derive(Clone, Debug, PartialEq)]
pub struct Square {
    /// Rows and columns.
    pub size: usize,
    /// Entries, column by column.
    pub data: Vec<f64>,
}

impl Square {
    /// A matrix of zeros.
    pub fn zeros(size: usize) -> Self {
        Self { size, data: vec![0.0; size * size] }
    }

    /// Entry for reading and writing.
    pub fn at(&mut self, row: usize, column: usize) -> &mut f64 {
        &mut self.data[column * self.size + row]
    }

    /// Add `value` along the diagonal.
    pub fn add_to_diagonal(&mut self, value: f64) {
        for index in 0..self.size {
            self.data[index * (self.size + 1)] += value;
        }
    }

    /// Multiply every entry.
    pub fn scale(&mut self, factor: f64) {
        for value in &mut self.data {
            *value *= factor;
        }
    }

    /// Add another matrix of the same size.
    pub fn add(&mut self, other: &Self) {
        add_scaled(&mut self.data, &other.data, 1.0);
    }

    /// Product with another matrix of the same size.
    pub fn times(&self, other: &Self) -> Self {
        let mut product = Self::zeros(self.size);
        if self.size > 0 {
            let columns = other.data.chunks_exact(self.size);
            for (out, column) in product.data.chunks_exact_mut(self.size).zip(columns) {
                add_product(out, &self.data, column);
            }
        }
        product
    }

    /// Largest column sum of absolute values.
    pub fn norm_one(&self) -> f64 {
        self.data
            .chunks_exact(self.size.max(1))
            .map(|column| column.iter().map(|value| value.abs()).sum())
            .fold(0.0, f64::max)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn product_equals_the_sum_over_columns_for_every_remainder() {
        for columns in 0..9 {
            let rows = 5;
            let a: Vec<f64> = (0..rows * columns).map(|i| (i * i % 17) as f64).collect();
            let x: Vec<f64> = (0..columns).map(|i| i as f64 - 2.0).collect();
            let mut y = vec![1.0; rows];
            add_product(&mut y, &a, &x);
            for row in 0..rows {
                let expected: f64 = (0..columns).map(|c| a[c * rows + row] * x[c]).sum();
                assert_eq!(y[row], 1.0 + expected);
            }
        }
    }

    #[test]
    fn an_empty_product_changes_nothing() {
        add_product(&mut [], &[], &[1.0]);
        assert_eq!(Square::zeros(0).times(&Square::zeros(0)).norm_one(), 0.0);
    }
}
