//! An operator who moves every unit at once, some minutes after the outage.
//!
//! Contract: starts from where area control error came to rest; each available
//! unit may go as far as its ramp allows in the time, inside its normal range;
//! no load is shed; ties need not keep schedule. The operator is taken to know
//! everything and to find the least movement that meets the ratings; limits that
//! can not be met are missed by as little as the prices make it.
//! Lines are taken to stand their overload for that long, which flatters it.

use std::rc::Rc;

use super::quadratic::Quadratic;
use super::state::{State, flows_mw};
use crate::case::model::UnitStatus;
use crate::grid::dc::DcError;

/// Price per pu of missing a rating.
const MISS_PRICE: f64 = 2000.0;
/// Curvature of a miss.
const MISS_CURVATURE: f64 = 1.0;
/// A rating is broken beyond this, in pu.
const LIMIT_TOL: f64 = 1e-7;
/// Lines added per round.
const LINES_PER_ROUND: usize = 6;

/// Move the units.
///
/// Errors: a failed solve of the network.
pub fn redispatch(state: &mut State, minutes: f64) -> Result<(), DcError> {
    state.find_flows()?;
    if super::cascade::overloaded(state).is_empty() {
        return Ok(());
    }
    let grid = &state.case.grid;
    let base = grid.base_mva;
    let mut program = Quadratic::default();
    let mut units = Vec::new();
    for (unit, u) in grid.units.iter().enumerate() {
        if !state.unit_in[unit] || u.status != UnitStatus::Available {
            continue;
        }
        let (now, reach) = (state.output_mw[unit], u.ramp_mw_per_s * 60.0 * minutes);
        let low = (now - reach).max(u.min_mw).min(now);
        let high = (now + reach).min(u.max_mw).max(now);
        let curve = u.cost_per_pu2;
        // Variables are movements from where the unit is.
        program.add_variable(curve, 0.0, (low - now) / base, (high - now) / base);
        units.push(unit);
    }
    for island in 0..state.islands {
        let row = units
            .iter()
            .map(|&u| f64::from(u8::from(state.island[grid.units[u].bus] == Some(island))));
        program.add_row(row.collect(), 0.0, 0.0);
    }
    let mut added = vec![false; grid.lines.len()];
    loop {
        if program.settle().is_err() {
            return Ok(()); // nothing can move: where it was
        }
        if !add_broken(state, &units, &mut program, &mut added)? {
            break;
        }
    }
    for (&unit, moved) in units.iter().zip(program.values()) {
        state.output_mw[unit] += moved * base;
    }
    Ok(())
}

fn add_broken(
    state: &State,
    units: &[usize],
    program: &mut Quadratic,
    added: &mut [bool],
) -> Result<bool, DcError> {
    let grid = &state.case.grid;
    let mut injection = state.injection_mw();
    for (&unit, moved) in units.iter().zip(program.values()) {
        injection[grid.units[unit].bus] += moved * grid.base_mva;
    }
    let flow = flows_mw(grid, &state.closed, &state.network.dc.angles_rad(&injection)?);
    let mut broken: Vec<(f64, usize)> = (0..flow.len())
        .filter(|&l| state.closed[l] && !added[l])
        .map(|l| ((flow[l].abs() - grid.lines[l].rating_mw) / grid.base_mva, l))
        .filter(|(over, _)| *over > LIMIT_TOL)
        .collect();
    broken.sort_by(|a, b| b.0.total_cmp(&a.0).then(a.1.cmp(&b.1)));
    broken.truncate(LINES_PER_ROUND);
    for &(_, line) in &broken {
        added[line] = true;
        let by_bus = Rc::clone(&state.network.flow_row(grid, line)?);
        let mut row: Vec<f64> = units.iter().map(|&u| by_bus[grid.units[u].bus]).collect();
        let moved: f64 = row.iter().zip(program.values()).map(|(r, x)| r * x).sum();
        let now = flow[line] / grid.base_mva - moved;
        for sign in [1.0, -1.0] {
            let miss = program.add_variable(MISS_CURVATURE, MISS_PRICE, 0.0, f64::INFINITY);
            row.resize(miss + 1, 0.0);
            row[miss] = sign;
        }
        let rating = grid.lines[line].rating_mw / grid.base_mva;
        program.add_row(row, -rating - now, rating - now);
    }
    Ok(!broken.is_empty())
}
