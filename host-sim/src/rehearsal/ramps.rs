//! Schedules and base points as they are now: the plant side's own copy, moved
//! by the same events that the stewards are told of.

use crate::case::model::{Grid, Happening};

#[derive(Clone, Copy, Debug)]
struct Ramp {
    now: f64,
    goal: f64,
    left_s: f64,
}

impl Ramp {
    fn pass(&mut self, step_s: f64) {
        if self.left_s > step_s {
            self.now += (self.goal - self.now) * step_s / self.left_s;
            self.left_s -= step_s;
        } else {
            self.now = self.goal;
            self.left_s = 0.0;
        }
    }
}

/// Agreed tie flows and base points now.
#[derive(Clone, Debug)]
pub struct Ramps {
    schedule: Vec<Ramp>,
    base: Vec<Ramp>,
}

impl Ramps {
    /// Start from schedules per line and the grid's base points.
    pub fn new(grid: &Grid, schedules_mw: Vec<f64>) -> Self {
        let still = |now: f64| Ramp { now, goal: now, left_s: 0.0 };
        Self {
            schedule: schedules_mw.into_iter().map(still).collect(),
            base: grid.units.iter().map(|unit| still(unit.base_mw)).collect(),
        }
    }

    /// Take in an order that moves one of them.
    pub fn order(&mut self, what: &Happening) {
        let (ramp, goal, left_s) = match *what {
            Happening::Schedule { line, mw, ramp_s } => (self.schedule.get_mut(line), mw, ramp_s),
            Happening::BasePoint { unit, mw, ramp_s } => (self.base.get_mut(unit), mw, ramp_s),
            _ => return,
        };
        if let Some(ramp) = ramp {
            (ramp.goal, ramp.left_s) = (goal, left_s);
        }
    }

    /// A tick passes.
    pub fn pass(&mut self, step_s: f64) {
        self.schedule.iter_mut().chain(&mut self.base).for_each(|ramp| ramp.pass(step_s));
    }

    /// Agreed flow of a line, MW along the line; 0 for lines that are no ties.
    pub fn schedule_mw(&self, line: usize) -> f64 {
        self.schedule[line].now
    }

    /// Base point of a unit, MW.
    pub fn base_mw(&self, unit: usize) -> f64 {
        self.base[unit].now
    }
}
