//! Counts what goes into a link and what comes out.

use super::{Link, Tally};

/// A link that counts; put it outermost, so that its [`Tally`] is complete.
#[derive(Clone, Debug)]
pub struct Counted<L> {
    inner: L,
    sent: u64,
    delivered: u64,
}

impl<L> Counted<L> {
    /// Count the frames of `inner`.
    pub const fn new(inner: L) -> Self {
        Self { inner, sent: 0, delivered: 0 }
    }

    /// The link inside, say to announce an outage.
    pub const fn inner_mut(&mut self) -> &mut L {
        &mut self.inner
    }
}

impl<L: Link> Link for Counted<L> {
    fn send(&mut self, tick: u32, wire: &[u8]) {
        self.sent += 1;
        self.inner.send(tick, wire);
    }

    fn receive(&mut self, tick: u32, sink: &mut dyn FnMut(&[u8])) {
        let delivered = &mut self.delivered;
        self.inner.receive(tick, &mut |wire| {
            *delivered += 1;
            sink(wire);
        });
    }

    fn tally(&self) -> Tally {
        Tally { sent: self.sent, delivered: self.delivered, ..self.inner.tally() }
    }
}
