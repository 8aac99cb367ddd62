//! DC power flow over the closed lines: sparse, one reference bus per island.
//!
//! Contract: the angle of an island's reference bus (its lowest bus) is 0; the
//! injections handed in must balance within each island. Positive reactances
//! give a positive definite matrix (sparse Cholesky), anything else sparse LU.
//! Every solve is refined once and its residual checked. `faer` is built
//! without its thread pool, so its parallelism is `Par::Seq` by construction.
//!
//! Data flow: `Grid`, closed lines -> reduced susceptance matrix -> factors;
//! injections -> angles -> flows.

use faer::linalg::solvers::Solve;
use faer::sparse::linalg::solvers::{Llt, Lu, SymbolicLlt, SymbolicLu};
use faer::sparse::{SparseColMat, Triplet};
use faer::{Mat, Side};
use thiserror::Error;

use super::graph::components;
use super::line_ends;
use crate::case::model::Grid;

/// An island may be out of balance by this much: rounding of sums, no more.
///
/// 300 injections of 1e4 MW added in f64 are good to 1e-9 MW; the rest is room
/// for numbers that come from files with few digits.
pub const BALANCE_TOL_MW: f64 = 1e-6;

/// Allowed residual per bus after refinement, as a share of the largest term.
const RESIDUAL_TOL: f64 = 1e-9;

/// Why a DC flow could not be found.
#[derive(Clone, Debug, Error, PartialEq)]
pub enum DcError {
    /// A line has no usable reactance.
    #[error("line {line} has reactance {reactance_pu} pu; a finite value other than 0 is needed")]
    Reactance {
        /// Name of the line.
        line: String,
        /// Value found.
        reactance_pu: f64,
    },
    /// An island's matrix has no inverse (negative reactances cancel).
    #[error(
        "the network matrix is singular or too ill-conditioned: reactances of closed lines cancel"
    )]
    Singular,
    /// The injections of an island do not add up to zero.
    #[error(
        "the injections of the island around bus {bus} add up to {imbalance_mw:+.6} MW; they must balance"
    )]
    Imbalance {
        /// Reference bus of the island.
        bus: String,
        /// Sum of the island's injections in MW.
        imbalance_mw: f64,
    },
    /// A list has the wrong length.
    #[error("{what}: {found} values given, {expected} needed")]
    Length {
        /// Which list.
        what: &'static str,
        /// Values given.
        found: usize,
        /// Values needed.
        expected: usize,
    },
}

enum Factors {
    /// No bus but reference buses.
    Empty,
    Cholesky(Box<Llt<usize, f64>>),
    General(Box<Lu<usize, f64>>),
}

/// A network of closed lines, factorised.
pub struct DcNetwork {
    ends: Vec<(usize, usize)>,
    closed: Vec<bool>,
    susceptance_mw: Vec<f64>,
    island: Vec<usize>,
    reference_bus: Vec<usize>,
    bus_names: Vec<String>,
    /// Row of each bus in the reduced matrix; none for reference buses.
    row: Vec<Option<usize>>,
    factors: Factors,
}

/// Angles and flows of one operating point.
#[derive(Clone, Debug, PartialEq)]
pub struct DcSolution {
    /// Angle of each bus in rad against its island's reference bus.
    pub angle_rad: Vec<f64>,
    /// Flow of each line in MW, positive from `from` to `to`; 0 while open.
    pub flow_mw: Vec<f64>,
    /// Island of each bus, numbered from 0 by lowest bus.
    pub island: Vec<usize>,
}

impl DcNetwork {
    /// Factorise the network of the closed lines.
    ///
    /// Errors: an unusable reactance, or a singular matrix.
    pub fn new(grid: &Grid, closed: &[bool]) -> Result<Self, DcError> {
        check_length("closed lines", closed.len(), grid.lines.len())?;
        let ends = line_ends(grid);
        let (island, island_count) = components(grid.buses.len(), &ends, closed);
        let mut reference_bus = vec![usize::MAX; island_count];
        let mut row = vec![None; grid.buses.len()];
        let mut size = 0;
        for (bus, &island) in island.iter().enumerate() {
            if reference_bus[island] == usize::MAX {
                reference_bus[island] = bus;
            } else {
                row[bus] = Some(size);
                size += 1;
            }
        }
        let mut network = Self {
            ends,
            closed: closed.to_vec(),
            susceptance_mw: susceptances_mw(grid)?,
            island,
            reference_bus,
            bus_names: grid.buses.iter().map(|bus| bus.name.clone()).collect(),
            row,
            factors: Factors::Empty,
        };
        network.factors = network.factorise(size)?;
        Ok(network)
    }

    fn factorise(&self, size: usize) -> Result<Factors, DcError> {
        if size == 0 {
            return Ok(Factors::Empty);
        }
        let triplets = self.triplets();
        let matrix = SparseColMat::<usize, f64>::try_new_from_triplets(size, size, &triplets)
            .map_err(|_| DcError::Singular)?;
        let positive = (0..self.ends.len())
            .filter(|&line| self.closed[line])
            .all(|line| self.susceptance_mw[line] > 0.0);
        if positive {
            let symbolic = SymbolicLlt::try_new(matrix.symbolic(), Side::Lower)
                .map_err(|_| DcError::Singular)?;
            Llt::try_new_with_symbolic(symbolic, matrix.as_ref(), Side::Lower)
                .map(|factors| Factors::Cholesky(Box::new(factors)))
                .map_err(|_| DcError::Singular)
        } else {
            let symbolic = SymbolicLu::try_new(matrix.symbolic()).map_err(|_| DcError::Singular)?;
            Lu::try_new_with_symbolic(symbolic, matrix.as_ref())
                .map(|factors| Factors::General(Box::new(factors)))
                .map_err(|_| DcError::Singular)
        }
    }

    fn triplets(&self) -> Vec<Triplet<usize, usize, f64>> {
        let mut triplets = Vec::new();
        for (line, &(from, to)) in self.ends.iter().enumerate() {
            if !self.closed[line] || from == to {
                continue;
            }
            let value = self.susceptance_mw[line];
            for bus in [from, to] {
                if let Some(row) = self.row[bus] {
                    triplets.push(Triplet::new(row, row, value));
                }
            }
            if let (Some(a), Some(b)) = (self.row[from], self.row[to]) {
                triplets.push(Triplet::new(a, b, -value));
                triplets.push(Triplet::new(b, a, -value));
            }
        }
        triplets
    }

    /// Solve for angles and flows.
    ///
    /// Units: injections in MW, one per bus.
    /// Sign: into the bus positive.
    /// Errors: an island out of balance by more than [`BALANCE_TOL_MW`], or a
    /// solve whose residual stays large.
    pub fn flows_mw(&self, injection_mw: &[f64]) -> Result<DcSolution, DcError> {
        check_length("injections", injection_mw.len(), self.island.len())?;
        self.check_balance(injection_mw)?;
        let angle_rad = self.angles_rad(injection_mw)?;
        Ok(DcSolution {
            flow_mw: self.flows_of_angles(&angle_rad),
            angle_rad,
            island: self.island.clone(),
        })
    }

    /// Angles for injections whose balance is made up at the reference buses.
    pub(crate) fn angles_rad(&self, injection_mw: &[f64]) -> Result<Vec<f64>, DcError> {
        let mut angle_rad = vec![0.0; self.island.len()];
        let largest = injection_mw.iter().fold(0.0_f64, |max, p| max.max(p.abs()));
        // The second pass is the refinement; the check follows it.
        for _ in 0..2 {
            let residual = self.residual_mw(injection_mw, &angle_rad);
            for (angle, change) in angle_rad.iter_mut().zip(self.solve(&residual)) {
                *angle += change;
            }
        }
        let scale = largest.max(1e-3)
            + self
                .flows_of_angles(&angle_rad)
                .iter()
                .fold(0.0_f64, |max, flow| max.max(flow.abs()));
        let residual = self.residual_mw(injection_mw, &angle_rad);
        // Written so that a residual that is no number is refused too.
        if residual.iter().all(|value| value.abs() <= RESIDUAL_TOL * scale) {
            Ok(angle_rad)
        } else {
            Err(DcError::Singular)
        }
    }

    /// Injection less outflow per bus; 0 at reference buses.
    fn residual_mw(&self, injection_mw: &[f64], angle_rad: &[f64]) -> Vec<f64> {
        let mut residual = injection_mw.to_vec();
        for (line, flow) in self.flows_of_angles(angle_rad).into_iter().enumerate() {
            residual[self.ends[line].0] -= flow;
            residual[self.ends[line].1] += flow;
        }
        for &bus in &self.reference_bus {
            residual[bus] = 0.0;
        }
        residual
    }

    fn solve(&self, right_side: &[f64]) -> Vec<f64> {
        let mut solution = vec![0.0; right_side.len()];
        let size = self.row.iter().flatten().count();
        let mut column = Mat::<f64>::zeros(size, 1);
        for (row, &value) in self.row.iter().zip(right_side) {
            if let Some(row) = *row {
                column[(row, 0)] = value;
            }
        }
        match &self.factors {
            Factors::Empty => return solution,
            Factors::Cholesky(factors) => factors.solve_in_place(column.as_mut()),
            Factors::General(factors) => factors.solve_in_place(column.as_mut()),
        }
        for (row, value) in self.row.iter().zip(&mut solution) {
            if let Some(row) = *row {
                *value = column[(row, 0)];
            }
        }
        solution
    }

    fn flows_of_angles(&self, angle_rad: &[f64]) -> Vec<f64> {
        self.ends
            .iter()
            .enumerate()
            .map(|(line, &(from, to))| {
                if self.closed[line] {
                    self.susceptance_mw[line] * (angle_rad[from] - angle_rad[to])
                } else {
                    0.0
                }
            })
            .collect()
    }

    fn check_balance(&self, injection_mw: &[f64]) -> Result<(), DcError> {
        let mut sum_mw = vec![0.0; self.reference_bus.len()];
        for (&island, &injection) in self.island.iter().zip(injection_mw) {
            sum_mw[island] += injection;
        }
        for (island, &imbalance_mw) in sum_mw.iter().enumerate() {
            if imbalance_mw.abs() <= BALANCE_TOL_MW {
                continue;
            }
            return Err(DcError::Imbalance {
                bus: self.bus_names[self.reference_bus[island]].clone(),
                imbalance_mw,
            });
        }
        Ok(())
    }

    /// Island of each bus, numbered from 0 by lowest bus.
    pub fn island(&self) -> &[usize] {
        &self.island
    }

    /// Reference bus of each island.
    pub fn reference_bus(&self) -> &[usize] {
        &self.reference_bus
    }

    /// Lines in service.
    pub fn closed(&self) -> &[bool] {
        &self.closed
    }

    /// End buses of every line.
    pub fn line_ends(&self) -> &[(usize, usize)] {
        &self.ends
    }
}

fn check_length(what: &'static str, found: usize, expected: usize) -> Result<(), DcError> {
    if found == expected {
        return Ok(());
    }
    Err(DcError::Length { what, found, expected })
}

/// MW of flow per rad of angle across every line.
pub(crate) fn susceptances_mw(grid: &Grid) -> Result<Vec<f64>, DcError> {
    grid.lines
        .iter()
        .map(|line| {
            let susceptance_mw = grid.base_mva / line.reactance_pu;
            if susceptance_mw.is_finite() && susceptance_mw != 0.0 {
                Ok(susceptance_mw)
            } else {
                Err(DcError::Reactance { line: line.name.clone(), reactance_pu: line.reactance_pu })
            }
        })
        .collect()
}

#[cfg(test)]
#[path = "dc_tests.rs"]
mod tests;
