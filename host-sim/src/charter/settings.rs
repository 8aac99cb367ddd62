//! Settings of the law: defaults, each with its formula, as per-tick figures.

use super::Area;
use crate::case::model::{Grid, Play, UnitKind, UnitStatus};
use hedgerow_protocol::charter::Settings;

/// Time constant of the innovation envelopes, s: as the filter's default.
const ENVELOPE_S: f64 = 2.0;
/// Inner iterations that a round of the neighbours' agreement needs: with fewer
/// the bids are not yet optimal and the rounds stall (measured: 20 stalls, 100 does not).
const ITERATIONS_PER_ROUND: f64 = 100.0;
/// A neighbour is gone after this long without a word, s.
const NEIGHBOUR_S: f64 = 2.0;
/// Proofs under what neighbours deliver must persist this long, s.
const PERSIST_S: f64 = 10.0;
/// A climb needs a witness for this long, s.
const CLIMB_S: f64 = 5.0;
/// Ticks in a row for which a proof must stand.
const PROOF_TICKS: u16 = 5;
/// Load returns at most at this share of the units' ramps, so that they can follow.
const RETURN_SHARE: f64 = 0.5;
/// Price curvature of a tie deviation and of a mid-tie angle deviation at each end,
/// per pu squared: small, so that the price decides.
pub const TIE_CURVATURE: f64 = 0.05;

pub(super) fn per_tick(grid: &Grid, play: &Play, area: &Area) -> Settings {
    let (tick_s, s) = (play.run.tick_s, &play.steward);
    let ticks = |seconds: f64| (seconds / tick_s).round().clamp(1.0, 60_000.0) as u16;
    let load_mw: f64 = area.buses.iter().map(|&bus| grid.buses[bus].load_mw).sum();
    let damping_mw_per_hz = s.assumed_load_damping * load_mw / grid.nominal_hz;
    let per_base = 1.0 / grid.base_mva;
    Settings {
        tick_s: tick_s as f32,
        iterations: s.iterations,
        shadow_iterations: s.shadow_iterations,
        filter_gain: (1.0 - (-tick_s / s.filter_s).exp()) as f32,
        envelope_keep: (-tick_s / ENVELOPE_S).exp() as f32,
        freeze_ticks: (s.event_freeze_s / tick_s).round().clamp(0.0, 60_000.0) as u16,
        damping_pu_per_hz: (damping_mw_per_hz * per_base) as f32,
        lowest_rung: grid.areas[area.index].lowest_rung,
        tie_band: (s.tie_band_mw * per_base) as f32,
        angle_band: (2.0 * s.tie_band_mw * per_base) as f32,
        tie_price: s.tie_price_per_pu as f32,
        tie_curvature: TIE_CURVATURE as f32,
        agreement_penalty: 5.0,
        agreement_relax: 0.5,
        settle_ticks: (ITERATIONS_PER_ROUND / f64::from(s.iterations)).ceil().max(1.0) as u16,
        help_hops: s.help_hops,
        neighbour_ticks: ticks(NEIGHBOUR_S),
        proof_threshold: (s.proof_threshold_mw * per_base) as f32,
        proof_ticks: PROOF_TICKS,
        persist_ticks: ticks(PERSIST_S),
        climb_ticks: ticks(CLIMB_S),
        climb_margin: 0.01,
        climb_tolerance: 0.002,
        dual_clamp: hedgerow_firmware::law::dual_clamp(reach(grid, area)),
        return_ramp: (RETURN_SHARE * ramps_mw_per_s(grid, area) * per_base) as f32,
        return_free_hz: 0.01,
    }
}

/// Largest range of a unit, pu, times the root of its cost's curvature.
fn reach(grid: &Grid, area: &Area) -> f32 {
    let units = area.units.iter().map(|&unit| &grid.units[unit]);
    let of = units.map(|unit| {
        let range_mw = unit.emergency_max_mw - unit.emergency_min_mw;
        range_mw / grid.base_mva * unit.cost_per_pu2.sqrt()
    });
    of.fold(0.0, f64::max) as f32
}

/// Sum of the ramps of the units that have one; storages would empty themselves.
fn ramps_mw_per_s(grid: &Grid, area: &Area) -> f64 {
    let units = area.units.iter().map(|&unit| &grid.units[unit]);
    units
        .filter(|unit| unit.kind != UnitKind::Battery && unit.status == UnitStatus::Available)
        .map(|unit| unit.ramp_mw_per_s.min(unit.rating_mva))
        .sum()
}
