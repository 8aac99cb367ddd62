//! One step of the plant, and everything that follows from a state.
//!
//! Contract: [`Motion`] holds the state vector of the current propagator and
//! the quantities derived from it; no allocation while stepping. `evaluate`
//! goes from state to angles, flows, speeds and outputs; the derivative is read
//! off those, and the propagator turns it into the next state.

use super::constants::Constants;
use super::dense::{add_product, add_scaled};
use super::propagator::Propagator;

/// State and derived quantities.
#[derive(Clone)]
pub(super) struct Motion {
    /// State vector in the propagator's order.
    state: Vec<f64>,
    derivative: Vec<f64>,
    /// Angle of every bus in rad.
    pub angle_rad: Vec<f64>,
    /// Speed of every bus in rad/s of deviation.
    pub speed: Vec<f64>,
    /// Acceleration of the inertial buses in rad/s^2.
    acceleration: Vec<f64>,
    /// Flow of every line in MW.
    pub flow_mw: Vec<f64>,
    /// Output of every unit in MW.
    pub output_mw: Vec<f64>,
    /// Load served at every live bus, at nominal frequency.
    served_mw: Vec<f64>,
    /// Net injection, scratch.
    net_mw: Vec<f64>,
    /// Angles of the algebraic buses from their loads alone.
    load_angle_rad: Vec<f64>,
    algebraic: Vec<f64>,
    kept_speed: Vec<f64>,
}

impl Motion {
    /// At these angles and outputs, at nominal frequency; a propagator must be loaded next.
    pub fn new(constants: &Constants, angle_rad: Vec<f64>, output_mw: Vec<f64>) -> Self {
        let bus_count = constants.buses.len();
        Self {
            state: Vec::new(),
            derivative: Vec::new(),
            angle_rad,
            speed: vec![0.0; bus_count],
            acceleration: Vec::new(),
            flow_mw: vec![0.0; constants.line_ends.len()],
            output_mw,
            served_mw: vec![0.0; bus_count],
            net_mw: vec![0.0; bus_count],
            load_angle_rad: Vec::new(),
            algebraic: Vec::new(),
            kept_speed: Vec::new(),
        }
    }

    /// Take over angles, speeds and outputs as the state of a propagator.
    pub fn load(&mut self, propagator: &Propagator) {
        self.state.clear();
        let angles = propagator.kept.iter().map(|&bus| self.angle_rad[bus]);
        self.state.extend(angles);
        let inertial = &propagator.kept[..propagator.inertial_count];
        self.state.extend(inertial.iter().map(|&bus| self.speed[bus]));
        let outputs = propagator.lagged.iter().map(|&unit| self.output_mw[unit]);
        self.state.extend(outputs);
        self.derivative = vec![0.0; self.state.len()];
        self.acceleration = vec![0.0; propagator.inertial_count];
        self.algebraic = vec![0.0; propagator.algebraic.len()];
        self.kept_speed = vec![0.0; propagator.kept.len()];
        self.flow_mw.fill(0.0);
        for (bus, island) in propagator.islands.of_bus.iter().enumerate() {
            if island.is_none() {
                self.angle_rad[bus] = 0.0;
                self.speed[bus] = 0.0;
            }
        }
    }

    /// Take over the loads.
    pub fn set_loads(&mut self, propagator: &Propagator, served_mw: Vec<f64>) {
        self.served_mw = served_mw;
        for (bus, island) in propagator.islands.of_bus.iter().enumerate() {
            if island.is_none() {
                self.served_mw[bus] = 0.0;
            }
        }
        self.load_angle_rad = vec![0.0; propagator.algebraic.len()];
        let loads = propagator.algebraic.iter().map(|&bus| -self.served_mw[bus]);
        let loads: Vec<f64> = loads.collect();
        add_product(&mut self.load_angle_rad, &propagator.injection_map, &loads);
    }

    /// From state to angles, flows, speeds and outputs.
    ///
    /// Cost: about three multiply-adds per line plus two products of the size
    /// algebraic * kept buses.
    pub fn evaluate(&mut self, constants: &Constants, propagator: &Propagator, drive_mw: &[f64]) {
        self.spread_outputs(constants, propagator, drive_mw);
        self.spread_angles(propagator);
        for line in &propagator.lines {
            let flow = line.susceptance * (self.angle_rad[line.from] - self.angle_rad[line.to]);
            self.flow_mw[line.line] = flow;
            self.net_mw[line.from] -= flow;
            self.net_mw[line.to] += flow;
        }
        self.spread_speeds(propagator);
        for &unit in &propagator.instant {
            let data = &constants.units[unit];
            self.output_mw[unit] -= data.droop_gain * self.speed[data.bus];
        }
    }

    /// Outputs (droop without lag still missing) and net injections less flows.
    fn spread_outputs(&mut self, constants: &Constants, propagator: &Propagator, drive_mw: &[f64]) {
        let first_output = propagator.kept.len() + propagator.inertial_count;
        for (&unit, &output) in propagator.lagged.iter().zip(&self.state[first_output..]) {
            self.output_mw[unit] = output;
        }
        for &unit in &propagator.instant {
            self.output_mw[unit] = drive_mw[unit];
        }
        for (net, served) in self.net_mw.iter_mut().zip(&self.served_mw) {
            *net = -served;
        }
        for units in [&propagator.lagged, &propagator.instant, &propagator.clipped] {
            for &unit in units {
                self.net_mw[constants.units[unit].bus] += self.output_mw[unit];
            }
        }
    }

    fn spread_angles(&mut self, propagator: &Propagator) {
        let kept = propagator.kept.len();
        for (&bus, &angle) in propagator.kept.iter().zip(&self.state) {
            self.angle_rad[bus] = angle;
        }
        if propagator.algebraic.is_empty() {
            return;
        }
        self.algebraic.copy_from_slice(&self.load_angle_rad);
        let size = propagator.algebraic.len();
        for &(unit, at) in &propagator.algebraic_units {
            let column = &propagator.injection_map[at * size..(at + 1) * size];
            add_scaled(&mut self.algebraic, column, self.output_mw[unit]);
        }
        add_product(&mut self.algebraic, &propagator.angle_map, &self.state[..kept]);
        for (&bus, &angle) in propagator.algebraic.iter().zip(&self.algebraic) {
            self.angle_rad[bus] = angle;
        }
    }

    fn spread_speeds(&mut self, propagator: &Propagator) {
        let (kept, inertial) = (propagator.kept.len(), propagator.inertial_count);
        for (index, &bus) in propagator.kept.iter().enumerate() {
            let damping = propagator.damping[index];
            let speed = if index < inertial {
                let speed = self.state[kept + index];
                let net = self.net_mw[bus] - damping * speed;
                self.acceleration[index] = net / propagator.bus_inertia[bus];
                speed
            } else {
                self.net_mw[bus] / damping
            };
            self.speed[bus] = speed;
            self.kept_speed[index] = speed;
        }
        if propagator.algebraic.is_empty() {
            return;
        }
        // The derivative of the eliminated angles, the units' own change apart.
        self.algebraic.fill(0.0);
        add_product(&mut self.algebraic, &propagator.angle_map, &self.kept_speed);
        for (&bus, &speed) in propagator.algebraic.iter().zip(&self.algebraic) {
            self.speed[bus] = speed;
        }
    }

    /// Advance the state by one step from what `evaluate` left.
    ///
    /// Units: `ramp_mw` is the change of each unit's drive over the step.
    pub fn advance(
        &mut self,
        constants: &Constants,
        propagator: &Propagator,
        drive_mw: &[f64],
        ramp_mw: &[f64],
    ) {
        let (kept, inertial) = (propagator.kept.len(), propagator.inertial_count);
        self.derivative[..kept].copy_from_slice(&self.kept_speed);
        self.derivative[kept..kept + inertial].copy_from_slice(&self.acceleration);
        let outputs = &mut self.derivative[kept + inertial..];
        for (rate, &unit) in outputs.iter_mut().zip(&propagator.lagged) {
            let data = &constants.units[unit];
            let target = drive_mw[unit] - data.droop_gain * self.speed[data.bus];
            *rate = (target - self.output_mw[unit]) / data.lag_s;
        }
        add_product(&mut self.state, &propagator.response, &self.derivative);
        for (unit, &change) in ramp_mw.iter().enumerate() {
            if change != 0.0 {
                add_scaled(&mut self.state, propagator.ramp_column(unit), change);
            }
        }
    }

    /// Turn every island back so that its reference bus stands at angle 0.
    ///
    /// Only differences act, so nothing else changes; angles stay small and
    /// keep their digits however long an island runs off nominal frequency.
    pub fn turn_back(&mut self, propagator: &Propagator, island_angle_rad: &mut [f64]) {
        for (island, (total, &at)) in
            island_angle_rad.iter_mut().zip(&propagator.reference).enumerate()
        {
            let turn = self.state[at];
            *total = wrapped(*total + turn);
            for (angle, bus) in self.state.iter_mut().zip(&propagator.kept) {
                if propagator.islands.of_bus[*bus] == Some(island) {
                    *angle -= turn;
                }
            }
        }
    }
}

/// The same angle within half a turn of 0.
pub(super) fn wrapped(angle_rad: f64) -> f64 {
    angle_rad - std::f64::consts::TAU * (angle_rad / std::f64::consts::TAU).round()
}
