//! Glue to a board: alarm contact, heartbeat, serial bytes.
//!
//! Contract: generic over `embedded-hal` pins and `embedded-io` streams; no
//! timing of its own. The alarm contact is fail-safe: energised (high) while all
//! is well, so that a dead board alarms.

use embedded_hal::digital::OutputPin;
use embedded_io::{Read, ReadReady, Write};
use hedgerow_protocol::message::Verdict;

use crate::node::Node;

/// An alarm contact that is held while there is nothing to report.
pub struct AlarmContact<P>(P);

impl<P: OutputPin> AlarmContact<P> {
    /// Take the pin and raise the alarm until the first good tick.
    ///
    /// Errors: the pin's own.
    pub fn new(mut pin: P) -> Result<Self, P::Error> {
        pin.set_low()?;
        Ok(Self(pin))
    }

    /// Show a tick's verdict: `impossible` and `blind` open the contact.
    ///
    /// Errors: the pin's own.
    pub fn show(&mut self, verdict: Verdict) -> Result<(), P::Error> {
        match verdict {
            Verdict::Settled | Verdict::Working => self.0.set_high(),
            Verdict::Impossible | Verdict::Blind => self.0.set_low(),
        }
    }
}

/// A light that changes with every tick.
pub struct Heartbeat<P> {
    pin: P,
    on: bool,
}

impl<P: OutputPin> Heartbeat<P> {
    /// Take the pin, dark.
    pub fn new(pin: P) -> Self {
        Self { pin, on: false }
    }

    /// One tick has been done.
    ///
    /// Errors: the pin's own.
    pub fn beat(&mut self) -> Result<(), P::Error> {
        self.on = !self.on;
        if self.on { self.pin.set_high() } else { self.pin.set_low() }
    }
}

/// Feed a node with what a serial stream has ready, in bites of 64 bytes.
///
/// Returns the number of bytes read.
/// Errors: the stream's own.
pub fn drain<S, const B: usize, const X: usize, const R: usize, const W: usize, const C: usize>(
    stream: &mut S,
    node: &mut Node<B, X, R, W, C>,
) -> Result<usize, S::Error>
where
    S: Read + ReadReady,
{
    let mut total = 0;
    let mut bite = [0; 64];
    // A largest frame is below 64 bites; more waits for the next call.
    for _ in 0..64 {
        if !stream.read_ready()? {
            break;
        }
        let read = stream.read(&mut bite)?;
        node.receive(bite.get(..read).unwrap_or_default());
        total += read;
    }
    Ok(total)
}

/// Write the answers of the start-up conversation, then run what is pending and write its frames.
///
/// Returns the tick that was run.
/// Errors: the stream's own; what was not written is dropped.
pub fn turn<
    S: Write,
    const B: usize,
    const X: usize,
    const R: usize,
    const W: usize,
    const C: usize,
>(
    node: &mut Node<B, X, R, W, C>,
    stream: &mut S,
) -> Result<Option<u32>, S::Error> {
    let mut outcome = Ok(());
    let mut write = |_: u8, frame: &[u8]| {
        if outcome.is_ok() {
            outcome = stream.write_all(frame);
        }
    };
    node.answer(&mut write);
    let pending = node.pending_tick();
    if let Some(tick) = pending {
        node.tick(tick, &mut write);
    }
    outcome.map(|()| pending)
}
