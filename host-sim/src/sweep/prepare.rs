//! The grids a sweep runs on: form, ratings from a factor, feeders where there are none.
//!
//! Contract: every grid made here has the buses, lines and units of the file in
//! the file's order. With a rating factor each line gets the factor times the
//! largest base flow it carries in any form that is swept, at least the factor
//! times 5 % of the largest flow of all, so that every form starts within its
//! ratings and all forms have the same lines. Loads that nobody can shed stay so
//! unless a feeder share is given.

use super::{Form, SweepError};
use crate::case::defaults::SHED_PRICE_PER_PU;
use crate::case::model::{Feeder, FeederKind, Grid, Restore, UnitStatus};
use crate::grid::dc::DcNetwork;
use crate::grid::graph::blocks;

/// Lines with little base flow get the rating of this share of the largest flow.
pub const FLOOR_SHARE: f64 = 0.05;

/// A grid with its base case.
#[derive(Clone, Debug)]
pub struct Prepared {
    /// Which form it is.
    pub form: Form,
    /// Rating factor; none = ratings of the file.
    pub factor: Option<f64>,
    /// The grid.
    pub grid: Grid,
    /// Flow per line in the base case, in MW.
    pub base_flow_mw: Vec<f64>,
    /// Agreed flow per line in MW (0 for lines that are no ties).
    pub schedule_mw: Vec<f64>,
    /// Angle of each bus in the base case, in rad.
    pub base_angle_rad: Vec<f64>,
    /// Whether each line is a tie on a loop of areas.
    pub meshed: Vec<bool>,
}

/// The grid with these ties left open.
///
/// A tie left open keeps no schedule.
pub fn divided(grid: &Grid, open: &[usize]) -> Grid {
    let mut out = grid.clone();
    for line in &mut out.lines {
        // Agreed flows of the meshed grid do not fit the tree.
        line.schedule_mw = None;
    }
    for &line in open {
        out.lines[line].closed = false;
    }
    out
}

/// Make every bus's load sheddable by this share where the file lists no feeder at all.
pub fn with_feeders(grid: &Grid, share: f64) -> Grid {
    let mut out = grid.clone();
    if !out.feeders.is_empty() || share <= 0.0 {
        return out;
    }
    for (bus, data) in grid.buses.iter().enumerate().filter(|(_, b)| b.load_mw > 0.0) {
        out.feeders.push(Feeder {
            name: format!("load of {}", data.name),
            bus,
            load_mw: data.load_mw * share.min(1.0),
            kind: FeederKind::Continuous,
            restore: Restore::Operator,
            price_per_pu: SHED_PRICE_PER_PU,
        });
    }
    out
}

/// Whether a line joins two areas.
pub fn is_tie(grid: &Grid, line: usize) -> bool {
    grid.buses[grid.lines[line].from].area != grid.buses[grid.lines[line].to].area
}

/// Injection of each bus in the base case, in MW.
pub fn base_injection_mw(grid: &Grid) -> Vec<f64> {
    let mut injection: Vec<f64> = grid.buses.iter().map(|b| -b.load_mw).collect();
    for unit in grid.units.iter().filter(|u| u.status != UnitStatus::Off) {
        injection[unit.bus] += unit.base_mw;
    }
    injection
}

/// All grids of a sweep: factors outermost, then forms.
///
/// `forms` holds each form with its grid. An empty list of factors means the
/// ratings of the file.
/// Errors: a form without base case.
pub fn prepare(forms: &[(Form, Grid)], factors: &[f64]) -> Result<Vec<Prepared>, SweepError> {
    let mut bases = Vec::new();
    for (form, grid) in forms {
        bases.push(base_case(*form, grid)?);
    }
    if factors.is_empty() {
        return Ok(bases);
    }
    let largest: Vec<f64> = (0..bases.first().map_or(0, |b| b.grid.lines.len()))
        .map(|line| bases.iter().map(|b| b.base_flow_mw[line].abs()).fold(0.0, f64::max))
        .collect();
    let floor = FLOOR_SHARE * largest.iter().copied().fold(0.0, f64::max);
    let mut out = Vec::new();
    for &factor in factors {
        for base in &bases {
            let mut next = base.clone();
            next.factor = Some(factor);
            for (line, &flow) in next.grid.lines.iter_mut().zip(&largest) {
                line.rating_mw = factor * flow.max(floor);
            }
            out.push(next);
        }
    }
    Ok(out)
}

fn base_case(form: Form, grid: &Grid) -> Result<Prepared, SweepError> {
    let refuse = |why: String| SweepError::BaseCase { form: form.word(), why };
    let closed: Vec<bool> = grid.lines.iter().map(|l| l.closed).collect();
    let network = DcNetwork::new(grid, &closed).map_err(|e| refuse(e.to_string()))?;
    let mut injection = base_injection_mw(grid);
    spread_imbalance(grid, network.island(), &mut injection);
    let base = network.flows_mw(&injection).map_err(|e| refuse(e.to_string()))?;
    let schedule_mw = (0..grid.lines.len())
        .map(|l| match is_tie(grid, l) && grid.lines[l].closed {
            true => grid.lines[l].schedule_mw.unwrap_or(base.flow_mw[l]),
            false => 0.0,
        })
        .collect();
    Ok(Prepared {
        form,
        factor: None,
        grid: grid.clone(),
        schedule_mw,
        meshed: meshed_ties(grid),
        base_flow_mw: base.flow_mw,
        base_angle_rad: base.angle_rad,
    })
}

/// A file may be out of balance by 0.1 MW per island; it goes on the loads, as in the plant.
fn spread_imbalance(grid: &Grid, island: &[usize], injection: &mut [f64]) {
    let count = island.iter().max().map_or(0, |m| m + 1);
    for part in 0..count {
        let inside = || (0..island.len()).filter(|&b| island[b] == part);
        let off: f64 = inside().map(|b| injection[b]).sum();
        let load: f64 = inside().map(|b| grid.buses[b].load_mw).sum();
        if off.abs() <= 0.1 && load > 0.0 {
            inside().for_each(|b| injection[b] -= off * grid.buses[b].load_mw / load);
        }
    }
}

/// A tie is meshed when it is no bridge of the graph of areas.
fn meshed_ties(grid: &Grid) -> Vec<bool> {
    let ends: Vec<(usize, usize)> =
        grid.lines.iter().map(|l| (grid.buses[l.from].area, grid.buses[l.to].area)).collect();
    let closed: Vec<bool> =
        (0..ends.len()).map(|l| is_tie(grid, l) && grid.lines[l].closed).collect();
    let found = blocks(grid.areas.len(), &ends, &closed);
    (0..ends.len()).map(|l| closed[l] && !found.is_bridge[l]).collect()
}
