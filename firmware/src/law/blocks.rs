//! The matrix of the law, and its two products.
//!
//! Contract: R rows and X columns, kept once, in blocks of sixteen columns;
//! block `b` holds columns `16b` to `16b + 15` of row after row. `A x` runs along
//! the rows of a block with its factors in registers, `A' y` with its sums in
//! registers. The order of every sum is fixed (ascending), whatever the blocks,
//! so results do not depend on the machine or the capacity.

/// Columns of a block: sixteen sums or factors, and what passes by, fit the 32
/// registers of a Cortex-M's FPU, and four vector registers of a host.
pub const LANES: usize = 16;

/// Neighbouring values of a row.
type Piece = [f32; LANES];

/// A matrix of R rows and X columns, X a multiple of [`LANES`].
#[derive(Clone, Debug)]
pub struct Blocks<const X: usize, const R: usize>([[f32; X]; R]);

impl<const X: usize, const R: usize> Blocks<X, R> {
    /// All zero.
    pub const fn new() -> Self {
        const { assert!(X.is_multiple_of(LANES), "make the column capacity a multiple of sixteen") };
        const { assert!(R.is_multiple_of(2), "make the row capacity even") };
        Self([[0.0; X]; R])
    }

    fn pieces(&self) -> &[Piece] {
        self.0.as_flattened().as_chunks().0
    }

    fn piece_mut(&mut self, row: usize, block: usize) -> Option<&mut Piece> {
        self.0.as_flattened_mut().as_chunks_mut().0.get_mut(block * R + row)
    }

    /// Write one entry, if there is one.
    pub fn put(&mut self, row: usize, col: usize, value: f32) {
        if let Some(piece) = self.piece_mut(row, col / LANES).filter(|_| row < R) {
            super::kernel::put(piece, col % LANES, value);
        }
    }

    /// A copy of a row; zero beyond the end.
    pub fn row(&self, row: usize) -> [f32; X] {
        let mut out = [0.0; X];
        if row < R {
            for (block, part) in out.as_chunks_mut::<LANES>().0.iter_mut().enumerate() {
                *part = self.pieces().get(block * R + row).copied().unwrap_or_default();
            }
        }
        out
    }

    /// Write a row, if there is one.
    pub fn set_row(&mut self, row: usize, values: &[f32; X]) {
        if row < R {
            for (block, part) in values.as_chunks::<LANES>().0.iter().enumerate() {
                if let Some(piece) = self.piece_mut(row, block) {
                    *piece = *part;
                }
            }
        }
    }

    /// `out = A x` over the first `rows` rows (rounded up to even) and `cols` columns.
    ///
    /// Cost: 2 rows x cols flops.
    pub fn times(&self, x: &[f32; X], rows: usize, cols: usize, out: &mut [f32; R]) {
        let out = out.get_mut(..even::<R>(rows)).unwrap_or_default();
        add_rows(self.pieces(), R, x, cols.min(X), out);
    }

    /// `out = A' y` over the first `rows` rows (rounded up to even) and `cols` columns.
    ///
    /// Cost: 2 rows x cols flops.
    pub fn transposed_times(&self, y: &[f32; R], rows: usize, cols: usize, out: &mut [f32; X]) {
        let factors = y.get(..even::<R>(rows)).unwrap_or_default();
        add_columns(self.pieces(), R, factors, cols.min(X), out);
    }
}

impl<const X: usize, const R: usize> Default for Blocks<X, R> {
    fn default() -> Self {
        Self::new()
    }
}

/// Rows are handled in pairs.
fn even<const R: usize>(rows: usize) -> usize {
    (rows + rows % 2).min(R)
}

/// The sums of the rows over `cols` columns; blocks are `stride` pieces apart.
///
/// Not generic and not inlined, so that it is made once, in this crate, at its level of optimisation.
#[inline(never)]
fn add_rows(pieces: &[Piece], stride: usize, factors: &[f32], cols: usize, out: &mut [f32]) {
    let mut left = cols;
    if left < LANES {
        out.fill(0.0);
    }
    let blocks = pieces.chunks(stride.max(1));
    for (index, (block, factors)) in blocks.zip(factors.as_chunks().0).enumerate() {
        match left {
            0 => return,
            1 => rows_of::<1, false>(block, factors, out),
            2 => rows_of::<2, false>(block, factors, out),
            3 => rows_of::<3, false>(block, factors, out),
            4 => rows_of::<4, false>(block, factors, out),
            5 => rows_of::<5, false>(block, factors, out),
            6 => rows_of::<6, false>(block, factors, out),
            7 => rows_of::<7, false>(block, factors, out),
            8 => rows_of::<8, false>(block, factors, out),
            9 => rows_of::<9, false>(block, factors, out),
            10 => rows_of::<10, false>(block, factors, out),
            11 => rows_of::<11, false>(block, factors, out),
            12 => rows_of::<12, false>(block, factors, out),
            13 => rows_of::<13, false>(block, factors, out),
            14 => rows_of::<14, false>(block, factors, out),
            15 => rows_of::<15, false>(block, factors, out),
            _ if index == 0 => rows_of::<LANES, true>(block, factors, out),
            _ => rows_of::<LANES, false>(block, factors, out),
        }
        left = left.saturating_sub(LANES);
    }
}

#[inline(always)]
fn rows_of<const N: usize, const FROM_ZERO: bool>(
    pieces: &[Piece],
    factors: &Piece,
    out: &mut [f32],
) {
    let Some(&factors) = factors.first_chunk::<N>() else {
        return;
    };
    let add = |sum: &mut f32, piece: &Piece| {
        let mut terms = piece.iter().zip(factors).map(|(&value, factor)| value * factor);
        let first = terms.next().unwrap_or(0.0);
        let start = if FROM_ZERO { first } else { *sum + first };
        *sum = terms.fold(start, |total, term| total + term);
    };
    // Two rows at a time: less bookkeeping, and no register spilled yet.
    let pairs = pieces.as_chunks::<2>().0;
    for ([s0, s1], [p0, p1]) in out.as_chunks_mut::<2>().0.iter_mut().zip(pairs) {
        add(s0, p0);
        add(s1, p1);
    }
}

/// The sums of `cols` columns, each row times its factor; blocks are `stride` pieces apart.
#[inline(never)]
fn add_columns(pieces: &[Piece], stride: usize, factors: &[f32], cols: usize, out: &mut [f32]) {
    let mut left = cols;
    for (block, sums) in pieces.chunks(stride.max(1)).zip(out.as_chunks_mut().0) {
        match left {
            0 => return,
            1 => columns_of::<1>(block, factors, sums),
            2 => columns_of::<2>(block, factors, sums),
            3 => columns_of::<3>(block, factors, sums),
            4 => columns_of::<4>(block, factors, sums),
            5 => columns_of::<5>(block, factors, sums),
            6 => columns_of::<6>(block, factors, sums),
            7 => columns_of::<7>(block, factors, sums),
            8 => columns_of::<8>(block, factors, sums),
            9 => columns_of::<9>(block, factors, sums),
            10 => columns_of::<10>(block, factors, sums),
            11 => columns_of::<11>(block, factors, sums),
            12 => columns_of::<12>(block, factors, sums),
            13 => columns_of::<13>(block, factors, sums),
            14 => columns_of::<14>(block, factors, sums),
            15 => columns_of::<15>(block, factors, sums),
            _ => columns_of::<LANES>(block, factors, sums),
        }
        left = left.saturating_sub(LANES);
    }
}

#[inline(always)]
fn columns_of<const N: usize>(pieces: &[Piece], factors: &[f32], sums: &mut Piece) {
    let mut total = [0.0_f32; N];
    let mut add = |piece: &Piece, factor: f32| {
        for (total, &value) in total.iter_mut().zip(piece) {
            *total += value * factor;
        }
    };
    let pairs = pieces.as_chunks::<2>().0;
    for ([p0, p1], &[f0, f1]) in pairs.iter().zip(factors.as_chunks::<2>().0) {
        add(p0, f0);
        add(p1, f1);
    }
    for (sum, total) in sums.iter_mut().zip(total) {
        *sum = total;
    }
}

#[cfg(test)]
#[allow(clippy::indexing_slicing)]
mod tests {
    use super::*;

    fn value(row: usize, col: usize) -> f32 {
        (row as f32 - 4.0) * 0.37 + (col as f32) * 1.13 - 5.0
    }

    fn filled() -> Blocks<32, 12> {
        let mut a = Blocks::new();
        for row in 0..12 {
            for col in 0..32 {
                a.put(row, col, value(row, col));
            }
        }
        a
    }

    #[test]
    fn products_equal_the_plain_sums_to_the_bit_at_every_width() {
        let a = filled();
        let x: [f32; 32] = core::array::from_fn(|j| 0.7 - 0.1 * j as f32);
        // A row that is rounded up to has no factor, as the law's have none.
        let y = core::array::from_fn(|i| if i < 9 { 0.3 * i as f32 - 1.0 } else { 0.0 });
        for cols in 0..=32 {
            let (mut ax, mut aty) = ([9.0; 12], [9.0; 32]);
            a.times(&x, 9, cols, &mut ax);
            a.transposed_times(&y, 9, cols, &mut aty);
            for (i, sum) in ax.iter().enumerate().take(9) {
                let plain = (0..cols).fold(0.0, |sum, j| sum + value(i, j) * x[j]);
                assert_eq!(sum.to_bits(), plain.to_bits(), "row {i} of {cols}");
            }
            for (j, sum) in aty.iter().enumerate().take(cols) {
                let plain = (0..9).fold(0.0, |sum, i| sum + value(i, j) * y[i]);
                assert_eq!(sum.to_bits(), plain.to_bits(), "column {j} of {cols}");
            }
            assert_eq!(ax[10..], [9.0; 2]);
        }
    }

    #[test]
    fn rows_come_back_as_they_were_set() {
        let mut a = filled();
        let row: [f32; 32] = core::array::from_fn(|j| j as f32);
        a.set_row(3, &row);
        assert_eq!(a.row(3), row);
        assert_eq!(a.row(4), core::array::from_fn(|j| value(4, j)));
        a.set_row(12, &[1.0; 32]);
        a.put(12, 0, 1.0);
        assert_eq!(a.row(12), [0.0; 32]);
        assert_eq!(a.row(0), core::array::from_fn(|j| value(0, j)));
    }
}
