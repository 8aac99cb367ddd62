//! Feeders: what is written to them, who lets them back, and which breaker opens.
//!
//! Contract: continuous feeders follow the law, but the total of what is off
//! returns no faster than the units can follow, unless frequency is high;
//! switched ones are opened one at a time, each time the smallest that covers
//! what is still missing (else the largest), so that the end is at most one
//! breaker above the least. A feeder whose charter says so stays off until the
//! operator lets it back.
//!
//! Simplification: the smallest *set* of breakers is not searched for.

use super::ranges::Boxes;
use crate::law::kernel::{at, clip, max, min, put};
use crate::plan::Plan;
use hedgerow_protocol::charter::Feeder;
use hedgerow_protocol::message::Rung;

/// Less than this is nothing: 0.1 MW on 100 MVA.
const NOTHING: f32 = 1e-3;
/// Ticks for which the law must stand still before a breaker is chosen.
const CALM_TICKS: u16 = 10;

/// State of the feeders. X unknowns at most.
#[derive(Clone, Debug)]
pub struct Feeders<const X: usize> {
    written: [f32; X],
    opened: [bool; X],
    locked: [bool; X],
    released: [bool; X],
    calm_ticks: u16,
    wait_s: f32,
}

/// What one tick brings to the feeders.
#[derive(Clone, Copy, Debug)]
pub struct FeederTick {
    /// Present rung.
    pub rung: Rung,
    /// Area frequency deviation, Hz.
    pub freq_dev_hz: f32,
    /// Largest row violation of the law's point, pu.
    pub violation: f32,
    /// Whether the verdict is `settled`.
    pub settled: bool,
    /// Whether the tighter rung has been witnessed for long enough.
    pub ripe: bool,
}

impl<const X: usize> Feeders<X> {
    /// All in service.
    pub const fn new() -> Self {
        Self {
            written: [0.0; X],
            opened: [false; X],
            locked: [false; X],
            released: [false; X],
            calm_ticks: 0,
            wait_s: 0.0,
        }
    }

    /// What is written to a feeder, pu.
    pub fn written(&self, index: usize) -> f32 {
        at(&self.written, index)
    }

    /// Total load off by order, pu.
    pub fn total(&self, count: usize) -> f32 {
        self.written.iter().take(count).fold(0.0, |sum, shed| sum + shed)
    }

    /// Feeders held for the operator, one bit each.
    pub fn locked_bits(&self) -> u64 {
        self.locked
            .iter()
            .take(64)
            .enumerate()
            .fold(0, |bits, (index, &locked)| bits | (u64::from(locked) << index))
    }

    /// Range of a feeder on `shed`, given the load it would take off now.
    pub fn range(&self, index: usize, feeder: &Feeder, load: f32) -> (f32, f32) {
        let written = at(&self.written, index);
        if flag(&self.opened, index) {
            (written, written)
        } else if flag(&self.locked, index) && !feeder.switched {
            (min(written, load), load)
        } else {
            (0.0, load)
        }
    }

    /// The operator lets everything that is held return.
    pub fn release(&mut self) {
        for (locked, released) in self.locked.iter_mut().zip(&mut self.released) {
            *released = *released || *locked;
            *locked = false;
        }
    }

    /// Take in the law's wishes and decide what is written.
    ///
    /// Units: pu. `wish` is the law's value per feeder, inside its range.
    pub fn update<const B: usize, const R: usize>(
        &mut self,
        plan: &Plan<B, X, R>,
        wish: &[f32; X],
        boxes: &Boxes<X>,
        now: FeederTick,
    ) {
        let calm = now.violation < plan.settings.climb_tolerance;
        self.calm_ticks = if calm { self.calm_ticks.saturating_add(1) } else { 0 };
        self.wait_s = max(self.wait_s - plan.settings.tick_s, 0.0);
        self.write_continuous(plan, wish, boxes, now.freq_dev_hz);
        if now.rung == Rung::Shed {
            self.open_next(plan, wish, boxes);
            if now.ripe {
                self.close_next(plan);
            }
            if now.settled {
                self.lock(plan);
            }
        }
    }

    /// Follow the law, but let the total return no faster than the ramp.
    fn write_continuous<const B: usize, const R: usize>(
        &mut self,
        plan: &Plan<B, X, R>,
        wish: &[f32; X],
        boxes: &Boxes<X>,
        freq_dev_hz: f32,
    ) {
        let settings = &plan.settings;
        let continuous = |index: usize, feeder: &Feeder| !feeder.switched && index < X;
        let (mut before, mut wished, mut room) = (0.0, 0.0, 0.0);
        for (index, _) in plan.feeders.iter().enumerate().filter(|&(i, f)| continuous(i, f)) {
            before += at(&self.written, index);
            wished += at(wish, index);
            room += max(at(&self.written, index) - at(wish, index), 0.0);
        }
        let free = freq_dev_hz > settings.return_free_hz;
        let least = before - settings.return_ramp * settings.tick_s;
        let excess = if free { 0.0 } else { max(least - wished, 0.0) };
        // Only the excess over the law's own total is held; redistribution is free.
        let share = if room > 0.0 { min(excess / room, 1.0) } else { 0.0 };
        for (index, _) in plan.feeders.iter().enumerate().filter(|&(i, f)| continuous(i, f)) {
            let (wished, written) = (at(wish, index), at(&self.written, index));
            let held = wished + share * max(written - wished, 0.0);
            let (_, high) = boxes.get(plan.units.len() + index);
            put(&mut self.written, index, clip(held, 0.0, max(high, written)));
        }
    }

    /// Open one more breaker if the law stands still and still wants load from switched feeders.
    fn open_next<const B: usize, const R: usize>(
        &mut self,
        plan: &Plan<B, X, R>,
        wish: &[f32; X],
        boxes: &Boxes<X>,
    ) {
        if self.calm_ticks < CALM_TICKS {
            return;
        }
        let mut missing = 0.0;
        let closed =
            |s: &Self, index: usize, feeder: &Feeder| feeder.switched && !flag(&s.opened, index);
        for (index, _) in plan.feeders.iter().enumerate().filter(|&(i, f)| closed(self, i, f)) {
            missing += at(wish, index);
        }
        if missing < NOTHING {
            return;
        }
        let mut best: Option<(usize, f32)> = None;
        for (index, _) in plan.feeders.iter().enumerate().filter(|&(i, f)| closed(self, i, f)) {
            let (_, load) = boxes.get(plan.units.len() + index);
            if at(wish, index) < NOTHING || load < NOTHING {
                continue;
            }
            let better = best.is_none_or(|(_, other)| match (load >= missing, other >= missing) {
                (true, true) => load < other,
                (true, false) => true,
                (false, true) => false,
                (false, false) => load > other,
            });
            if better {
                best = Some((index, load));
            }
        }
        if let Some((index, load)) = best {
            self.set_opened(index, true, load);
            self.calm_ticks = 0;
        }
    }

    /// Close the smallest breaker that may return.
    fn close_next<const B: usize, const R: usize>(&mut self, plan: &Plan<B, X, R>) {
        if self.wait_s > 0.0 {
            return;
        }
        let mut best: Option<(usize, f32)> = None;
        for (index, feeder) in plan.feeders.iter().enumerate() {
            let may = feeder.automatic || flag(&self.released, index);
            let load = at(&self.written, index);
            if flag(&self.opened, index) && may && best.is_none_or(|(_, other)| load < other) {
                best = Some((index, load));
            }
        }
        if let Some((index, load)) = best {
            self.set_opened(index, false, 0.0);
            self.wait_s = load / max(plan.settings.return_ramp, NOTHING);
        }
    }

    /// At rest on `shed`, what the operator must restore is held.
    fn lock<const B: usize, const R: usize>(&mut self, plan: &Plan<B, X, R>) {
        for (index, feeder) in plan.feeders.iter().enumerate() {
            let off = at(&self.written, index) > NOTHING;
            let free = feeder.automatic || flag(&self.released, index);
            if let Some(locked) = self.locked.get_mut(index) {
                *locked = *locked || (off && !free);
            }
            if let (false, Some(released)) = (off, self.released.get_mut(index)) {
                *released = false;
            }
        }
    }

    fn set_opened(&mut self, index: usize, opened: bool, load: f32) {
        if let Some(slot) = self.opened.get_mut(index) {
            *slot = opened;
        }
        put(&mut self.written, index, load);
        if let (true, Some(released)) = (opened, self.released.get_mut(index)) {
            *released = false;
        }
    }
}

impl<const X: usize> Default for Feeders<X> {
    fn default() -> Self {
        Self::new()
    }
}

fn flag(flags: &[bool], index: usize) -> bool {
    flags.get(index).copied().unwrap_or(false)
}
