//! Shows what passes through a link, for logbooks and live views.

use super::{Link, Tally};

/// One frame that passes.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Passing<'a> {
    /// Given to the link.
    Sent {
        /// Tick at which it was given.
        tick: u32,
        /// The frame, delimiter included.
        wire: &'a [u8],
    },
    /// Handed to the receiver.
    Delivered {
        /// Tick at which it was handed over.
        tick: u32,
        /// The frame as it arrived.
        wire: &'a [u8],
    },
}

/// A link that shows each frame to a closure.
#[derive(Clone, Debug)]
pub struct Traced<L, F> {
    inner: L,
    show: F,
}

impl<L, F: FnMut(Passing<'_>)> Traced<L, F> {
    /// Show the frames of `inner` to `show`.
    pub const fn new(inner: L, show: F) -> Self {
        Self { inner, show }
    }
}

impl<L: Link, F: FnMut(Passing<'_>)> Link for Traced<L, F> {
    fn send(&mut self, tick: u32, wire: &[u8]) {
        (self.show)(Passing::Sent { tick, wire });
        self.inner.send(tick, wire);
    }

    fn receive(&mut self, tick: u32, sink: &mut dyn FnMut(&[u8])) {
        let show = &mut self.show;
        self.inner.receive(tick, &mut |wire| {
            show(Passing::Delivered { tick, wire });
            sink(wire);
        });
    }

    fn tally(&self) -> Tally {
        self.inner.tally()
    }
}
