//! Ranges of the unknowns: what a rung allows.
//!
//! Contract: rungs differ here and nowhere else. `keep` and `lean` leave each
//! unit its reserve, `stretch` adds reserve and emergency range, `shed` adds the
//! feeders; ties move only while they are open. Ranges are static limits, never
//! ramp limits, so that a proof speaks of where the area can rest.

use super::feeders::Feeders;
use super::rows::Rows;
use crate::law::kernel::{abs, at, max, min, put};
use crate::law::scale::Column;
use crate::measure::Measured;
use crate::neighbour::TieEnd;
use crate::network::Network;
use crate::plan::Plan;
use hedgerow_protocol::charter::Unit;
use hedgerow_protocol::limits::TIES_MAX;
use hedgerow_protocol::message::Rung;

/// Low and high ends of every unknown's range, pu.
#[derive(Clone, Debug)]
pub struct Boxes<const X: usize> {
    /// Low ends.
    pub low: [f32; X],
    /// High ends.
    pub high: [f32; X],
}

impl<const X: usize> Boxes<X> {
    /// Everything closed.
    pub const fn new() -> Self {
        Self { low: [0.0; X], high: [0.0; X] }
    }

    /// Set the range of one unknown.
    pub fn set(&mut self, col: usize, low: f32, high: f32) {
        put(&mut self.low, col, min(low, high));
        put(&mut self.high, col, high);
    }

    /// Range of one unknown.
    pub fn get(&self, col: usize) -> (f32, f32) {
        (at(&self.low, col), at(&self.high, col))
    }

    /// Shrink the range of one unknown by a share of its width at each end.
    fn tighten(&mut self, col: usize, share: f32) {
        let (low, high) = self.get(col);
        let by = share * (high - low);
        self.set(col, low + by, high - by);
    }
}

impl<const X: usize> Default for Boxes<X> {
    fn default() -> Self {
        Self::new()
    }
}

/// Everything the ranges depend on.
pub struct View<'a, const B: usize, const X: usize, const R: usize> {
    /// The plan.
    pub plan: &'a Plan<B, X, R>,
    /// The network.
    pub network: &'a Network<B, R>,
    /// What was measured.
    pub measured: &'a Measured<B, X, R>,
    /// The rows.
    pub rows: &'a Rows,
    /// The feeders.
    pub feeders: &'a Feeders<X>,
    /// Agreed export of each tie now, pu.
    pub schedule: &'a [f32; TIES_MAX],
}

impl<const B: usize, const X: usize, const R: usize> View<'_, B, X, R> {
    /// Whether the steward moves a unit.
    pub fn is_movable(&self, index: usize, unit: &Unit) -> bool {
        let on = self.measured.unit_in_service.get(index).copied().unwrap_or(false);
        unit.available && on && self.network.is_kept(unit.bus.into())
    }

    /// Ranges of units and feeders on a rung.
    pub fn actuators(&self, rung: Rung, boxes: &mut Boxes<X>) {
        for (index, unit) in self.plan.units.iter().enumerate() {
            let (low, high) = match rung {
                _ if !self.is_movable(index, unit) => (0.0, 0.0),
                Rung::Keep | Rung::Lean => (unit.low, unit.high),
                Rung::Stretch | Rung::Shed => (unit.emergency_low, unit.emergency_high),
            };
            boxes.set(index, low, high);
        }
        for (index, feeder) in self.plan.feeders.iter().enumerate() {
            let kept = self.network.is_kept(feeder.bus.into());
            let load = self.measured.feeder_load.get(index).copied().flatten();
            let load = max(load.unwrap_or(feeder.load), 0.0);
            let (low, high) = match rung {
                _ if !kept => (0.0, 0.0),
                Rung::Keep | Rung::Lean | Rung::Stretch => (0.0, 0.0),
                Rung::Shed => self.feeders.range(index, feeder, load),
            };
            boxes.set(self.plan.units.len() + index, low, high);
        }
    }

    /// Ranges of one tie's deviations while it is open.
    pub fn open_tie(&self, index: usize, boxes: &mut Boxes<X>) {
        let Some(tie) = self.plan.ties.get(index) else {
            return;
        };
        let (band, schedule) = (self.plan.settings.tie_band, at(self.schedule, index));
        let low = max(-band, -tie.rating - schedule);
        let high = min(band, tie.rating - schedule);
        boxes.set(self.plan.tie_col(index), min(low, 0.0), max(high, 0.0));
        let angle = if self.rows.has_angle(index) { self.plan.settings.angle_band } else { 0.0 };
        boxes.set(self.plan.angle_col(index), -angle, angle);
    }

    /// Ranges of one tie's deviations while schedule is held.
    pub fn closed_tie(&self, index: usize, boxes: &mut Boxes<X>) {
        boxes.set(self.plan.tie_col(index), 0.0, 0.0);
        boxes.set(self.plan.angle_col(index), 0.0, 0.0);
    }

    /// Ranges of all ties: open ones by a rule, the others closed.
    pub fn ties(&self, is_open: impl Fn(usize) -> bool, boxes: &mut Boxes<X>) {
        for index in 0..self.plan.ties.len() {
            if is_open(index) && self.rows.is_attached(index) {
                self.open_tie(index, boxes);
            } else {
                self.closed_tie(index, boxes);
            }
        }
    }

    /// Narrow one tie to a value along the line, give or take a slack.
    pub fn pin_tie(&self, index: usize, along: [f32; 2], slack: [f32; 2], boxes: &mut Boxes<X>) {
        let sign = self.sign(index);
        let [flow, angle] = along;
        let [flow_slack, angle_slack] = slack;
        let col = self.plan.tie_col(index);
        boxes.set(col, sign * flow - flow_slack, sign * flow + flow_slack);
        if self.rows.has_angle(index) {
            let col = self.plan.angle_col(index);
            boxes.set(col, angle - angle_slack, angle + angle_slack);
        }
    }

    /// +1 where this area is at the line's `from` end, -1 at its `to` end.
    pub fn sign(&self, index: usize) -> f32 {
        if self.plan.ties.get(index).is_some_and(|tie| tie.from_end) { 1.0 } else { -1.0 }
    }

    /// Ranges for the shadow: the next tighter rung, shrunk by the climb margin.
    ///
    /// Above `lean` the tie flows stay where they are and only the mid-tie angles
    /// may follow; to climb to `keep` both must be on schedule.
    pub fn shadow(&self, rung: Rung, ends: &[TieEnd; TIES_MAX], boxes: &mut Boxes<X>) {
        let tighter = rung.up().unwrap_or(Rung::Keep);
        self.actuators(tighter, boxes);
        for col in 0..self.plan.actuators() {
            boxes.tighten(col, self.plan.settings.climb_margin);
        }
        for (index, end) in ends.iter().enumerate().take(self.plan.ties.len()) {
            if tighter == Rung::Keep || !self.rows.is_attached(index) {
                self.closed_tie(index, boxes);
            } else {
                self.pin_tie(index, end.deviation(), [0.0, self.plan.settings.angle_band], boxes);
            }
        }
    }

    /// What each unknown is to the scaling, given its range.
    pub fn columns(&self, boxes: &Boxes<X>, kinds: &mut [Column; X]) {
        let units = self.plan.units.len();
        for (col, kind) in kinds.iter_mut().enumerate() {
            let (low, high) = boxes.get(col);
            *kind = if col >= self.plan.cols() || (low == 0.0 && high == 0.0) {
                Column::Closed
            } else if col < units && low < high {
                Column::Own
            } else {
                Column::Other
            };
        }
    }
}

/// How far two ends of a tie are apart, and their mean, along the line.
pub fn between(ours: [f32; 2], theirs: [f32; 2]) -> ([f32; 2], [f32; 2]) {
    let ([a, b], [c, d]) = (ours, theirs);
    ([0.5 * (a + c), 0.5 * (b + d)], [0.5 * abs(a - c), 0.5 * abs(b - d)])
}
