//! What a file may leave out, and why the value that stands in is plausible.
//!
//! Contract: every default is stated here and nowhere else; a file that states a
//! value is never overruled. Figures by unit kind are round handbook-order values
//! (from memory), meant for a first rehearsal, to be replaced by the plant's own.

use super::model::{Links, StewardSettings, UnitKind};

/// Power base in MVA: the customary one for transmission studies.
pub const BASE_MVA: f64 = 100.0;
/// Nominal frequency in Hz: the more common of the two.
pub const NOMINAL_HZ: f64 = 50.0;
/// Load change in per cent per per cent of frequency: 1 to 2 is customary; the
/// lower end leaves more to the units.
pub const LOAD_DAMPING: f64 = 1.0;
/// Energy of a storage at the start, share of full: room both ways.
pub const ENERGY_START: f64 = 0.5;
/// Price of shed load per pu. At least four times the dearest unit's marginal
/// cost at full stroke (a 150 MW battery: 8 per pu squared times 1.5 pu = 12).
pub const SHED_PRICE_PER_PU: f64 = 60.0;
/// Controller tick in s: slow against the swing (0.5 to 1.5 s periods), fast
/// against ramps.
pub const TICK_S: f64 = 0.1;
/// Plant step in s: a tenth of the tick shows the swing between ticks.
pub const PLANT_STEP_S: f64 = 0.01;
/// Seed of every random stream.
pub const SEED: u64 = 1;
/// Curvature of a converter storage's cost per pu squared: as dear as the
/// dearest generation at one pu, because its energy is short.
pub const BATTERY_COST_PER_PU2: f64 = 8.0;
/// Cost of generation per pu squared, for a weight of 1 and a rating of 1 pu.
pub const COST_SCALE: f64 = 6.0;

/// What a unit of a kind is like when the file does not say.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct KindDefaults {
    /// Ramp in per cent of the nameplate per second; infinite for none.
    pub ramp_percent_per_s: f64,
    /// Inertia constant in s on the nameplate.
    pub inertia_s: f64,
    /// Droop in per cent on the nameplate; none = no governor.
    pub droop_percent: Option<f64>,
    /// Damping in pu power per pu frequency on the nameplate.
    pub damping_pu: f64,
    /// First-order lag of turbine and governor in s.
    pub lag_s: f64,
    /// Whether an island can live on it.
    pub forms_grid: bool,
    /// Weight in the cost of leaving the base point.
    pub cost_weight: f64,
}

/// Defaults of a kind.
///
/// Ramps: a boiler follows a few per cent a minute, a gas turbine about fifteen,
/// a water turbine one per cent a second; wind and sun are moved ten per cent a
/// minute to spare their drives and grid codes' gradients; a battery at once.
/// Inertia: turbine and generator masses give 3 to 6 s; converters give none.
/// Droop: 5 per cent is customary; a battery is set to 2 because it is quick and
/// idle; wind and sun run at what the weather gives and cannot raise.
/// Lags: one first-order stand-in for reheat, combustion or water column.
/// Weights: who should move first (hydro), and who last (wind, sun, battery).
pub fn of_kind(kind: UnitKind) -> KindDefaults {
    let turbine = KindDefaults {
        ramp_percent_per_s: 1.0,
        inertia_s: 3.0,
        droop_percent: Some(5.0),
        damping_pu: 1.0,
        lag_s: 2.0,
        forms_grid: true,
        cost_weight: 1.0,
    };
    let converter = KindDefaults {
        ramp_percent_per_s: 10.0 / 60.0,
        inertia_s: 0.0,
        droop_percent: None,
        damping_pu: 0.0,
        lag_s: 0.3,
        forms_grid: false,
        cost_weight: 8.0,
    };
    match kind {
        UnitKind::Steam => KindDefaults {
            ramp_percent_per_s: 3.0 / 60.0,
            inertia_s: 5.0,
            lag_s: 5.0,
            cost_weight: 2.0,
            ..turbine
        },
        UnitKind::Gas => KindDefaults {
            ramp_percent_per_s: 15.0 / 60.0,
            inertia_s: 4.0,
            lag_s: 1.0,
            cost_weight: 4.0,
            ..turbine
        },
        UnitKind::Hydro => turbine,
        UnitKind::Wind | UnitKind::Solar => converter,
        UnitKind::Battery => KindDefaults {
            ramp_percent_per_s: f64::INFINITY,
            droop_percent: Some(2.0),
            lag_s: 0.1,
            forms_grid: true,
            ..converter
        },
    }
}

/// Curvature of the cost of leaving the base point, per pu squared.
///
/// A large machine gives a megawatt as willingly as a small one gives its share.
pub fn cost_per_pu2(kind: UnitKind, rating_mva: f64, base_mva: f64) -> f64 {
    match kind {
        UnitKind::Battery => BATTERY_COST_PER_PU2,
        UnitKind::Steam | UnitKind::Gas | UnitKind::Hydro | UnitKind::Wind | UnitKind::Solar => {
            COST_SCALE * of_kind(kind).cost_weight * base_mva / rating_mva
        }
    }
}

/// Settings of the stewards when a play says nothing.
///
/// The filter time is well above the swing's period; the freeze outlasts the
/// first swing after a trip; the tie band is one pu of the base; the tie price
/// lies above the usual spread of marginal costs between areas (about 1.5), so
/// that a tie leaves schedule only for need.
pub fn steward(base_mva: f64) -> StewardSettings {
    StewardSettings {
        iterations: 50,
        shadow_iterations: 25,
        filter_s: 2.0,
        event_freeze_s: 3.0,
        tie_band_mw: base_mva,
        tie_price_per_pu: 3.0,
        proof_threshold_mw: 0.2,
        assumed_load_damping: 1.0,
        help_hops: 4,
    }
}

/// Links when a play says nothing: no faults.
pub fn links() -> Links {
    crate::link::FAULTLESS
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn prices_a_large_unit_below_a_small_one_of_its_kind() {
        // 6 * 2 / (300/100) = 4 and 6 * 2 / (100/100) = 12, by hand.
        assert_eq!(cost_per_pu2(UnitKind::Steam, 300.0, 100.0), 4.0);
        assert_eq!(cost_per_pu2(UnitKind::Steam, 100.0, 100.0), 12.0);
    }

    #[test]
    fn gives_converters_no_inertia_and_wind_no_governor() {
        assert_eq!(of_kind(UnitKind::Battery).inertia_s, 0.0);
        assert_eq!(of_kind(UnitKind::Wind).droop_percent, None);
        assert!(!of_kind(UnitKind::Solar).forms_grid);
    }

    #[test]
    fn shed_price_is_four_times_the_dearest_stroke() {
        let stroke_pu = 1.5;
        assert!(SHED_PRICE_PER_PU >= 4.0 * BATTERY_COST_PER_PU2 * stroke_pu);
    }
}
