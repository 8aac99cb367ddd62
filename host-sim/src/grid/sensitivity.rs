//! How flows answer to injections (PTDF) and to outages (LODF).
//!
//! Contract: factors hold for one set of closed lines. What the graph makes
//! zero is zero exactly: a line in another block than the outaged one has
//! outage factor 0; a bridge carries 0 or 1 of a transfer; a block that a
//! transfer does not pass carries none of it. A bridge has no outage factors,
//! it islands.
//!
//! Data flow: `Grid`, closed lines -> `DcNetwork` and `Blocks` -> columns on demand.
//! Source: outage factors from transfer factors after Wood and Wollenberg,
//! "Power Generation, Operation and Control", ch. on security, from memory.

use super::dc::{DcError, DcNetwork};
use super::graph::{Blocks, blocks};
use crate::case::model::Grid;

/// A block that carries a transfer at all has a line with at least 1/lines of
/// it; below this the whole block carries none and the rest is rounding.
const NO_TRANSFER: f64 = 1e-9;

/// What the outage of a line does to the others.
#[derive(Clone, Debug, PartialEq)]
pub enum Outage {
    /// Flow gained by each line per MW the outaged line carried; the outaged
    /// line's own entry is -1, open lines have 0.
    Factors(Vec<f64>),
    /// The line is a bridge: its outage splits its island.
    Islands,
    /// The line is open already.
    Open,
}

/// Sensitivities of one topology.
pub struct Sensitivity {
    network: DcNetwork,
    blocks: Blocks,
}

impl Sensitivity {
    /// Prepare the factors of the closed lines.
    ///
    /// Errors: as [`DcNetwork::new`].
    pub fn new(grid: &Grid, closed: &[bool]) -> Result<Self, DcError> {
        let network = DcNetwork::new(grid, closed)?;
        let blocks = blocks(grid.buses.len(), network.line_ends(), closed);
        Ok(Self { network, blocks })
    }

    /// The factorised network behind the factors.
    pub fn network(&self) -> &DcNetwork {
        &self.network
    }

    /// Blocks and bridges of the closed lines.
    pub fn blocks(&self) -> &Blocks {
        &self.blocks
    }

    /// Flow in each line per MW injected at `bus` and taken at its island's reference bus.
    ///
    /// Shapes: one entry per line.
    /// Errors: a solve whose residual stays large.
    pub fn ptdf_column(&self, bus: usize) -> Result<Vec<f64>, DcError> {
        let reference = self.network.reference_bus()[self.network.island()[bus]];
        self.transfer_column(bus, reference)
    }

    /// Flow in each line per MW brought from bus `source` to bus `sink` of the same island.
    ///
    /// Errors: buses in two islands (as an imbalance), or a failed solve.
    pub fn transfer_column(&self, source: usize, sink: usize) -> Result<Vec<f64>, DcError> {
        let mut injection = vec![0.0; self.network.island().len()];
        injection[source] += 1.0;
        injection[sink] -= 1.0;
        let mut flow = self.network.flows_mw(&injection)?.flow_mw;
        self.make_exact(&mut flow);
        Ok(flow)
    }

    fn make_exact(&self, flow: &mut [f64]) {
        let mut largest = vec![0.0_f64; self.blocks.count];
        for (line, &value) in flow.iter().enumerate() {
            if let Some(block) = self.blocks.block_of_edge[line] {
                largest[block] = largest[block].max(value.abs());
            }
        }
        for (line, value) in flow.iter_mut().enumerate() {
            match self.blocks.block_of_edge[line] {
                None => *value = 0.0,
                Some(block) if largest[block] < NO_TRANSFER => *value = 0.0,
                Some(_) if self.blocks.is_bridge[line] => *value = value.round(),
                Some(_) => {}
            }
        }
    }

    /// Flows in every line after the outage of `line`, per MW it carried.
    ///
    /// Errors: a failed solve.
    pub fn outage(&self, line: usize) -> Result<Outage, DcError> {
        let Some(block) = self.blocks.block_of_edge[line] else {
            return Ok(Outage::Open);
        };
        if self.blocks.is_bridge[line] {
            return Ok(Outage::Islands);
        }
        let (from, to) = self.network.line_ends()[line];
        let mut factors = self.transfer_column(from, to)?;
        let rest = 1.0 - factors[line];
        for (other, factor) in factors.iter_mut().enumerate() {
            *factor =
                if self.blocks.block_of_edge[other] == Some(block) { *factor / rest } else { 0.0 };
        }
        factors[line] = -1.0;
        if factors.iter().all(|factor| factor.is_finite()) {
            Ok(Outage::Factors(factors))
        } else {
            Err(DcError::Singular)
        }
    }
}

#[cfg(test)]
#[path = "sensitivity_tests.rs"]
mod tests;
