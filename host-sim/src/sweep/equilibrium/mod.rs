//! Where the stewards come to rest: the law's own programme, solved exactly.
//!
//! Contract: [`settle`] finds the least rungs at which every limit can be met
//! within half of what a steward must prove, and the optimum of the stewards'
//! cost there. An area is short when it can not meet its limits at `keep` alone
//! with every tie at schedule; short areas go down together until the whole grid
//! fits, then each climbs as far as it can. Where nothing fits, the law misses
//! limits at a price per pu (its duals are clamped) and relays take the balance.
//! Data flow: `pieces` (who is there) -> `problem` (variables and rows) ->
//! `quadratic` -> set-points and sheds in the [`State`].
//! The ranges, prices and rows are those of `crate::judge`, without a line of
//! its code and with another method, so that each can be held against the other.

mod pieces;
mod problem;

use super::balance::droop_island;
use super::state::State;
use crate::case::defaults;
use crate::case::model::StewardSettings;
use crate::grid::dc::DcError;
use pieces::{Pieces, Role};
use problem::{Found, Scope, Setting, Strictness};

/// An island is in balance within this, in MW: rounding.
const EXACT_MW: f64 = 1e-7;

/// What the stewards come to.
#[derive(Clone, Debug, PartialEq)]
pub struct Rest {
    /// Rung of each area.
    pub rung: Vec<u8>,
    /// Whether limits are missed even at the lowest rungs allowed.
    pub beyond: bool,
}

/// Bring the state to the stewards' equilibrium.
///
/// Islands without any area's main piece are left to governor droop.
/// Errors: a failed solve of the network.
pub fn settle(state: &mut State) -> Result<Rest, DcError> {
    let settings = defaults::steward(state.case.grid.base_mva);
    let pieces = Pieces::of(state);
    let (rest, found) = search(state, &pieces, &settings)?;
    adopt(state, &pieces, &found);
    Ok(rest)
}

/// Rungs, and the optimum at them.
fn search(
    state: &State,
    pieces: &Pieces,
    settings: &StewardSettings,
) -> Result<(Rest, Found), DcError> {
    let areas = state.case.grid.areas.len();
    let at = |rungs: &[u8]| {
        let setting = Setting { state, pieces, rungs, settings };
        problem::solve_within(&setting, Scope::Whole, threshold_pu(state, settings))
    };
    let mut rungs = vec![0; areas];
    if let Some(found) = at(&rungs)? {
        return Ok((Rest { rung: rungs, beyond: false }, found));
    }
    let short = short_areas(state, pieces, settings)?;
    let lowest = |area: usize| state.case.grid.areas[area].lowest_rung.min(3);
    let mut best = None;
    for rung in 1..=3 {
        short.iter().for_each(|&a| rungs[a] = rung.min(lowest(a)));
        best = at(&rungs)?;
        if best.is_some() {
            break;
        }
    }
    let Some(mut found) = best else {
        let setting = Setting { state, pieces, rungs: &rungs, settings };
        let found = problem::solve(&setting, Scope::Whole, Strictness::Priced)?;
        return Ok((Rest { rung: rungs, beyond: true }, found.unwrap_or_default()));
    };
    for &area in &short {
        while rungs[area] > 0 {
            rungs[area] -= 1;
            match at(&rungs)? {
                Some(better) => found = better,
                None => {
                    rungs[area] += 1;
                    break;
                }
            }
        }
    }
    Ok((Rest { rung: rungs, beyond: false }, found))
}

/// Half of what a steward must prove before it gives ground.
fn threshold_pu(state: &State, settings: &StewardSettings) -> f64 {
    settings.proof_threshold_mw / 2.0 / state.case.grid.base_mva
}

/// Areas that can not meet their limits at `keep` alone; all with a main piece if none is found.
fn short_areas(
    state: &State,
    pieces: &Pieces,
    settings: &StewardSettings,
) -> Result<Vec<usize>, DcError> {
    let areas = state.case.grid.areas.len();
    let keep = vec![0; areas];
    let setting = Setting { state, pieces, rungs: &keep, settings };
    let mut short = Vec::new();
    let present: Vec<usize> = (0..areas).filter(|&a| pieces.first_bus[a].is_some()).collect();
    for &area in &present {
        let by = threshold_pu(state, settings);
        if problem::solve_within(&setting, Scope::Area(area), by)?.is_none() {
            short.push(area);
        }
    }
    Ok(if short.is_empty() { present } else { short })
}

fn adopt(state: &mut State, pieces: &Pieces, found: &Found) {
    let grid = &state.case.grid;
    state.relief_mw.fill(0.0);
    for &(unit, output_mw) in &found.unit_mw {
        state.output_mw[unit] = output_mw;
    }
    for &(feeder, shed_mw) in &found.shed_mw {
        state.shed_mw[feeder] = shed_mw;
    }
    let setpoint_mw = state.output_mw.clone();
    let base_mw: Vec<f64> = grid.units.iter().map(|u| u.base_mw).collect();
    for island in 0..state.islands {
        let here = |b: usize| state.island[b] == Some(island);
        let governed = (0..grid.buses.len()).any(|b| here(b) && pieces.role[b] == Role::Main);
        let injection = state.injection_mw();
        let surplus_mw: f64 = (0..injection.len()).filter(|&b| here(b)).map(|b| injection[b]).sum();
        if !governed {
            droop_island(state, island, &base_mw);
        } else if surplus_mw.abs() > EXACT_MW {
            // What the stewards need not or can not balance is the governors'.
            droop_island(state, island, &setpoint_mw);
        }
    }
}
