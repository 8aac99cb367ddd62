//! A link with the faults that real ones have, drawn from a named stream.
//!
//! Contract: the fate of a frame depends on the stream and on how many frames
//! came before it, not on its bytes; each frame takes the same number of words
//! from the stream, so that changing one chance leaves all other fates as they
//! were. Frames due in the same tick keep the order in which they were sent,
//! but for those that are to be overtaken.
//!
//! Data flow: send -> fate (lost, copied, hurt, due tick) -> held until due ->
//! inner link -> receiver.

use super::random::{happens, up_to};
use super::{Link, Tally};
use crate::case::model::Links;
use rand::Rng;
use rand::rngs::ChaCha8Rng;
use std::ops::Range;

/// A link without any fault and without delay.
pub const FAULTLESS: Links = Links {
    delay_ticks: 0,
    jitter_ticks: 0,
    loss: 0.0,
    duplicate: 0.0,
    reorder: 0.0,
    corrupt: 0.0,
    plant_too: false,
};

/// A frame on its way.
#[derive(Clone, Debug)]
struct Held {
    due_tick: u32,
    overtaken: bool,
    order: u64,
    bytes: Vec<u8>,
}

impl Held {
    /// Earlier keys are handed over first.
    fn key(&self) -> (u32, bool, u64) {
        (self.due_tick, self.overtaken, self.order)
    }
}

/// A link that delays, loses, copies, reorders and hurts frames, and falls silent.
///
/// - A frame sent at tick t is due at t + delay + jitter; jitter is drawn for
///   each copy, evenly from 0 to its most.
/// - A frame to be overtaken is due one tick later, after all others of that tick.
/// - In an outage nothing is taken and what falls due is lost.
#[derive(Debug)]
pub struct Faulty<L> {
    inner: L,
    faults: Links,
    stream: ChaCha8Rng,
    outages: Vec<Range<u32>>,
    held: Vec<Held>,
    spare: Vec<Vec<u8>>,
    order: u64,
    tally: Tally,
}

impl<L> Faulty<L> {
    /// Put these faults before `inner`.
    pub fn new(inner: L, faults: &Links, stream: ChaCha8Rng) -> Self {
        Self {
            inner,
            faults: faults.clone(),
            stream,
            outages: Vec::new(),
            held: Vec::new(),
            spare: Vec::new(),
            order: 0,
            tally: Tally::default(),
        }
    }

    /// Let nothing pass in these ticks.
    pub fn silence(&mut self, ticks: Range<u32>) {
        self.outages.push(ticks);
    }

    /// Whether nothing passes at this tick.
    pub fn is_silent(&self, tick: u32) -> bool {
        self.outages.iter().any(|outage| outage.contains(&tick))
    }

    /// Hold a copy of the frame until it is due.
    fn hold(&mut self, due_tick: u32, overtaken: bool, wire: &[u8], flipped: Option<u32>) {
        let mut bytes = self.spare.pop().unwrap_or_default();
        bytes.clear();
        bytes.extend_from_slice(wire);
        if let Some(word) = flipped
            && flip_bit(&mut bytes, word)
        {
            self.tally.corrupted += 1;
        }
        self.held.push(Held { due_tick, overtaken, order: self.order, bytes });
        self.order += 1;
    }
}

/// Flip the bit that the word chooses; false when there is none.
fn flip_bit(bytes: &mut [u8], word: u32) -> bool {
    let bits = bytes.len() as u64 * 8;
    let bit = (u64::from(word) * bits) >> 32;
    match bytes.get_mut((bit / 8) as usize) {
        Some(byte) => {
            *byte ^= 1 << (bit % 8);
            true
        }
        None => false,
    }
}

impl<L: Link> Link for Faulty<L> {
    fn send(&mut self, tick: u32, wire: &[u8]) {
        // Always the same words in the same order; see the module's contract.
        let [lose, copy, reorder, hurt, bit, jitter, jitter_copy]: [u32; 7] =
            std::array::from_fn(|_| self.stream.next_u32());
        if self.is_silent(tick) || happens(self.faults.loss, lose) {
            self.tally.lost += 1;
            return;
        }
        let most = self.faults.jitter_ticks;
        let due = |word| {
            tick.saturating_add(u32::from(self.faults.delay_ticks))
                .saturating_add(up_to(most, word))
        };
        let (first_due, copy_due) = (due(jitter), due(jitter_copy));
        let overtaken = happens(self.faults.reorder, reorder);
        let copied = happens(self.faults.duplicate, copy);
        let flipped = happens(self.faults.corrupt, hurt).then_some(bit);
        let first_due = first_due.saturating_add(u32::from(overtaken));
        self.hold(first_due, overtaken, wire, flipped);
        if copied {
            self.tally.duplicated += 1;
            self.hold(copy_due, false, wire, None);
        }
    }

    fn receive(&mut self, tick: u32, sink: &mut dyn FnMut(&[u8])) {
        let silent = self.is_silent(tick);
        self.held.sort_unstable_by_key(Held::key);
        let due = self.held.partition_point(|held| held.due_tick <= tick);
        for held in self.held.drain(..due) {
            if silent {
                self.tally.lost += 1;
            } else {
                self.inner.send(tick, &held.bytes);
            }
            self.spare.push(held.bytes);
        }
        self.inner.receive(tick, sink);
    }

    fn tally(&self) -> Tally {
        let inner = self.inner.tally();
        Tally {
            sent: inner.sent,
            delivered: inner.delivered,
            lost: inner.lost + self.tally.lost,
            duplicated: inner.duplicated + self.tally.duplicated,
            corrupted: inner.corrupted + self.tally.corrupted,
        }
    }
}
