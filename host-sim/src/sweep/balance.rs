//! What runs today, at rest: droop, area control error, proportional balancing.
//!
//! Contract: after each of these the injections of every live island add up to
//! zero. Whatever units can not do within a band of frequency is done by relays:
//! load is taken off, or units are cut, in proportion, and load so lost stays lost.
//! Source: area control error after N. Cohn (see `crate::baseline`); proportional
//! balancing is the usual rule of published DC cascade models, from memory.

use super::prepare::is_tie;
use super::state::State;
use crate::case::model::{Unit, UnitStatus};

/// Relays act where droop would need more than this share of nominal frequency
/// (1 Hz at 50 Hz: about where under-frequency relays start; common practice).
pub const BAND_SHARE: f64 = 0.02;

/// Halvings of the frequency search: below rounding.
const HALVINGS: usize = 80;

/// Cycle that caps a unit's part in the area's request, s (as the closed-loop baseline).
const CYCLE_S: f64 = 4.0;

/// Governor droop around the set-points, in every live island.
pub fn droop(state: &mut State, setpoint_mw: &[f64]) {
    for island in 0..state.islands {
        droop_island(state, island, setpoint_mw);
    }
}

/// Droop in one island.
pub fn droop_island(state: &mut State, island: usize, setpoint_mw: &[f64]) {
    let grid = &state.case.grid;
    let units = live_units(state, island);
    let served = state.served_mw();
    let buses: Vec<usize> =
        (0..grid.buses.len()).filter(|&b| state.island[b] == Some(island)).collect();
    let load_mw: f64 = buses.iter().map(|&b| served[b]).sum();
    let mut damping = vec![0.0; grid.buses.len()];
    for &bus in &buses {
        let b = &grid.buses[bus];
        damping[bus] = b.damping_mw_per_hz + served[bus] * b.load_damping / grid.nominal_hz;
    }
    for &unit in &units {
        let u = &grid.units[unit];
        damping[u.bus] += u.damping_pu * u.rating_mva / grid.nominal_hz;
    }
    let total_damping: f64 = damping.iter().sum();
    let output = |unit: usize, freq_hz: f64| {
        let u = &grid.units[unit];
        let wanted = setpoint_mw[unit] - governor_mw_per_hz(u, grid.nominal_hz) * freq_hz;
        wanted.min(u.emergency_max_mw).max(u.emergency_min_mw)
    };
    let surplus = |freq_hz: f64| {
        units.iter().map(|&u| output(u, freq_hz)).sum::<f64>() - load_mw - total_damping * freq_hz
    };
    let band_hz = BAND_SHARE * grid.nominal_hz;
    let freq_hz = find_zero(&surplus, band_hz);
    let left_mw = surplus(freq_hz);
    let outputs: Vec<f64> = units.iter().map(|&u| output(u, freq_hz)).collect();
    for (&unit, output_mw) in units.iter().zip(outputs) {
        state.output_mw[unit] = output_mw;
    }
    for &bus in &buses {
        state.relief_mw[bus] = -damping[bus] * freq_hz;
    }
    state.freq_dev_hz[island] = freq_hz;
    relays(state, island, left_mw);
}

/// Zero of a falling function within +-band, or the end of the band.
fn find_zero(surplus: &dyn Fn(f64) -> f64, band_hz: f64) -> f64 {
    if surplus(0.0).abs() < 1e-9 {
        return 0.0;
    }
    let (mut low, mut high) = (-band_hz, band_hz);
    if surplus(low) <= 0.0 {
        return low;
    }
    if surplus(high) >= 0.0 {
        return high;
    }
    for _ in 0..HALVINGS {
        let middle = 0.5 * (low + high);
        if surplus(middle) > 0.0 {
            low = middle;
        } else {
            high = middle;
        }
    }
    0.5 * (low + high)
}

/// Take off load, or cut units, in proportion, for what is left of a surplus.
pub fn relays(state: &mut State, island: usize, surplus_mw: f64) {
    if surplus_mw > 0.0 {
        let units = live_units(state, island);
        let total: f64 = units.iter().map(|&u| state.output_mw[u].max(0.0)).sum();
        if total > 0.0 {
            let keep = (1.0 - surplus_mw / total).max(0.0);
            for u in units {
                // A storage that charges goes on charging.
                state.output_mw[u] = (state.output_mw[u] * keep).max(state.output_mw[u].min(0.0));
            }
        }
    } else if surplus_mw < 0.0 {
        let served = state.served_mw();
        let buses: Vec<usize> = (0..served.len())
            .filter(|&b| state.island[b] == Some(island) && served[b] > 0.0)
            .collect();
        let total: f64 = buses.iter().map(|&b| served[b]).sum();
        if total > 0.0 {
            let share = -surplus_mw / total;
            buses.iter().for_each(|&b| state.lost_mw[b] += share * served[b]);
        }
    }
}

/// Droop plus area control error: set-points bring each area's net export back to
/// schedule within its units' normal ranges; what is left is droop's.
pub fn area_control_error(state: &mut State) {
    let setpoint = area_control_setpoints_mw(state);
    state.relief_mw.fill(0.0);
    droop(state, &setpoint);
}

/// Set-points that area control error comes to, in MW.
pub fn area_control_setpoints_mw(state: &State) -> Vec<f64> {
    let grid = &state.case.grid;
    let served = state.served_mw();
    let mut setpoint: Vec<f64> = grid.units.iter().map(|u| u.base_mw).collect();
    for island in 0..state.islands {
        let units = live_units(state, island);
        for area in 0..grid.areas.len() {
            let here =
                |bus: usize| state.island[bus] == Some(island) && grid.buses[bus].area == area;
            let load_mw: f64 = (0..served.len()).filter(|&b| here(b)).map(|b| served[b]).sum();
            let export_mw: f64 = (0..grid.lines.len())
                .filter(|&l| still_joins(state, l))
                .map(|l| {
                    let l_data = &grid.lines[l];
                    let out = f64::from(u8::from(here(l_data.from)))
                        - f64::from(u8::from(here(l_data.to)));
                    out * state.case.schedule_mw[l]
                })
                .sum();
            let own: Vec<usize> =
                units.iter().copied().filter(|&u| here(grid.units[u].bus)).collect();
            let given: f64 = own.iter().map(|&u| setpoint[u]).sum();
            share(grid.units.as_slice(), &own, load_mw + export_mw - given, &mut setpoint);
        }
    }
    setpoint
}

/// A tie's schedule counts while its ends are in one island; one that split the
/// system is struck by the control rooms. Open ties inside one island keep theirs.
fn still_joins(state: &State, line: usize) -> bool {
    let grid = &state.case.grid;
    let l = &grid.lines[line];
    is_tie(grid, line)
        && state.island[l.from].is_some()
        && state.island[l.from] == state.island[l.to]
}

/// Divide a request among units by ramp, inside their normal ranges.
fn share(units: &[Unit], own: &[usize], request_mw: f64, setpoint: &mut [f64]) {
    let weight = |u: usize| match units[u].status {
        UnitStatus::Available => units[u].ramp_mw_per_s.min(units[u].rating_mva / CYCLE_S).max(0.0),
        UnitStatus::Fixed | UnitStatus::Off => 0.0,
    };
    let mut free: Vec<usize> = own.iter().copied().filter(|&u| weight(u) > 0.0).collect();
    let mut left = request_mw;
    // Each pass fills at least one unit or places all that is left.
    for _ in 0..=own.len() {
        let total: f64 = free.iter().map(|&u| weight(u)).sum();
        if total <= 0.0 || left.abs() < 1e-12 {
            return;
        }
        let before = left;
        let mut next = Vec::new();
        for &u in &free {
            let wanted = setpoint[u] + before * weight(u) / total;
            let end = if before > 0.0 {
                units[u].max_mw.max(setpoint[u])
            } else {
                units[u].min_mw.min(setpoint[u])
            };
            let within = if before > 0.0 { wanted.min(end) } else { wanted.max(end) };
            left -= within - setpoint[u];
            setpoint[u] = within;
            if within == wanted {
                next.push(u);
            }
        }
        free = next;
    }
}

/// Scale each island's units to its load; load is lost in proportion where they can not.
pub fn proportional(state: &mut State) {
    state.relief_mw.fill(0.0);
    for island in 0..state.islands {
        proportional_island(state, island);
    }
}

/// Proportional balancing of one island.
pub fn proportional_island(state: &mut State, island: usize) {
    let grid = &state.case.grid;
    let served = state.served_mw();
    let load_mw: f64 =
        (0..served.len()).filter(|&b| state.island[b] == Some(island)).map(|b| served[b]).sum();
    let units = live_units(state, island);
    let output: f64 = units.iter().map(|&u| state.output_mw[u]).sum();
    let missing = load_mw - output;
    if missing <= 0.0 {
        return relays(state, island, -missing);
    }
    let room: Vec<f64> =
        units.iter().map(|&u| (grid.units[u].max_mw - state.output_mw[u]).max(0.0)).collect();
    let total: f64 = room.iter().sum();
    let used = missing.min(total);
    if total > 0.0 {
        units.iter().zip(&room).for_each(|(&u, room)| state.output_mw[u] += used * room / total);
    }
    relays(state, island, used - missing);
}

/// Units in service in an island.
pub fn live_units(state: &State, island: usize) -> Vec<usize> {
    let grid = &state.case.grid;
    (0..grid.units.len())
        .filter(|&u| state.unit_in[u] && state.island[grid.units[u].bus] == Some(island))
        .collect()
}

/// MW per Hz of a unit's governor; 0 without one.
fn governor_mw_per_hz(unit: &Unit, nominal_hz: f64) -> f64 {
    match unit.droop_percent {
        Some(percent) if percent > 0.0 => unit.rating_mva * 100.0 / (percent * nominal_hz),
        _ => 0.0,
    }
}
