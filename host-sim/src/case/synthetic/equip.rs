//! Loads, units and feeders of a laid-out grid.
//!
//! Contract: two buses in three have load; about one in five has a unit, at least
//! one per area; generation equals load; an area's surplus is within about a fifth
//! of its load; every area has feeders at rung `shed`.

use super::{Draw, rounded};
use crate::case::defaults;
use crate::case::model::{
    Feeder, FeederKind, Grid, OnSilence, Restore, Unit, UnitKind, UnitStatus,
};

/// Share of the buses that have load.
const LOADED: f64 = 0.65;
/// Share of the buses that have a unit.
const FED: f64 = 0.18;
/// Largest surplus or deficit of an area as a share of its load, up to 30 buses.
const SURPLUS: f64 = 0.2;
/// Share of the loaded buses that have a feeder, and of their load that it carries.
const FEEDERS: (f64, f64) = (0.4, 0.3);

/// Equip it.
pub(super) fn equip(grid: &mut Grid, draw: &mut Draw) {
    load(grid, draw);
    let mut wanted_mw = area_targets_mw(grid, draw);
    let total_mw: f64 = grid.buses.iter().map(|bus| bus.load_mw).sum();
    let scale = total_mw / wanted_mw.iter().sum::<f64>();
    wanted_mw.iter_mut().for_each(|target| *target *= scale);
    for (area, wanted_mw) in wanted_mw.into_iter().enumerate() {
        feed(grid, area, wanted_mw, draw);
    }
    // Base points are rounded to a tenth; the last unit takes up what that leaves.
    let given_mw: f64 = grid.units.iter().map(|unit| unit.base_mw).sum();
    if let Some(unit) = grid.units.iter_mut().max_by(|a, b| a.base_mw.total_cmp(&b.base_mw)) {
        unit.base_mw = rounded(unit.base_mw + total_mw - given_mw, 1);
    }
    feeders(grid, draw);
}

fn load(grid: &mut Grid, draw: &mut Draw) {
    for bus in &mut grid.buses {
        let has = draw.share() < LOADED;
        // A product of two draws is small as a rule and large at times, as loads are.
        let size_mw = 4.0 + 160.0 * draw.share() * draw.share();
        bus.load_mw = if has { rounded(size_mw, 1) } else { 0.0 };
    }
    for area in 0..grid.areas.len() {
        let here = |bus: &&mut crate::case::model::Bus| bus.area == area;
        if grid.buses.iter().filter(|bus| bus.area == area).all(|bus| bus.load_mw == 0.0)
            && let Some(bus) = grid.buses.iter_mut().find(here)
        {
            bus.load_mw = 40.0;
        }
    }
}

fn area_targets_mw(grid: &Grid, draw: &mut Draw) -> Vec<f64> {
    (0..grid.areas.len())
        .map(|area| {
            let own = || grid.buses.iter().filter(|bus| bus.area == area);
            let share = SURPLUS * (30.0 / own().count() as f64).sqrt().min(1.0);
            own().map(|bus| bus.load_mw).sum::<f64>() * draw.within(1.0 - share, 1.0 + share)
        })
        .collect()
}

/// Share an area's generation among units at buses of its own.
fn feed(grid: &mut Grid, area: usize, target_mw: f64, draw: &mut Draw) {
    let own: Vec<usize> =
        (0..grid.buses.len()).filter(|&bus| grid.buses[bus].area == area).collect();
    let mut at: Vec<usize> = own.iter().copied().filter(|_| draw.share() < FED).collect();
    if at.is_empty() {
        at.push(own[draw.below(own.len())]);
    }
    let weights: Vec<f64> = at.iter().map(|_| draw.within(0.3, 1.7)).collect();
    let total: f64 = weights.iter().sum();
    for (bus, weight) in at.into_iter().zip(weights) {
        let base_mw = rounded(target_mw * weight / total, 1).max(0.2);
        let name = format!("U{}", grid.units.len() + 1);
        grid.units.push(unit(name, bus, base_mw, draw));
    }
}

fn unit(name: String, bus: usize, base_mw: f64, draw: &mut Draw) -> Unit {
    let kinds = [
        (0.35, UnitKind::Steam),
        (0.60, UnitKind::Gas),
        (0.85, UnitKind::Hydro),
        (1.0, UnitKind::Wind),
    ];
    let point = draw.share();
    let kind = kinds.iter().find(|(up_to, _)| point < *up_to).map_or(UnitKind::Gas, |k| k.1);
    let usual = defaults::of_kind(kind);
    // Room of a tenth of a megawatt for the unit that takes up the rounding.
    let max_mw = (base_mw * draw.within(1.15, 1.5)).ceil() + 5.0;
    let steady = matches!(kind, UnitKind::Steam | UnitKind::Gas);
    let min_mw = if steady { (0.3 * base_mw).floor() } else { 0.0 };
    Unit {
        name,
        bus,
        kind,
        status: UnitStatus::Available,
        rating_mva: max_mw,
        base_mw,
        min_mw,
        max_mw,
        emergency_min_mw: min_mw,
        emergency_max_mw: rounded(max_mw * 1.05, 1),
        reserve_up_mw: rounded(0.2 * (max_mw - base_mw), 1),
        reserve_down_mw: 0.0,
        ramp_mw_per_s: usual.ramp_percent_per_s / 100.0 * max_mw,
        cost_per_pu2: defaults::cost_per_pu2(kind, max_mw, 100.0),
        inertia_s: usual.inertia_s,
        droop_percent: usual.droop_percent,
        damping_pu: usual.damping_pu,
        lag_s: usual.lag_s,
        energy_mwh: None,
        energy_start: defaults::ENERGY_START,
        forms_grid: usual.forms_grid,
        may_trip: false,
        gain_error: 0.0,
        bias_mw: 0.0,
        on_silence: OnSilence::Schedule,
    }
}

fn feeders(grid: &mut Grid, draw: &mut Draw) {
    let mut served = vec![false; grid.areas.len()];
    for bus in 0..grid.buses.len() {
        let (area, load_mw) = (grid.buses[bus].area, grid.buses[bus].load_mw);
        let drawn = draw.share() < FEEDERS.0;
        let feeder_mw = rounded(load_mw * FEEDERS.1, 1);
        if feeder_mw < 1.0 || (served[area] && !drawn) {
            continue;
        }
        served[area] = true;
        grid.feeders.push(Feeder {
            name: format!("F{}", grid.feeders.len() + 1),
            bus,
            load_mw: feeder_mw,
            kind: if draw.share() < 0.7 { FeederKind::Continuous } else { FeederKind::Switched },
            restore: Restore::Operator,
            price_per_pu: defaults::SHED_PRICE_PER_PU,
        });
    }
}
