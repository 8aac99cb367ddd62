//! The steward's trial on a raw problem: the law runs, candidates are tried on the physical rows.
//!
//! Contract: only [`shortfall`] decides; the candidates come from the same
//! function that the steward calls.

use crate::board::{Board, ROWS};
use crate::programme::Programme;
use hedgerow_firmware::verdict::candidate::Candidates;
use hedgerow_firmware::verdict::{Product, Ranges, Rows, shortfall};

/// Shortfall that makes a rung impossible, pu (0.2 MW on 100 MVA).
pub const THRESHOLD: f32 = 0.002;

/// Physical numbers in f32.
pub struct Facts {
    a: Vec<Vec<f32>>,
    low: Vec<f32>,
    high: Vec<f32>,
    lo: Vec<f32>,
    hi: Vec<f32>,
}

impl Facts {
    /// Of a problem.
    pub fn new(p: &Programme) -> Self {
        let near = |v: &Vec<f64>| v.iter().map(|&x| x as f32).collect::<Vec<f32>>();
        Self {
            a: p.a.iter().map(near).collect(),
            low: near(&p.l),
            high: near(&p.r),
            lo: near(&p.lo),
            hi: near(&p.hi),
        }
    }

    /// What a dual vector proves, pu.
    pub fn proven(&self, dual: &[f32]) -> f32 {
        let (mut column, mut magnitude) = (vec![0.0; self.lo.len()], vec![0.0; self.lo.len()]);
        for (row, y) in self.a.iter().zip(dual) {
            for ((sum, size), a) in column.iter_mut().zip(&mut magnitude).zip(row) {
                *sum += y * a;
                *size += (y * a).abs();
            }
        }
        let error = vec![0.0; self.low.len()];
        shortfall(
            &dual[..self.low.len()],
            Product { column: &column, magnitude: &magnitude },
            Rows { low: &self.low, high: &self.high, error: &error },
            Ranges { low: &self.lo, high: &self.hi },
        )
    }

    /// The same in f64, without the rounding bound.
    pub fn proven_f64(&self, dual: &[f32]) -> f64 {
        let mut gap = 0.0;
        for j in 0..self.lo.len() {
            let column: f64 =
                self.a.iter().zip(dual).map(|(row, &y)| f64::from(row[j]) * f64::from(y)).sum();
            let (low, high) = (f64::from(self.lo[j]), f64::from(self.hi[j]));
            gap += (column * low).min(column * high);
        }
        for ((&low, &high), &y) in self.low.iter().zip(&self.high).zip(dual) {
            let y = f64::from(y);
            gap -= (y * f64::from(low)).max(y * f64::from(high));
        }
        gap / dual.iter().map(|&y| f64::from(y).abs()).sum::<f64>()
    }

    /// Triple products whose sum is the exact gap less `claimed` times the norm.
    pub fn terms(&self, dual: &[f32], claimed: f32) -> Vec<[f32; 3]> {
        let mut terms = vec![];
        for j in 0..self.lo.len() {
            let products: Vec<[f32; 3]> =
                self.a.iter().zip(dual).map(|(row, &y)| [row[j], y, 1.0]).collect();
            let up = crate::exact::sign(&products) >= 0;
            let end = if up { self.lo[j] } else { self.hi[j] };
            terms.extend(products.iter().map(|&[a, y, _]| [a, y, end]));
        }
        for (i, &y) in dual.iter().enumerate().take(self.low.len()) {
            let end = if y >= 0.0 { self.high[i] } else { self.low[i] };
            terms.push([-y, end, 1.0]);
            terms.push([-y.abs(), claimed, 1.0]);
        }
        terms
    }
}

/// What a trial found.
#[derive(Clone, Debug)]
pub struct Found {
    /// First tick with a shortfall above the threshold, from 1.
    pub tick: Option<usize>,
    /// Largest shortfall claimed by any candidate in any tick.
    pub claimed: f32,
    /// The dual vector that claimed it.
    pub dual: [f32; ROWS],
}

/// Run the law for some ticks and try its candidates, until one is found if `stop`.
pub fn trial(
    board: &mut Board,
    facts: &Facts,
    iterations: usize,
    ticks: usize,
    stop: bool,
) -> Found {
    let mut candidates = Candidates::<ROWS>::new();
    let mut found = Found { tick: None, claimed: -1.0, dual: [0.0; ROWS] };
    for tick in 1..=ticks {
        board.run(iterations);
        for dual in candidates.next(&board.physical_dual()) {
            let proven = facts.proven(&dual);
            if proven > found.claimed {
                (found.claimed, found.dual) = (proven, dual);
            }
        }
        if found.tick.is_none() && found.claimed > THRESHOLD {
            found.tick = Some(tick);
            if stop {
                break;
            }
        }
    }
    found
}
