//! Orders from controllers: set-points, shedding, loads.
//!
//! Contract: an order that makes no sense (index outside the grid, a value that
//! is no number) is ignored, as an actuator would; values are brought into the
//! actuator's range. Shedding acts at once, set-points through the ramp.

use super::Plant;
use crate::case::model::FeederKind;

impl Plant {
    /// Give a unit a new set-point in MW, brought into its emergency range.
    ///
    /// A unit out of service remembers it; a fixed unit does not listen.
    pub fn set_unit_setpoint_mw(&mut self, unit: usize, mw: f64) {
        let Some(data) = self.constants.units.get(unit) else {
            return;
        };
        if data.fixed || !mw.is_finite() {
            return;
        }
        self.setpoint_mw[unit] = mw.max(data.lowest_mw).min(data.highest_mw);
        if data.ramp_mw_per_s.is_infinite()
            && self.switches.unit_in[unit]
            && self.reference_mw[unit] != self.setpoint_mw[unit]
        {
            self.reference_mw[unit] = self.setpoint_mw[unit];
            self.drive_mw[unit] = data.gain * self.reference_mw[unit] + data.bias_mw;
            self.evaluate();
            self.show_event();
        }
    }

    /// Take off load at a feeder, in MW of its load, at once.
    ///
    /// A switched feeder opens from half its load on and closes below.
    pub fn set_feeder_shed_mw(&mut self, feeder: usize, mw: f64) {
        let Some(data) = self.constants.feeders.get(feeder) else {
            return;
        };
        if !mw.is_finite() {
            return;
        }
        let shed_mw = match data.kind {
            FeederKind::Continuous => mw.min(data.load_mw).max(0.0),
            FeederKind::Switched if mw > 0.0 && mw >= 0.5 * data.load_mw => data.load_mw,
            FeederKind::Switched => 0.0,
        };
        if self.switches.shed_mw[feeder] != shed_mw {
            self.switches.shed_mw[feeder] = shed_mw;
            self.take_over_loads();
        }
    }

    /// Give a bus a new load in MW at nominal frequency, before shedding.
    ///
    /// A dark bus gets it when it is live again.
    /// Cost: new equations of motion where the load has frequency dependence.
    pub fn set_bus_load_mw(&mut self, bus: usize, mw: f64) {
        if bus < self.switches.load_mw.len() && mw.is_finite() && self.switches.load_mw[bus] != mw {
            self.switches.load_mw[bus] = mw;
            self.take_over_loads();
        }
    }

    /// Let changed loads act: on the balance, and on the damping where it counts.
    fn take_over_loads(&mut self) {
        // Should the equations fail to build, the damping stays as it was.
        self.adopt_switches();
        self.load_motion();
        self.show_event();
    }
}
