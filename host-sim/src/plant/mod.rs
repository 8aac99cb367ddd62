//! The plant: a linearised grid of several areas, stepped exactly in virtual time.
//!
//! Contract: lossless DC flows; swing equation with inertia and damping at the
//! buses; loads with frequency dependence; units with set-point, ramp limit,
//! gain and bias errors, droop, first-order lag, range and storage; feeders;
//! islands. No voltage, no reactive power, no protection but the synchronism
//! check: an island short of power sags as far as its damping lets it. The
//! linear part is exact for any step; a unit that meets a limit does so at the
//! end of a step. The same calls give the same bits.
//!
//! Data flow: `Grid` -> [`Plant::new`] at rest -> orders (`set_*`) and events
//! ([`Plant::apply`]) -> [`Plant::step`] -> accessors. Right after an event the
//! accessors show the new topology and flows; frequencies of buses without
//! inertia and outputs of units without lag follow at the next step.
//!
//! Sign: injection into a bus positive, flow positive from `from` to `to`.

mod constants;
mod dense;
mod error;
mod exponential;
mod happening;
mod motion;
mod orders;
mod propagator;
mod start;
mod stepping;
mod tell;
mod topology;

use std::sync::Arc;

pub use constants::VIRTUAL_INERTIA_S;
pub use error::{PlantError, Refused};

pub use happening::{SYNC_ANGLE_DEG, SYNC_FREQ_HZ};

use constants::Constants;
use motion::Motion;
use propagator::Propagator;
use topology::Switches;

/// Positions kept ready: the events of a play and the limits of its units.
const CACHE_LEN: usize = 48;

/// A grid in motion.
#[derive(Clone)]
pub struct Plant {
    constants: Arc<Constants>,
    switches: Switches,
    propagator: Arc<Propagator>,
    /// Most recently used first.
    cache: Vec<(Vec<u64>, Arc<Propagator>)>,
    motion: Motion,
    shown: Shown,
    /// Set-point in force per unit.
    setpoint_mw: Vec<f64>,
    /// Ramp-limited set-point per unit.
    reference_mw: Vec<f64>,
    /// What the reference makes a unit deliver, before droop: gain and bias in; 0 out of service.
    drive_mw: Vec<f64>,
    /// Change of the drive over the present step.
    ramp_mw: Vec<f64>,
    energy_mwh: Vec<f64>,
    /// Angle of each island's reference bus against nominal, in (-pi, pi].
    island_angle_rad: Vec<f64>,
    steps: u64,
}

/// What the accessors show.
#[derive(Clone)]
struct Shown {
    freq_dev_hz: Vec<f64>,
    unit_output_mw: Vec<f64>,
    feeder_shed_mw: Vec<f64>,
    bus_load_mw: Vec<f64>,
    /// In pu s^2/rad.
    bus_inertia: Vec<f64>,
}

impl Plant {
    /// Time since the start in s.
    pub fn time_s(&self) -> f64 {
        self.steps as f64 * self.constants.step_s
    }

    /// Frequency deviation of each bus in Hz; 0 where dark.
    ///
    /// At a bus with neither inertia nor damping: the change of its eliminated
    /// angle, what units at it do themselves left out.
    pub fn bus_freq_dev_hz(&self) -> &[f64] {
        &self.shown.freq_dev_hz
    }

    /// Angle of each bus in rad against its island's reference bus (the one with
    /// most inertia); 0 where dark.
    pub fn bus_angle_rad(&self) -> &[f64] {
        &self.motion.angle_rad
    }

    /// Flow of each line in MW, positive from `from` to `to`; 0 while open or dark.
    pub fn line_flow_mw(&self) -> &[f64] {
        &self.motion.flow_mw
    }

    /// Lines in service.
    pub fn line_closed(&self) -> &[bool] {
        &self.switches.line_closed
    }

    /// Output of each unit in MW, damping apart; 0 out of service.
    pub fn unit_output_mw(&self) -> &[f64] {
        &self.shown.unit_output_mw
    }

    /// Ramp-limited set-point of each unit in MW, before gain error, bias and droop.
    pub fn unit_reference_mw(&self) -> &[f64] {
        &self.reference_mw
    }

    /// Units in service.
    pub fn unit_in_service(&self) -> &[bool] {
        &self.switches.unit_in
    }

    /// Energy of each storage in MWh; 0 for units that store none.
    pub fn unit_energy_mwh(&self) -> &[f64] {
        &self.energy_mwh
    }

    /// Load taken off by each feeder in MW; 0 where its bus is dark.
    pub fn feeder_shed_mw(&self) -> &[f64] {
        &self.shown.feeder_shed_mw
    }

    /// Load of each bus in MW at nominal frequency, before shedding; 0 where dark.
    pub fn bus_load_mw(&self) -> &[f64] {
        &self.shown.bus_load_mw
    }

    /// Live island of each bus, numbered from 0 by lowest bus; none = dark.
    pub fn bus_island(&self) -> &[Option<usize>] {
        &self.propagator.islands.of_bus
    }

    /// Number of live islands.
    pub fn island_count(&self) -> usize {
        self.propagator.islands.count
    }

    /// Inertia of each bus in pu s^2/rad, the weight of its frequency in a mean;
    /// 0 where dark or without machine.
    pub fn bus_inertia(&self) -> &[f64] {
        &self.shown.bus_inertia
    }
}

#[cfg(test)]
mod island_tests;
#[cfg(test)]
mod mixed_tests;
#[cfg(test)]
mod reference_tests;
#[cfg(test)]
mod tests;
