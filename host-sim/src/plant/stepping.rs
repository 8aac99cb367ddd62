//! The step: ramps, motion, storages, limits, and what is shown of it.

use std::sync::Arc;

use super::propagator::Propagator;
use super::topology::Mode;
use super::{CACHE_LEN, Plant};

/// Slack at a unit's limits in MW: well above rounding, well below a meter.
const LIMIT_SLACK_MW: f64 = 1e-9;

impl Plant {
    /// Advance by one step.
    ///
    /// Cost: one product of the size of the state vector, see `prints_cost_of_a_step`;
    /// more in the rare step in which a unit meets or leaves a limit.
    pub fn step(&mut self) {
        let ramping = self.start_ramps();
        self.motion.advance(&self.constants, &self.propagator, &self.drive_mw, &self.ramp_mw);
        if ramping {
            self.end_ramps();
        }
        self.motion.turn_back(&self.propagator, &mut self.island_angle_rad);
        self.evaluate();
        self.steps += 1;
        self.count_energy();
        if self.meet_limits() {
            self.adopt_switches();
            self.load_motion();
        }
        self.show_motion();
    }

    /// Move references towards set-points; leave the change of drive in `ramp_mw`.
    fn start_ramps(&mut self) -> bool {
        let mut ramping = false;
        for (unit, data) in self.constants.units.iter().enumerate() {
            let missing_mw = self.setpoint_mw[unit] - self.reference_mw[unit];
            if missing_mw == 0.0 || !self.switches.unit_in[unit] {
                self.ramp_mw[unit] = 0.0;
                continue;
            }
            let reach_mw = data.ramp_mw_per_s * self.constants.step_s;
            self.reference_mw[unit] = if missing_mw.abs() <= reach_mw {
                self.setpoint_mw[unit]
            } else {
                self.reference_mw[unit] + reach_mw.copysign(missing_mw)
            };
            let drive_mw = data.gain * self.reference_mw[unit] + data.bias_mw;
            self.ramp_mw[unit] = drive_mw - self.drive_mw[unit];
            ramping = true;
        }
        ramping
    }

    /// Bring the drives to the end of the step.
    fn end_ramps(&mut self) {
        for (unit, data) in self.constants.units.iter().enumerate() {
            if self.ramp_mw[unit] != 0.0 {
                self.drive_mw[unit] = data.gain * self.reference_mw[unit] + data.bias_mw;
            }
        }
    }

    /// Charge and discharge storages over the step just made (trapezoid).
    fn count_energy(&mut self) {
        for (unit, data) in self.constants.units.iter().enumerate() {
            let Some(full_mwh) = data.energy_mwh else {
                continue;
            };
            let mean_mw = 0.5 * (self.shown.unit_output_mw[unit] + self.motion.output_mw[unit]);
            let left_mwh = self.energy_mwh[unit] - mean_mw * self.constants.step_s / 3600.0;
            self.energy_mwh[unit] = left_mwh.min(full_mwh).max(0.0);
        }
    }

    /// Output range of a unit now: an empty storage gives nothing, a full one takes nothing.
    fn range_mw(&self, unit: usize) -> (f64, f64) {
        let data = &self.constants.units[unit];
        let (mut lowest_mw, mut highest_mw) = (data.lowest_mw, data.highest_mw);
        if let Some(full_mwh) = data.energy_mwh {
            if self.energy_mwh[unit] <= 0.0 {
                highest_mw = highest_mw.min(0.0);
            }
            if self.energy_mwh[unit] >= full_mwh {
                lowest_mw = lowest_mw.max(0.0);
            }
        }
        (lowest_mw, highest_mw)
    }

    /// Hold units that went past a limit, free those that want back; whether any changed.
    fn meet_limits(&mut self) -> bool {
        let mut changed = false;
        for unit in 0..self.constants.units.len() {
            if !self.switches.unit_in[unit] {
                continue;
            }
            let (lowest_mw, highest_mw) = self.range_mw(unit);
            let data = &self.constants.units[unit];
            let output_mw = &mut self.motion.output_mw[unit];
            let wanted_mw = self.drive_mw[unit] - data.droop_gain * self.motion.speed[data.bus];
            let mode = match self.switches.mode[unit] {
                Mode::Free if *output_mw > highest_mw + LIMIT_SLACK_MW => Mode::High,
                Mode::Free if *output_mw < lowest_mw - LIMIT_SLACK_MW => Mode::Low,
                Mode::High if wanted_mw < highest_mw - LIMIT_SLACK_MW => Mode::Free,
                Mode::High if *output_mw < highest_mw - LIMIT_SLACK_MW => Mode::Free,
                Mode::Low if wanted_mw > lowest_mw + LIMIT_SLACK_MW => Mode::Free,
                Mode::Low if *output_mw > lowest_mw + LIMIT_SLACK_MW => Mode::Free,
                same => same,
            };
            match mode {
                Mode::Free => {}
                Mode::High => *output_mw = highest_mw,
                Mode::Low => *output_mw = lowest_mw,
            }
            changed |= mode != self.switches.mode[unit];
            self.switches.mode[unit] = mode;
        }
        changed
    }

    /// Take the equations of motion of the present switches; false if they do not exist.
    pub(super) fn adopt_switches(&mut self) -> bool {
        let key = self.switches.key(&self.constants);
        match self.cache.iter().position(|(known, _)| *known == key) {
            Some(at) => self.cache[..=at].rotate_right(1),
            None => {
                let Some(built) = Propagator::new(&self.constants, &self.switches) else {
                    return false;
                };
                self.cache.truncate(CACHE_LEN - 1);
                self.cache.insert(0, (key, Arc::new(built)));
            }
        }
        self.propagator = self.cache[0].1.clone();
        true
    }

    /// Pack angles, speeds and outputs into the present equations' state.
    pub(super) fn load_motion(&mut self) {
        self.motion.load(&self.propagator);
        let served_mw = self.switches.served_load_mw(&self.constants);
        self.motion.set_loads(&self.propagator, served_mw);
        self.evaluate();
    }

    pub(super) fn evaluate(&mut self) {
        self.motion.evaluate(&self.constants, &self.propagator, &self.drive_mw);
    }

    /// Show what a step changes.
    pub(super) fn show_motion(&mut self) {
        let speeds = self.shown.freq_dev_hz.iter_mut().zip(&self.motion.speed);
        for (shown, speed) in speeds {
            *shown = speed * (1.0 / std::f64::consts::TAU);
        }
        self.shown.unit_output_mw.copy_from_slice(&self.motion.output_mw);
    }

    /// Show what an event changes at once.
    ///
    /// A bus without inertia answers a jump of its load with a spike of its
    /// speed that is over long before the step ends; it is not shown.
    pub(super) fn show_event(&mut self) {
        let propagator = &self.propagator;
        let island = &propagator.islands.of_bus;
        for (bus, shown) in self.shown.freq_dev_hz.iter_mut().enumerate() {
            if island[bus].is_none() || propagator.bus_inertia[bus] > 0.0 {
                *shown = self.motion.speed[bus] * (1.0 / std::f64::consts::TAU);
            }
        }
        let speed_sets_output = |unit: usize| {
            propagator.instant.contains(&unit) && self.constants.units[unit].droop_gain > 0.0
        };
        for (unit, shown) in self.shown.unit_output_mw.iter_mut().enumerate() {
            if !speed_sets_output(unit) {
                *shown = self.motion.output_mw[unit];
            }
        }
        let loads = self.shown.bus_load_mw.iter_mut().zip(&self.switches.load_mw);
        for ((shown, load_mw), island) in loads.zip(island) {
            *shown = island.map_or(0.0, |_| *load_mw);
        }
        for (feeder, data) in self.constants.feeders.iter().enumerate() {
            self.shown.feeder_shed_mw[feeder] =
                island[data.bus].map_or(0.0, |_| self.switches.shed_mw[feeder]);
        }
        let inertia = self.shown.bus_inertia.iter_mut();
        for (shown, inertia) in inertia.zip(&propagator.bus_inertia) {
            *shown = inertia / self.constants.base_mva;
        }
    }
}
