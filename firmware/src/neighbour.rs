//! Agreement with the neighbours on how far each tie leaves its schedule.
//!
//! Contract: both ends of an open tie hold a price pair and a round number; a
//! round ends at an end when its own bid and the other's bid of the same round
//! are there. Messages carry full state, so applying one twice, or an old one
//! after a newer one, changes nothing; loss and delay only slow the rounds. A tie
//! is open only while both ends say so and have spoken lately; otherwise its
//! deviation and price are zero: schedule is held.
//!
//! | code | symbol | meaning | unit |
//! |---|---|---|---|
//! | `price` | z | price pair in the law's cost (flow, angle) | cost per pu |
//! | `bid` | q | -z + 2 rho v, what this end offers in a round | cost per pu |
//! | `deviation` | v | this end's deviation, along the line (flow, angle) | pu |
//!
//! Source: relaxed alternating-direction method on the edges of a graph, S. Boyd
//! et al., "Distributed Optimization and Statistical Learning via the Alternating
//! Direction Method of Multipliers", 2011, section 7; the bid of the round before
//! travels along, as in the alternating-bit protocol (K. Bartlett, R. Scantlebury,
//! P. Wilkinson, "A note on reliable full-duplex transmission over half-duplex
//! links", CACM 12(5), 1969).

use crate::law::kernel::abs;
use hedgerow_protocol::charter::{Settings, Tie};
use hedgerow_protocol::message::{Rung, TieTerms};

/// A distance that means "nobody leans".
pub const NOBODY: u8 = u8::MAX;
/// A price beyond this is not believed, cost per pu.
const PRICE_MAX: f32 = 1e4;
/// Low-pass gain of a neighbour's deviation per tick (2 s at a 100 ms tick).
const TREND_GAIN: f32 = 0.05;

/// One end's state of one tie.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct TieEnd {
    price: [f32; 2],
    bid: [f32; 2],
    bid_before: [f32; 2],
    deviation: [f32; 2],
    round: u16,
    ready: bool,
    round_ticks: u16,
    theirs: Option<TieTerms>,
    silent_ticks: u16,
    asked_ticks: u16,
    trend: f32,
    controllable: bool,
}

impl TieEnd {
    /// Schedule held, nobody heard.
    pub const fn new() -> Self {
        Self {
            price: [0.0; 2],
            bid: [0.0; 2],
            bid_before: [0.0; 2],
            deviation: [0.0; 2],
            round: 0,
            ready: false,
            round_ticks: 0,
            theirs: None,
            silent_ticks: u16::MAX,
            asked_ticks: 0,
            trend: 0.0,
            controllable: true,
        }
    }

    /// Before a charter: all zero, so that a static one takes no flash.
    pub const fn blank() -> Self {
        Self { silent_ticks: 0, controllable: false, ..Self::new() }
    }

    /// Price pair in the law's cost.
    pub fn price(&self) -> [f32; 2] {
        self.price
    }

    /// This end's deviation, along the line.
    pub fn deviation(&self) -> [f32; 2] {
        self.deviation
    }

    /// Round of the agreement.
    pub fn round(&self) -> u16 {
        self.round
    }

    /// What the other end last said, if it spoke within `ticks`.
    pub fn theirs(&self, ticks: u16) -> Option<&TieTerms> {
        self.theirs.as_ref().filter(|_| self.silent_ticks <= ticks)
    }

    /// Low-passed deviation of the other end, along the line, pu.
    pub fn trend(&self) -> f32 {
        self.trend
    }

    /// Take in what the other end says.
    ///
    /// Returns whether it was believed: a value out of range drops the message whole.
    pub fn hear(&mut self, terms: &TieTerms, settings: &Settings) -> bool {
        if !is_sane(terms, settings) {
            return false;
        }
        let newer = self.theirs.as_ref().is_none_or(|old| {
            self.silent_ticks == u16::MAX || (terms.tick.wrapping_sub(old.tick) as i32) > 0
        });
        if newer {
            self.theirs = Some(*terms);
            self.silent_ticks = 0;
            self.advance(terms, settings);
        }
        true
    }

    /// End the round if both bids of it are there.
    fn advance(&mut self, terms: &TieTerms, settings: &Settings) {
        let ahead = terms.round.wrapping_sub(self.round) as i16;
        if ahead > 1 {
            self.round = terms.round;
            self.ready = false;
            self.round_ticks = 0;
            return;
        }
        let their_bid = match ahead {
            0 if self.ready && terms.ready => terms.bid,
            1 if self.ready => terms.bid_before,
            _ => return,
        };
        let relax = settings.agreement_relax;
        for (price, bid) in self.price.iter_mut().zip(their_bid) {
            *price = (1.0 - relax) * *price + relax * bid;
        }
        self.bid_before = self.bid;
        self.round = self.round.wrapping_add(1);
        self.ready = false;
        self.round_ticks = 0;
    }

    /// One tick has passed; `asks` says whether this end wants the tie open.
    pub fn pass(&mut self, asks: bool, controllable: bool) {
        self.silent_ticks = self.silent_ticks.saturating_add(1);
        self.asked_ticks = if asks { self.asked_ticks.saturating_add(1) } else { 0 };
        self.controllable = controllable;
        if let Some(theirs) = &self.theirs {
            let [flow, _] = theirs.deviation;
            self.trend += TREND_GAIN * (flow - self.trend);
        }
    }

    /// Whether the tie may leave schedule now.
    pub fn is_open(&self, asks: bool, settings: &Settings) -> bool {
        let theirs = self.theirs(settings.neighbour_ticks);
        asks && self.controllable && theirs.is_some_and(|theirs| theirs.open && !theirs.detached)
    }

    /// Whether the tie must count as open because the other end may still answer.
    pub fn is_pending(&self, asks: bool, settings: &Settings) -> bool {
        asks && self.controllable && self.asked_ticks <= settings.neighbour_ticks
    }

    /// Take this tick's own deviation and bid, or fall back to schedule.
    pub fn settle(&mut self, open: bool, deviation: [f32; 2], settings: &Settings) {
        if !open {
            self.price = [0.0; 2];
            self.deviation = [0.0; 2];
            self.bid = [0.0; 2];
            self.bid_before = [0.0; 2];
            self.ready = false;
            self.round_ticks = 0;
            return;
        }
        self.deviation = deviation;
        self.round_ticks = self.round_ticks.saturating_add(1);
        if self.round_ticks >= settings.settle_ticks && !self.ready {
            let twice = 2.0 * settings.agreement_penalty;
            for ((bid, price), v) in self.bid.iter_mut().zip(self.price).zip(deviation) {
                *bid = twice * v - price;
            }
            self.ready = true;
        }
    }

    /// The message of this tick.
    pub fn say(&self, tie: &Tie, tick: u32, asks: bool, distance: u8, rung: Rung) -> TieTerms {
        TieTerms {
            tie: tie.number,
            tick,
            round: self.round,
            ready: self.ready,
            // Adding zero turns -0 into +0.
            bid: self.bid.map(|x| x + 0.0),
            bid_before: self.bid_before.map(|x| x + 0.0),
            deviation: self.deviation.map(|x| x + 0.0),
            open: asks && self.controllable,
            detached: !self.controllable,
            distance,
            rung,
        }
    }
}

impl Default for TieEnd {
    fn default() -> Self {
        Self::new()
    }
}

fn is_sane(terms: &TieTerms, settings: &Settings) -> bool {
    let within = |value: f32, most: f32| value.is_finite() && abs(value) <= most;
    let [flow, angle] = terms.deviation;
    within(flow, 2.0 * settings.tie_band)
        && within(angle, 2.0 * settings.angle_band)
        && terms.bid.iter().chain(&terms.bid_before).all(|&bid| within(bid, PRICE_MAX))
}

/// Areas between here and the nearest that leans, given the neighbours' word.
pub fn help_distance<'a>(rung: Rung, heard: impl Iterator<Item = Option<&'a TieTerms>>) -> u8 {
    if rung != Rung::Keep {
        return 0;
    }
    heard.flatten().map(|terms| terms.distance.saturating_add(1)).min().unwrap_or(NOBODY)
}
