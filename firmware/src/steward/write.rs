//! From the law's point to what is written: set-points, tie deviations, feeders.
//!
//! Contract: every set-point written is inside the unit's range; a unit that is
//! out of sight, or on a piece that was cut off, keeps its last order.

use super::Steward;
use super::feeders::FeederTick;
use crate::law::kernel::{abs, at, clip, max, min, put};
use crate::measure::Sight;
use hedgerow_protocol::message::Verdict;

/// A set-point that moves less than this in a tick stands still, pu (0.01 MW on 100 MVA).
const STILL: f32 = 1e-4;

impl<const B: usize, const X: usize, const R: usize> Steward<B, X, R> {
    /// The law's value of every unknown, inside its range.
    pub(super) fn wishes(&self) -> [f32; X] {
        let mut wish = [0.0; X];
        for (col, value) in wish.iter_mut().enumerate().take(self.plan.cols()) {
            let (low, high) = self.boxes.get(col);
            *value = self.main.value(&self.scaled, col, low, high);
        }
        wish
    }

    /// Write the units' set-points; true when none of them moves any more.
    pub(super) fn write_units(&mut self, wish: &[f32; X], sight: Sight) -> bool {
        let mut still = true;
        for (index, unit) in self.plan.units.iter().enumerate() {
            // Cut off from sight or from the area: the last order stands.
            let frozen = sight == Sight::None
                || !self.estimate.is_started()
                || !self.network.is_kept(unit.bus.into());
            let before = at(&self.setpoint, index);
            let value = if frozen { before } else { at(wish, index) };
            let value = clip(value, min(unit.emergency_low, 0.0), max(unit.emergency_high, 0.0));
            still &= abs(value - before) < STILL;
            put(&mut self.setpoint, index, value);
        }
        still
    }

    pub(super) fn settle_ends(&mut self, wish: &[f32; X]) {
        let settings = self.plan.settings;
        let ties = self.plan.ties.iter().zip(&mut self.ends).zip(&self.open).enumerate();
        for (index, ((tie, end), &open)) in ties {
            let flow = at(wish, self.plan.actuators() + index);
            let angle = at(wish, self.plan.actuators() + self.plan.ties.len() + index);
            let along = if tie.from_end { flow } else { -flow };
            end.settle(open, [along, angle], &settings);
        }
    }

    pub(super) fn write_feeders(&mut self, wish: &[f32; X], violation: f32, sight: Sight) -> f32 {
        // Without sight what was ordered last stands, as for the units.
        if sight == Sight::None || !self.estimate.is_started() {
            return self.feeders.total(self.plan.feeders.len());
        }
        let mut feeder_wish = [0.0; X];
        let wishes = wish.iter().skip(self.plan.units.len());
        for (slot, value) in feeder_wish.iter_mut().zip(wishes).take(self.plan.feeders.len()) {
            *slot = *value;
        }
        let now = FeederTick {
            rung: self.ladder.rung(),
            freq_dev_hz: self.measured.freq_dev_hz.unwrap_or(0.0),
            violation,
            settled: self.verdict == Verdict::Settled,
            ripe: self.ladder.is_ripe(&self.plan.settings),
        };
        self.feeders.update(&self.plan, &feeder_wish, &self.boxes, now);
        self.feeders.total(self.plan.feeders.len())
    }
}
