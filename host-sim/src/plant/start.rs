//! The plant at rest in its base case.

use std::sync::Arc;

use super::constants::{Constants, UnitConstants};
use super::error::PlantError;
use super::motion::Motion;
use super::propagator::Propagator;
use super::topology::{Islands, Mode, Switches};
use super::{Plant, Shown};
use crate::case::model::Grid;
use crate::grid::dc::DcNetwork;

/// How far a base case may be from balance; what is left goes on the loads.
const BALANCE_MW: f64 = 0.1;

impl Plant {
    /// Put a grid to rest: units at their base points, nominal frequency.
    ///
    /// A residual of up to 0.1 MW per island is put on its loads in proportion.
    /// A unit with gain error or bias starts on the reference that delivers its
    /// base point; its error shows with the first set-point.
    ///
    /// Errors: a step that is not positive, an island out of balance, a network
    /// without solution.
    pub fn new(grid: &Grid, step_s: f64) -> Result<Self, PlantError> {
        if !(step_s.is_finite() && step_s > 0.0) {
            return Err(PlantError::Step { step_s });
        }
        let constants = Constants::new(grid, step_s)?;
        let mut switches = first_switches(grid, &constants);
        let islands = switches.islands(&constants);
        for (unit, data) in constants.units.iter().enumerate() {
            switches.unit_in[unit] &= islands.of_bus[data.bus].is_some();
        }
        balance(grid, &constants, &islands, &mut switches)?;
        let propagator =
            Arc::new(Propagator::new(&constants, &switches).ok_or(PlantError::Singular)?);
        let angle_rad = rest_angles(grid, &constants, &switches, &islands)?;
        let drive = |data: &UnitConstants| data.gain * data.base_reference_mw + data.bias_mw;
        let setpoint_mw: Vec<f64> =
            constants.units.iter().map(|data| data.base_reference_mw).collect();
        let mut plant = Self {
            cache: vec![(switches.key(&constants), propagator.clone())],
            shown: Shown::new(grid),
            reference_mw: in_service(&constants, &switches, |data| data.base_reference_mw),
            drive_mw: in_service(&constants, &switches, drive),
            ramp_mw: vec![0.0; grid.units.len()],
            motion: Motion::new(
                &constants,
                angle_rad,
                in_service(&constants, &switches, |data| data.base_mw),
            ),
            setpoint_mw,
            energy_mwh: grid.units.iter().map(first_energy_mwh).collect(),
            island_angle_rad: vec![0.0; islands.count],
            steps: 0,
            constants: Arc::new(constants),
            switches,
            propagator,
        };
        plant.load_motion();
        plant.motion.turn_back(&plant.propagator, &mut plant.island_angle_rad);
        plant.island_angle_rad.fill(0.0);
        plant.evaluate();
        plant.show_event();
        plant.show_motion();
        Ok(plant)
    }
}

impl Shown {
    fn new(grid: &Grid) -> Self {
        Self {
            freq_dev_hz: vec![0.0; grid.buses.len()],
            unit_output_mw: vec![0.0; grid.units.len()],
            feeder_shed_mw: vec![0.0; grid.feeders.len()],
            bus_load_mw: vec![0.0; grid.buses.len()],
            bus_inertia: vec![0.0; grid.buses.len()],
        }
    }
}

/// A figure of every unit in service, 0 for the others.
fn in_service(
    constants: &Constants,
    switches: &Switches,
    figure: impl Fn(&UnitConstants) -> f64,
) -> Vec<f64> {
    let units = constants.units.iter().zip(&switches.unit_in);
    units.map(|(data, &is_in)| if is_in { figure(data) } else { 0.0 }).collect()
}

fn first_switches(grid: &Grid, constants: &Constants) -> Switches {
    Switches {
        line_closed: grid.lines.iter().map(|line| line.closed).collect(),
        unit_in: constants.units.iter().map(|unit| unit.in_service).collect(),
        mode: vec![Mode::Free; grid.units.len()],
        load_mw: grid.buses.iter().map(|bus| bus.load_mw).collect(),
        shed_mw: vec![0.0; grid.feeders.len()],
    }
}

fn first_energy_mwh(unit: &crate::case::model::Unit) -> f64 {
    unit.energy_mwh.unwrap_or(0.0) * unit.energy_start.clamp(0.0, 1.0)
}

/// Put each island's residual on its loads.
fn balance(
    grid: &Grid,
    constants: &Constants,
    islands: &Islands,
    switches: &mut Switches,
) -> Result<(), PlantError> {
    let mut surplus_mw = vec![0.0; islands.count];
    let mut load_mw = vec![0.0; islands.count];
    let mut lowest_bus = vec![None; islands.count];
    for (bus, island) in islands.of_bus.iter().enumerate() {
        if let Some(island) = *island {
            surplus_mw[island] -= switches.load_mw[bus];
            load_mw[island] += switches.load_mw[bus].abs();
            lowest_bus[island].get_or_insert(bus);
        }
    }
    for (_, data) in switches.live_units(constants, islands) {
        if let Some(island) = islands.of_bus[data.bus] {
            surplus_mw[island] += data.base_mw;
        }
    }
    for island in 0..islands.count {
        let imbalance_mw = surplus_mw[island];
        let allowed_mw = if load_mw[island] > 0.0 { BALANCE_MW } else { 1e-9 };
        if imbalance_mw.is_nan() || imbalance_mw.abs() > allowed_mw {
            let bus = lowest_bus[island].map_or("?", |bus: usize| &grid.buses[bus].name);
            return Err(PlantError::Imbalance { bus: bus.to_string(), imbalance_mw });
        }
    }
    for (bus, island) in islands.of_bus.iter().enumerate() {
        if let Some(island) = *island {
            let share = switches.load_mw[bus].abs() / load_mw[island].max(f64::MIN_POSITIVE);
            switches.load_mw[bus] += surplus_mw[island] * share;
        }
    }
    Ok(())
}

/// Angles of the base case; 0 where dark.
fn rest_angles(
    grid: &Grid,
    constants: &Constants,
    switches: &Switches,
    islands: &Islands,
) -> Result<Vec<f64>, PlantError> {
    let mut injection_mw: Vec<f64> = switches.load_mw.iter().map(|load| -load).collect();
    for (bus, island) in islands.of_bus.iter().enumerate() {
        if island.is_none() {
            injection_mw[bus] = 0.0;
        }
    }
    for (_, data) in switches.live_units(constants, islands) {
        injection_mw[data.bus] += data.base_mw;
    }
    let network = DcNetwork::new(grid, &switches.line_closed)?;
    Ok(network.flows_mw(&injection_mw)?.angle_rad)
}
