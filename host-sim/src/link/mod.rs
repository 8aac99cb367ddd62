//! Links: how bytes get from one node to another, and what happens on the way.
//!
//! Contract: a [`Link`] is one direction between one pair of nodes and carries
//! bytes, never structs; what it hands over is one sealed frame at a time,
//! whole, hurt or not at all. Faults, counters and traces are middleware:
//! links around links, over the same trait.
//!
//! Data flow: sender -> [`Counted`] -> [`Traced`] -> [`Faulty`] -> [`Direct`]
//! and back out the same way to the receiver. Nothing allocates per frame once
//! the buffers have grown.

mod counted;
mod direct;
mod faulty;
pub mod random;
mod traced;

#[cfg(test)]
mod tests;

pub use counted::Counted;
pub use direct::Direct;
pub use faulty::{FAULTLESS, Faulty};
pub use traced::{Passing, Traced};

use crate::case::model::Links;

/// One direction between one pair of nodes.
///
/// Ticks are given, never read from a clock, and do not go back.
pub trait Link {
    /// Take one sealed frame, delimiter included, at this tick.
    fn send(&mut self, tick: u32, wire: &[u8]);

    /// Hand everything that has arrived by this tick to `sink`, a frame per call.
    fn receive(&mut self, tick: u32, sink: &mut dyn FnMut(&[u8]));

    /// What happened so far, as far as this link and those inside it know.
    fn tally(&self) -> Tally {
        Tally::default()
    }
}

impl<L: Link + ?Sized> Link for Box<L> {
    fn send(&mut self, tick: u32, wire: &[u8]) {
        (**self).send(tick, wire);
    }

    fn receive(&mut self, tick: u32, sink: &mut dyn FnMut(&[u8])) {
        (**self).receive(tick, sink);
    }

    fn tally(&self) -> Tally {
        (**self).tally()
    }
}

/// Counters of one link, in frames.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Tally {
    /// Given to the link.
    pub sent: u64,
    /// Handed to the receiver, copies and hurt ones included.
    pub delivered: u64,
    /// Dropped on the way: by chance, or in an outage.
    pub lost: u64,
    /// Sent on a second time by the link.
    pub duplicated: u64,
    /// Hurt by a flipped bit.
    pub corrupted: u64,
}

impl Tally {
    /// Frames that are still on the way.
    pub const fn in_flight(&self) -> u64 {
        (self.sent + self.duplicated).saturating_sub(self.lost + self.delivered)
    }
}

/// A counted link within this process with these faults.
///
/// `name` is the link's own, unique in a run (say `Ashmere > Brackwater`): its
/// fate depends on `seed` and `name` alone, not on what other links carry.
pub fn in_process(faults: &Links, seed: u64, name: &str) -> Counted<Faulty<Direct>> {
    let stream = random::stream(seed, &format!("link {name}"));
    Counted::new(Faulty::new(Direct::default(), faults, stream))
}
