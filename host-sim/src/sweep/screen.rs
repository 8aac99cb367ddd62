//! Which pairs of lines can matter, by outage factors.
//!
//! Contract: a pair is screened out only if, with every set-point where it is,
//! the exact DC flows after both outages (outage factors of the two lines on each
//! other included) are within the ratings, nothing islands, and the base point
//! still meets what stewards hold, if they are swept (ties on schedule; mid-angles
//! of ties on a loop of areas). The base point is then the rest point of every scheme: no unit
//! moves, no load is lost, the cascade has one stage. So nothing that could
//! matter is left out, and the count says how much was.
//! Cost: one solve per line, then about one pass over the lines per pair.
//! Source: double outages from transfer factors, as Wood and Wollenberg, "Power
//! Generation, Operation and Control", from memory.

use super::outage::Outage;
use super::prepare::{Prepared, is_tie};
use super::state::Network;
use crate::grid::dc::DcError;
use crate::grid::graph::blocks;

/// Flows this far inside a rating count as within it, share: rounding of the factors.
const WITHIN_SHARE: f64 = 1.0 - 1e-6;
/// Ties and mid-angles count as unmoved within this, in MW.
const UNMOVED_MW: f64 = 1e-4;
/// Below this the pair islands (or is too near it to divide by).
const ISLANDS: f64 = 1e-6;

/// What screening leaves.
#[derive(Clone, Debug, PartialEq)]
pub struct Screened {
    /// Pairs that can matter in at least one case, in order.
    pub pairs: Vec<Outage>,
    /// Pairs looked at.
    pub looked_at: usize,
}

impl Screened {
    /// Pairs screened out.
    pub fn screened_out(&self) -> usize {
        self.looked_at - self.pairs.len()
    }
}

/// Why leaving out is safe, in a sentence for the report.
pub const WHY_SAFE: &str = "left out only where the exact DC flows after both outages stay within every rating with all set-points unmoved, nothing islands and ties and mid-angles stay as agreed: the base point is then the rest point of every scheme, so the pair moves nothing and loses nothing";

/// Screen all pairs of lines in service; `cases` are the factors of one form.
///
/// `stewards` says whether ties and mid-angles have to stay as agreed too: without
/// stewards in the sweep nobody holds a single tie, and net exchanges do not change.
///
/// Errors: a failed solve.
pub fn pairs(cases: &[&Prepared], stewards: bool) -> Result<Screened, DcError> {
    let Some(first) = cases.first() else {
        return Ok(Screened { pairs: Vec::new(), looked_at: 0 });
    };
    let factors = Factors::new(first)?;
    let lines: Vec<usize> =
        (0..first.grid.lines.len()).filter(|&l| first.grid.lines[l].closed).collect();
    let mut out = Screened { pairs: Vec::new(), looked_at: 0 };
    for (place, &a) in lines.iter().enumerate() {
        for &b in &lines[place + 1..] {
            out.looked_at += 1;
            if cases.iter().any(|case| factors.matters(case, a, b, stewards)) {
                out.pairs.push(Outage::Lines(a, b));
            }
        }
    }
    Ok(out)
}

/// Flow in every line per MW brought across each line, and mid-angles of meshed ties.
struct Factors {
    transfer: Vec<Vec<f64>>,
    mid: Vec<Vec<f64>>,
    meshed: Vec<usize>,
    ties: Vec<usize>,
    bridge: Vec<bool>,
}

impl Factors {
    fn new(case: &Prepared) -> Result<Self, DcError> {
        let grid = &case.grid;
        let closed: Vec<bool> = grid.lines.iter().map(|l| l.closed).collect();
        let network = Network::new(grid, &closed)?;
        let meshed: Vec<usize> = (0..closed.len()).filter(|&l| case.meshed[l]).collect();
        let (mut transfer, mut mid) = (Vec::new(), Vec::new());
        for l in &grid.lines {
            let mut at = vec![0.0; grid.buses.len()];
            at[l.from] += 1.0;
            at[l.to] -= 1.0;
            let angle = network.dc.angles_rad(&at)?;
            let half = |&tie: &usize| {
                let t = &grid.lines[tie];
                0.5 * grid.base_mva / t.reactance_pu * (angle[t.from] + angle[t.to])
            };
            mid.push(meshed.iter().map(half).collect());
            transfer.push(super::state::flows_mw(grid, &closed, &angle));
        }
        let ends = crate::grid::line_ends(grid);
        let bridge = blocks(grid.buses.len(), &ends, &closed).is_bridge;
        let ties = (0..closed.len()).filter(|&l| is_tie(grid, l) && closed[l]).collect();
        Ok(Self { transfer, mid, meshed, ties, bridge })
    }

    /// Whether the pair can do anything at all in a case.
    fn matters(&self, case: &Prepared, a: usize, b: usize, stewards: bool) -> bool {
        if self.bridge[a] || self.bridge[b] {
            return true;
        }
        let Some((ta, tb)) = self.transfers(case, a, b) else { return true };
        let after =
            |l: usize| case.base_flow_mw[l] + self.transfer[a][l] * ta + self.transfer[b][l] * tb;
        let over = (0..case.grid.lines.len()).any(|l| {
            l != a
                && l != b
                && case.grid.lines[l].closed
                && after(l).abs() > WITHIN_SHARE * case.grid.lines[l].rating_mw
        });
        let off_schedule =
            |l: usize| l == a || l == b || (after(l) - case.schedule_mw[l]).abs() > UNMOVED_MW;
        over || stewards
            && (self.ties.iter().any(|&l| off_schedule(l)) || self.mid_angles_move(ta, tb, a, b))
    }

    /// Transfers across both lines that stand for their outage: a two by two system.
    fn transfers(&self, case: &Prepared, a: usize, b: usize) -> Option<(f64, f64)> {
        let (paa, pbb) = (1.0 - self.transfer[a][a], 1.0 - self.transfer[b][b]);
        let (pab, pba) = (self.transfer[b][a], self.transfer[a][b]);
        let determinant = paa * pbb - pab * pba;
        if determinant.abs() < ISLANDS {
            return None;
        }
        let (fa, fb) = (case.base_flow_mw[a], case.base_flow_mw[b]);
        Some(((pbb * fa + pab * fb) / determinant, (pba * fa + paa * fb) / determinant))
    }

    fn mid_angles_move(&self, ta: f64, tb: f64, a: usize, b: usize) -> bool {
        (0..self.meshed.len())
            .any(|m| (self.mid[a][m] * ta + self.mid[b][m] * tb).abs() > UNMOVED_MW)
    }
}
