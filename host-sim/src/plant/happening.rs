//! Events: lines, loads and units that go and come.
//!
//! Contract: an event is carried out as a whole or refused with the plant as it
//! was. What happened is told in sentences, islands and dark buses included.
//!
//! A line may close where its ends are at most 0.1 Hz and 30 degrees apart; a
//! dark side has nothing to be in step with. The window is common practice of
//! synchronism checks; no standard is quoted for it.

use super::motion::wrapped;
use super::tell;
use super::topology::{Islands, Mode};
use super::{Plant, Refused};
use crate::case::model::Happening;

/// Synchronism window in Hz.
pub const SYNC_FREQ_HZ: f64 = 0.1;
/// Synchronism window in degrees.
pub const SYNC_ANGLE_DEG: f64 = 30.0;

impl Plant {
    /// Carry out an event and tell what happened.
    ///
    /// Errors: [`Refused`], with a sentence; nothing has changed then.
    pub fn apply(&mut self, happening: &Happening) -> Result<Vec<String>, Refused> {
        match *happening {
            Happening::LineTrip { line } => self.trip_line(line),
            Happening::LineClose { line } => self.close_line(line),
            Happening::LoadStep { bus, mw } => self.step_load(bus, mw),
            Happening::UnitTrip { unit } => self.trip_unit(unit),
            Happening::UnitReturn { unit } => self.return_unit(unit),
            Happening::Schedule { .. }
            | Happening::BasePoint { .. }
            | Happening::StewardDies { .. }
            | Happening::StewardReturns { .. }
            | Happening::LinkOutage { .. }
            | Happening::RestoreLoad { .. } => Err(Refused::NotForThePlant),
        }
    }

    fn trip_line(&mut self, line: usize) -> Result<Vec<String>, Refused> {
        check_index("line", line, self.constants.line_ends.len())?;
        let name = self.constants.line_names[line].clone();
        if !self.switches.line_closed[line] {
            return Err(Refused::AlreadyOpen { line: name });
        }
        let flow_mw = self.motion.flow_mw[line];
        let told = format!("line {name} opens at {:.1} MW", flow_mw.abs());
        self.change(told, |plant| plant.switches.line_closed[line] = false)
    }

    fn close_line(&mut self, line: usize) -> Result<Vec<String>, Refused> {
        check_index("line", line, self.constants.line_ends.len())?;
        let name = self.constants.line_names[line].clone();
        if self.switches.line_closed[line] {
            return Err(Refused::AlreadyClosed { line: name });
        }
        let (from, to) = self.constants.line_ends[line];
        let islands = &self.propagator.islands;
        let told = match (islands.of_bus[from], islands.of_bus[to]) {
            (Some(_), Some(_)) => {
                let (freq_hz, angle_deg) = self.distance(from, to);
                // Written so that a distance that is no number is refused too.
                let in_step = freq_hz <= SYNC_FREQ_HZ && angle_deg <= SYNC_ANGLE_DEG;
                if !in_step {
                    return Err(Refused::OutOfStep { line: name, freq_hz, angle_deg });
                }
                format!("line {name} closes, {freq_hz:.3} Hz and {angle_deg:.1} deg apart")
            }
            _ => format!("line {name} closes"),
        };
        self.change(told, |plant| {
            plant.join_angles(from, to);
            plant.switches.line_closed[line] = true;
        })
    }

    /// How far two live buses are apart in Hz and degrees.
    fn distance(&self, from: usize, to: usize) -> (f64, f64) {
        let freq = self.shown.freq_dev_hz[from] - self.shown.freq_dev_hz[to];
        let angle = wrapped(self.full_angle_rad(from) - self.full_angle_rad(to));
        (freq.abs(), angle.to_degrees().abs())
    }

    /// Angle against nominal, not against the island's reference.
    fn full_angle_rad(&self, bus: usize) -> f64 {
        let island = self.propagator.islands.of_bus[bus];
        self.motion.angle_rad[bus] + island.map_or(0.0, |island| self.island_angle_rad[island])
    }

    /// Express the angles behind `to` on the reference of `from`, less than half a turn apart.
    fn join_angles(&mut self, from: usize, to: usize) {
        let islands = self.propagator.islands.clone();
        let (kept, moved) = match (islands.of_bus[from], islands.of_bus[to]) {
            (Some(a), Some(b)) if a != b => (from, to),
            (Some(_), None) => return self.lay_dark_angles(from, to),
            (None, Some(_)) => return self.lay_dark_angles(to, from),
            _ => return,
        };
        let apart = wrapped(self.full_angle_rad(moved) - self.full_angle_rad(kept));
        let target = self.motion.angle_rad[kept] + apart;
        let turn = target - self.motion.angle_rad[moved];
        for (bus, island) in islands.of_bus.iter().enumerate() {
            if *island == islands.of_bus[moved] {
                self.motion.angle_rad[bus] += turn;
            }
        }
        if let (Some(a), Some(b)) = (islands.of_bus[kept], islands.of_bus[moved]) {
            self.island_angle_rad[b] = self.island_angle_rad[a];
        }
    }

    /// A dark piece comes up on the angle and frequency of the bus it is closed on.
    fn lay_dark_angles(&mut self, live: usize, dark: usize) {
        let closed = &self.switches.line_closed;
        let ends = &self.constants.line_ends;
        let bus_count = self.motion.angle_rad.len();
        let (piece, _) = crate::grid::graph::components(bus_count, ends, closed);
        for bus in 0..bus_count {
            if piece[bus] == piece[dark] {
                self.motion.angle_rad[bus] = self.motion.angle_rad[live];
                self.motion.speed[bus] = self.motion.speed[live];
                self.shown.freq_dev_hz[bus] = self.shown.freq_dev_hz[live];
            }
        }
    }

    fn step_load(&mut self, bus: usize, mw: f64) -> Result<Vec<String>, Refused> {
        check_index("bus", bus, self.constants.buses.len())?;
        let name = &self.constants.buses[bus].name;
        let load_mw = self.switches.load_mw[bus] + mw;
        if !load_mw.is_finite() {
            return Err(Refused::NotFinite { bus: name.clone(), mw });
        }
        let way = if mw < 0.0 { "falls" } else { "rises" };
        let dark = match self.propagator.islands.of_bus[bus] {
            Some(_) => "",
            None => " once it is live again",
        };
        let told =
            format!("load at bus {name} {way} by {:.1} MW to {load_mw:.1} MW{dark}", mw.abs());
        self.change(told, |plant| plant.switches.load_mw[bus] = load_mw)
    }

    fn trip_unit(&mut self, unit: usize) -> Result<Vec<String>, Refused> {
        check_index("unit", unit, self.constants.units.len())?;
        let name = self.constants.units[unit].name.clone();
        if !self.switches.unit_in[unit] {
            return Err(Refused::AlreadyOut { unit: name });
        }
        let told = format!("unit {name} trips at {:.1} MW", self.motion.output_mw[unit]);
        self.change(told, |plant| plant.take_off(unit))
    }

    /// Out of service: output, reference and mode go back to nothing.
    fn take_off(&mut self, unit: usize) {
        self.switches.unit_in[unit] = false;
        self.switches.mode[unit] = Mode::Free;
        self.motion.output_mw[unit] = 0.0;
        self.reference_mw[unit] = 0.0;
        self.drive_mw[unit] = 0.0;
        self.ramp_mw[unit] = 0.0;
    }

    fn return_unit(&mut self, unit: usize) -> Result<Vec<String>, Refused> {
        check_index("unit", unit, self.constants.units.len())?;
        let data = &self.constants.units[unit];
        let (name, bus, bias_mw) = (data.name.clone(), data.bus, data.bias_mw);
        if self.switches.unit_in[unit] {
            return Err(Refused::AlreadyIn { unit: name });
        }
        if self.propagator.islands.of_bus[bus].is_none() {
            return Err(Refused::BusDark {
                unit: name,
                bus: self.constants.buses[bus].name.clone(),
            });
        }
        self.change(format!("unit {name} is back at 0 MW"), |plant| {
            plant.switches.unit_in[unit] = true;
            plant.drive_mw[unit] = bias_mw;
        })
    }

    /// Change the switches, let islands follow, and tell; or put everything back.
    fn change(
        &mut self,
        told: String,
        act: impl FnOnce(&mut Self),
    ) -> Result<Vec<String>, Refused> {
        let before = self.clone();
        act(self);
        let islands = self.switches.islands(&self.constants);
        let constants = self.constants.clone();
        let mut lost_units = Vec::new();
        for (unit, data) in constants.units.iter().enumerate() {
            if self.switches.unit_in[unit] && islands.of_bus[data.bus].is_none() {
                self.take_off(unit);
                lost_units.push(unit);
            }
        }
        if !self.adopt_switches() {
            *self = before;
            return Err(Refused::Unsolvable);
        }
        self.follow_islands(&before.propagator.islands, islands);
        self.load_motion();
        self.motion.turn_back(&self.propagator, &mut self.island_angle_rad);
        self.evaluate();
        self.show_event();
        let mut sentences = vec![told];
        tell::islands(&before, self, &lost_units, &mut sentences);
        Ok(sentences)
    }

    /// Every new island takes its angle against nominal from where its buses were.
    fn follow_islands(&mut self, before: &Islands, now: Islands) {
        let mut angle_rad = vec![None; now.count];
        for (island, was) in now.of_bus.iter().zip(&before.of_bus) {
            if let (Some(island), Some(was)) = (*island, *was) {
                angle_rad[island].get_or_insert(self.island_angle_rad[was]);
            }
        }
        self.island_angle_rad = angle_rad.into_iter().map(Option::unwrap_or_default).collect();
    }
}

fn check_index(what: &'static str, index: usize, count: usize) -> Result<(), Refused> {
    if index < count { Ok(()) } else { Err(Refused::Unknown { what, index }) }
}
