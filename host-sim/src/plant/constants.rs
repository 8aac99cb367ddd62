//! What never changes about a grid, in the plant's own units.
//!
//! Contract: powers in MW, angles in rad, angular frequency deviation in rad/s,
//! so inertia is in MW s^2/rad and damping in MW s/rad.

use crate::case::model::{Grid, Unit, UnitStatus};
use crate::grid::dc::{DcError, susceptances_mw};

/// Inertia constant given to grid-forming converters where nothing else turns, in s.
///
/// A stated assumption: it stands for the energy a grid-forming control keeps
/// at hand, so that an island on converters alone has a frequency at all.
pub const VIRTUAL_INERTIA_S: f64 = 0.5;

/// A unit in the plant's units.
#[derive(Clone, Debug)]
pub struct UnitConstants {
    pub name: String,
    pub bus: usize,
    pub in_service: bool,
    pub fixed: bool,
    pub forms_grid: bool,
    /// 2 H S / w0.
    pub inertia: f64,
    /// Inertia if the unit must carry an island without any.
    pub virtual_inertia: f64,
    /// Damping of the machine itself, not part of its output.
    pub damping: f64,
    /// MW per rad/s of frequency deviation; 0 without governor.
    pub droop_gain: f64,
    pub lag_s: f64,
    /// Delivered MW per MW of reference.
    pub gain: f64,
    pub bias_mw: f64,
    /// Emergency range, lower end.
    pub lowest_mw: f64,
    /// Emergency range, upper end.
    pub highest_mw: f64,
    pub ramp_mw_per_s: f64,
    /// Energy when full; none for units that store none.
    pub energy_mwh: Option<f64>,
    pub base_mw: f64,
    /// Reference at which the unit delivers its base point.
    pub base_reference_mw: f64,
}

impl UnitConstants {
    fn new(unit: &Unit, nominal_hz: f64) -> Self {
        let omega = std::f64::consts::TAU * nominal_hz;
        let inertia_of = |inertia_s: f64| 2.0 * inertia_s * unit.rating_mva / omega;
        let gain = 1.0 + unit.gain_error;
        // A unit that delivers nothing whatever it is told rests at reference 0.
        let base_reference_mw =
            if gain == 0.0 { 0.0 } else { (unit.base_mw - unit.bias_mw) / gain };
        Self {
            name: unit.name.clone(),
            bus: unit.bus,
            in_service: unit.status != UnitStatus::Off,
            fixed: unit.status == UnitStatus::Fixed,
            forms_grid: unit.forms_grid,
            inertia: inertia_of(unit.inertia_s),
            virtual_inertia: inertia_of(VIRTUAL_INERTIA_S),
            damping: unit.damping_pu * unit.rating_mva / omega,
            droop_gain: match unit.droop_percent {
                Some(percent) if percent > 0.0 => unit.rating_mva * 100.0 / (percent * omega),
                _ => 0.0,
            },
            lag_s: unit.lag_s.max(0.0),
            gain,
            bias_mw: unit.bias_mw,
            lowest_mw: unit.emergency_min_mw,
            highest_mw: unit.emergency_max_mw,
            ramp_mw_per_s: unit.ramp_mw_per_s.max(0.0),
            energy_mwh: unit.energy_mwh,
            base_mw: unit.base_mw,
            base_reference_mw,
        }
    }
}

/// A bus in the plant's units.
#[derive(Clone, Debug)]
pub struct BusConstants {
    pub name: String,
    /// MW s/rad per MW of load.
    pub damping_per_mw: f64,
    /// Damping that does not depend on the load.
    pub damping: f64,
}

/// Everything that stays the same over a run.
#[derive(Clone, Debug)]
pub struct Constants {
    pub step_s: f64,
    pub base_mva: f64,
    pub units: Vec<UnitConstants>,
    pub buses: Vec<BusConstants>,
    pub line_names: Vec<String>,
    pub line_ends: Vec<(usize, usize)>,
    /// MW per rad across the line.
    pub susceptance: Vec<f64>,
    pub feeders: Vec<crate::case::model::Feeder>,
}

impl Constants {
    /// Convert a grid's figures; an unusable reactance is an error.
    pub fn new(grid: &Grid, step_s: f64) -> Result<Self, DcError> {
        let tau = std::f64::consts::TAU;
        Ok(Self {
            step_s,
            base_mva: grid.base_mva,
            units: grid
                .units
                .iter()
                .map(|unit| UnitConstants::new(unit, grid.nominal_hz))
                .collect(),
            buses: grid
                .buses
                .iter()
                .map(|bus| BusConstants {
                    name: bus.name.clone(),
                    damping_per_mw: bus.load_damping / (tau * grid.nominal_hz),
                    damping: bus.damping_mw_per_hz / tau,
                })
                .collect(),
            line_names: grid.lines.iter().map(|line| line.name.clone()).collect(),
            line_ends: crate::grid::line_ends(grid),
            susceptance: susceptances_mw(grid)?,
            feeders: grid.feeders.clone(),
        })
    }
}
