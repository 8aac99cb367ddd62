//! Switch positions and what follows from them: islands, and what is dark.
//!
//! Contract: [`Switches`] holds every discrete state of the plant; its
//! [`Switches::key`] is equal exactly where the equations of motion are. An
//! island without a grid-forming unit in service is dark.

use super::constants::{Constants, UnitConstants};
use crate::case::model::FeederKind;
use crate::grid::graph::components;

/// Which law sets a unit's output.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Mode {
    /// Governor and lag.
    Free,
    /// Held at its upper limit.
    High,
    /// Held at its lower limit.
    Low,
}

/// Every discrete state of the plant.
#[derive(Clone, Debug, PartialEq)]
pub struct Switches {
    pub line_closed: Vec<bool>,
    pub unit_in: Vec<bool>,
    pub mode: Vec<Mode>,
    /// Load at nominal frequency whether served or not, before shedding.
    pub load_mw: Vec<f64>,
    /// Shed as ordered, per feeder.
    pub shed_mw: Vec<f64>,
}

/// Islands of one switch position.
#[derive(Clone, Debug, PartialEq)]
pub struct Islands {
    /// Live island of each bus; none = dark.
    pub of_bus: Vec<Option<usize>>,
    pub count: usize,
}

/// Shares of a feeder's load in which damping follows continuous shedding.
///
/// Equations are rebuilt when shedding crosses such a mark, not at every tick:
/// the error is at most 1/16 of the feeder's load in the damping, e.g. 0.02 MW
/// for 30 MW, damping 1.5 and 0.2 Hz at 50 Hz.
const DAMPING_MARKS: f64 = 8.0;

impl Switches {
    /// Find the islands; a bus without grid-forming unit in reach is dark.
    pub fn islands(&self, constants: &Constants) -> Islands {
        let bus_count = constants.buses.len();
        let (component, count) = components(bus_count, &constants.line_ends, &self.line_closed);
        let mut live = vec![false; count];
        for (unit, constants) in constants.units.iter().enumerate() {
            live[component[constants.bus]] |= self.unit_in[unit] && constants.forms_grid;
        }
        let mut number = vec![None; count];
        let mut live_count = 0;
        for (component, is_live) in live.into_iter().enumerate() {
            if is_live {
                number[component] = Some(live_count);
                live_count += 1;
            }
        }
        Islands { of_bus: component.into_iter().map(|c| number[c]).collect(), count: live_count }
    }

    /// Inertia of each bus in MW s^2/rad, the floor for converter islands included.
    pub fn inertia(&self, constants: &Constants, islands: &Islands) -> Vec<f64> {
        let mut inertia = vec![0.0; constants.buses.len()];
        let mut island_inertia = vec![0.0; islands.count];
        for (unit, data) in self.live_units(constants, islands) {
            inertia[data.bus] += data.inertia;
            if let Some(island) = islands.of_bus[constants.units[unit].bus] {
                island_inertia[island] += data.inertia;
            }
        }
        for (_, data) in self.live_units(constants, islands) {
            let floor = islands.of_bus[data.bus].is_some_and(|i| island_inertia[i] == 0.0);
            if floor && data.forms_grid {
                inertia[data.bus] += data.virtual_inertia;
            }
        }
        inertia
    }

    /// Units in service in a live island.
    pub fn live_units<'a>(
        &'a self,
        constants: &'a Constants,
        islands: &'a Islands,
    ) -> impl Iterator<Item = (usize, &'a UnitConstants)> {
        constants
            .units
            .iter()
            .enumerate()
            .filter(|(unit, data)| self.unit_in[*unit] && islands.of_bus[data.bus].is_some())
    }

    /// Load per bus that counts for damping.
    pub fn damping_load_mw(&self, constants: &Constants) -> Vec<f64> {
        let mut load_mw = self.load_mw.clone();
        for (feeder, &shed_mw) in constants.feeders.iter().zip(&self.shed_mw) {
            load_mw[feeder.bus] -= match feeder.kind {
                FeederKind::Switched => shed_mw,
                FeederKind::Continuous if feeder.load_mw > 0.0 => {
                    let mark = feeder.load_mw / DAMPING_MARKS;
                    (shed_mw / mark).round() * mark
                }
                FeederKind::Continuous => 0.0,
            };
        }
        for load_mw in &mut load_mw {
            *load_mw = load_mw.max(0.0);
        }
        load_mw
    }

    /// Load per bus after shedding, at nominal frequency.
    pub fn served_load_mw(&self, constants: &Constants) -> Vec<f64> {
        let mut load_mw = self.load_mw.clone();
        for (feeder, shed_mw) in constants.feeders.iter().zip(&self.shed_mw) {
            load_mw[feeder.bus] -= shed_mw;
        }
        load_mw
    }

    /// A number sequence that is equal exactly where the equations of motion are.
    pub fn key(&self, constants: &Constants) -> Vec<u64> {
        let mut key = Vec::new();
        pack_bits(&mut key, self.line_closed.iter().copied());
        pack_bits(&mut key, self.unit_in.iter().copied());
        pack_bits(&mut key, self.mode.iter().map(|&mode| mode == Mode::High));
        pack_bits(&mut key, self.mode.iter().map(|&mode| mode == Mode::Low));
        let loads = self.damping_load_mw(constants);
        for (bus, load_mw) in constants.buses.iter().zip(loads) {
            if bus.damping_per_mw != 0.0 {
                key.push(load_mw.to_bits());
            }
        }
        key
    }
}

fn pack_bits(key: &mut Vec<u64>, bits: impl Iterator<Item = bool>) {
    for (index, bit) in bits.enumerate() {
        if index % 64 == 0 {
            key.push(0);
        }
        if let Some(word) = key.last_mut() {
            *word |= u64::from(bit) << (index % 64);
        }
    }
}
