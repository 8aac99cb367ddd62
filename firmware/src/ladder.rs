//! The ladder: when to give ground and when to take it back.
//!
//! Contract: a step down needs a proof in each of `proof_ticks` ticks in a row,
//! or proofs under what the neighbours deliver that persist; a climb needs a
//! witness: a point of the tighter rung, inside tightened limits, for
//! `climb_ticks` ticks in a row. While data are missing nothing moves. The rungs
//! differ in ranges only, so moves are bumpless.

use hedgerow_protocol::charter::Settings;
use hedgerow_protocol::message::Rung;

/// What one tick found out.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Finding {
    /// Data complete enough to judge.
    pub clear: bool,
    /// Proven impossible even with all the help that could come.
    pub hard: bool,
    /// Proven impossible with what the neighbours deliver.
    pub conditional: bool,
    /// The shadow fits the next tighter rung.
    pub witness: bool,
    /// Load is off by order.
    pub shedding: bool,
}

/// A step of the ladder.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum Move {
    /// Gave ground.
    Down {
        /// Rung before.
        from: Rung,
        /// Rung now.
        to: Rung,
    },
    /// Took ground back.
    Up {
        /// Rung before.
        from: Rung,
        /// Rung now.
        to: Rung,
    },
    /// Proven impossible on the lowest rung allowed: for the operator.
    Exhausted,
}

/// Present rung and what counts towards a move.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Ladder {
    rung: Rung,
    proven_ticks: u16,
    persist: u16,
    witness_ticks: u16,
    rung_ticks: u16,
    exhausted: bool,
}

impl Ladder {
    /// On `keep`.
    pub const fn new() -> Self {
        Self {
            rung: Rung::Keep,
            proven_ticks: 0,
            persist: 0,
            witness_ticks: 0,
            rung_ticks: 0,
            exhausted: false,
        }
    }

    /// Present rung.
    pub fn rung(&self) -> Rung {
        self.rung
    }

    /// Whether the present rung has been proven impossible for long enough.
    pub fn is_proven(&self, settings: &Settings) -> bool {
        self.proven_ticks >= settings.proof_ticks
    }

    /// Whether the tighter rung has been witnessed for long enough.
    pub fn is_ripe(&self, settings: &Settings) -> bool {
        self.witness_ticks >= settings.climb_ticks && self.rung_ticks >= settings.climb_ticks
    }

    /// Take in one tick's finding.
    pub fn tick(&mut self, found: Finding, settings: &Settings) -> Option<Move> {
        self.rung_ticks = self.rung_ticks.saturating_add(1);
        if !found.clear {
            self.proven_ticks = 0;
            self.witness_ticks = 0;
            return None;
        }
        self.count(found);
        let persists = self.persist >= settings.persist_ticks && self.rung != Rung::Keep;
        if self.is_proven(settings) || persists {
            return self.down(settings);
        }
        if !found.hard {
            self.exhausted = false;
        }
        let free = self.rung != Rung::Shed || !found.shedding;
        if self.is_ripe(settings) && free { self.climb() } else { None }
    }

    fn count(&mut self, found: Finding) {
        self.proven_ticks = if found.hard { self.proven_ticks.saturating_add(1) } else { 0 };
        self.persist = if found.hard || found.conditional {
            self.persist.saturating_add(1)
        } else {
            self.persist.saturating_sub(2)
        };
        let witnessed = found.witness && !found.hard;
        self.witness_ticks = if witnessed { self.witness_ticks.saturating_add(1) } else { 0 };
    }

    fn down(&mut self, settings: &Settings) -> Option<Move> {
        let lower = self.rung.down().filter(|rung| rung.number() <= settings.lowest_rung);
        let Some(to) = lower else {
            let first = !self.exhausted;
            self.exhausted = true;
            return first.then_some(Move::Exhausted);
        };
        let from = self.rung;
        self.set_rung(to);
        Some(Move::Down { from, to })
    }

    fn climb(&mut self) -> Option<Move> {
        let from = self.rung;
        let to = from.up()?;
        self.set_rung(to);
        Some(Move::Up { from, to })
    }

    /// The one place where the rung changes.
    fn set_rung(&mut self, rung: Rung) {
        *self = Self { rung, ..Self::new() };
    }
}

impl Default for Ladder {
    fn default() -> Self {
        Self::new()
    }
}
