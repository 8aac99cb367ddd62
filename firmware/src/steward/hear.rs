//! What the steward takes in, and values that move on a ramp.
//!
//! Contract: a message that does not fit the charter, or asks for something out
//! of range, is dropped whole; `hear` says whether it was used.

use super::Steward;
use crate::law::kernel::abs;
use crate::measure::Measured;
use hedgerow_protocol::message::Message;

/// A value on its way to another.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Ramped {
    pub(super) now: f32,
    goal: f32,
    ticks_left: u32,
}

impl Ramped {
    pub(super) const fn at(value: f32) -> Self {
        Self { now: value, goal: value, ticks_left: 0 }
    }

    pub(super) fn go(&mut self, goal: f32, ticks: u32) {
        self.goal = goal;
        self.ticks_left = ticks;
        if ticks == 0 {
            self.now = goal;
        }
    }

    pub(super) fn pass(&mut self) {
        if self.ticks_left > 0 {
            self.now += (self.goal - self.now) / self.ticks_left as f32;
            self.ticks_left -= 1;
        }
        if self.ticks_left == 0 {
            self.now = self.goal;
        }
    }
}

impl<const B: usize, const X: usize, const R: usize> Steward<B, X, R> {
    /// Take in a message addressed to this steward.
    ///
    /// Returns whether it could be used; what can not is dropped whole.
    pub fn hear(&mut self, message: &Message<'_>) -> bool {
        if !self.ready {
            return false;
        }
        let per_mw = 1.0 / self.plan.base_mva;
        match message {
            Message::Measurements(m) => {
                let newer =
                    !self.measured.any || (m.tick.wrapping_sub(self.measured.tick) as i32) > 0;
                let fits = newer && Measured::fits(&self.plan, m);
                if fits {
                    self.measured.take(&self.plan, &self.network, m);
                }
                fits
            }
            Message::Schedule(s) => {
                let goal = s.export_mw * per_mw;
                let tie = self.plan.ties.get(usize::from(s.tie));
                let fits = tie.is_some_and(|tie| abs(goal) <= tie.rating);
                match self.schedule.get_mut(usize::from(s.tie)) {
                    Some(schedule) if fits => schedule.go(goal, s.ramp_ticks),
                    _ => return false,
                }
                true
            }
            Message::BasePoint(b) => {
                let goal = b.base_mw * per_mw;
                let unit = self.plan.units.get(usize::from(b.unit));
                let fits =
                    unit.is_some_and(|u| goal >= u.emergency_low && goal <= u.emergency_high);
                match self.base.get_mut(usize::from(b.unit)) {
                    Some(base) if fits => base.go(goal, b.ramp_ticks),
                    _ => return false,
                }
                true
            }
            Message::Restore(_) => {
                self.feeders.release();
                true
            }
            Message::TieTerms(terms) => {
                let ties = self.plan.ties.iter().zip(&mut self.ends);
                let mut ends = ties.filter(|(tie, _)| tie.number == terms.tie);
                ends.next().is_some_and(|(_, end)| end.hear(terms, &self.plan.settings))
            }
            Message::Hello(_)
            | Message::CharterPart(_)
            | Message::CharterState(_)
            | Message::Run(_)
            | Message::Stop(_)
            | Message::Effort(_)
            | Message::Orders(_)
            | Message::Status(_)
            | Message::ProofPart(_) => false,
        }
    }
}
