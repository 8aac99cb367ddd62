//! A steward behind a wire: bytes in, bytes out.
//!
//! Contract: [`Node::receive`] takes any bytes at any split; a frame is used only
//! after length, checksum, version, tag and address have been checked, and what
//! it says only after the steward has checked it too. Everything refused is
//! counted; only a refused charter is answered. [`Node::tick`] hands out whole
//! frames. A board's loop: `receive`, `answer`, then `tick` while [`Node::pending_tick`].
//!
//! Boot id, echo and counter are filled in every frame; judging freshness by them
//! is not part of this version.

use crate::boot::{Answer, Boot, Identity, Phase};
use crate::steward::{Say, Steward};
use heapless::Vec;
use hedgerow_protocol::auth::Key;
use hedgerow_protocol::decoder::FrameDecoder;
use hedgerow_protocol::frame::{self, Header, PLANT};
use hedgerow_protocol::limits::{
    CHARTER_MAX, PROTOCOL_VERSION, TIES_MAX, WIRE_MAX, charter_bytes, wire_bytes,
};
use hedgerow_protocol::message::{Effort, Hello, Message, Refusal, Role};

/// The node of the boards: 32 buses, 48 lines, 16 units and storages, 16 feeders, 6 ties.
///
/// Unknowns and rows are rounded up to whole blocks of the law's products.
pub type BoardNode =
    Node<32, 48, 56, { wire_bytes(32, 48, 6, 16, 16) }, { charter_bytes(32, 48, 6, 16, 16) }>;

/// Somebody this node talks to.
#[derive(Clone, Copy, Debug)]
struct Peer {
    address: u8,
    boot_id: u32,
    counter: u32,
}

/// What a node has counted since boot.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Counts {
    /// Frames whose content was used.
    pub accepted: u32,
    /// Frames that were refused, for whatever reason.
    pub refused: u32,
    /// Frames sent.
    pub sent: u32,
}

/// Version of this firmware.
const VERSION: [u8; 3] = [
    decimal(env!("CARGO_PKG_VERSION_MAJOR")),
    decimal(env!("CARGO_PKG_VERSION_MINOR")),
    decimal(env!("CARGO_PKG_VERSION_PATCH")),
];

/// A steward with its frames. At most B buses, X unknowns, R rows, W bytes in a
/// coded frame, C bytes in a charter that arrives by frames.
pub struct Node<
    const B: usize,
    const X: usize,
    const R: usize,
    const W: usize = WIRE_MAX,
    const C: usize = CHARTER_MAX,
> {
    steward: Steward<B, X, R>,
    decoder: FrameDecoder<W>,
    boot: Boot<C>,
    address: u8,
    identity: Option<Identity>,
    key: Option<Key>,
    boot_id: u32,
    ticked: Option<u32>,
    peers: Vec<Peer, { TIES_MAX + 1 }>,
    counts: Counts,
    raw: [u8; W],
    wire: [u8; W],
}

impl<const B: usize, const X: usize, const R: usize, const W: usize, const C: usize>
    Node<B, X, R, W, C>
{
    /// A node that can neither hear nor speak yet: all zero, so that a static one takes no flash.
    pub const fn blank() -> Self {
        Self {
            steward: Steward::new(),
            decoder: FrameDecoder::new(),
            boot: Boot::new(),
            address: 0,
            identity: None,
            key: None,
            boot_id: 0,
            ticked: None,
            peers: Vec::new(),
            counts: Counts { accepted: 0, refused: 0, sent: 0 },
            raw: [0; W],
            wire: [0; W],
        }
    }

    /// A node without a charter; `boot_id` must differ from boot to boot and not be 0.
    pub fn new(key: Key, boot_id: u32) -> Self {
        let mut node = Self::blank();
        node.wake(key, boot_id);
        node
    }

    /// Give a blank node its key and boot id.
    pub fn wake(&mut self, key: Key, boot_id: u32) {
        self.key = Some(key);
        self.boot_id = boot_id;
    }

    /// Say who this node is, and queue its hello.
    pub fn introduce(&mut self, identity: Identity) {
        self.address = identity.address;
        self.identity = Some(identity);
        self.boot.say(Answer::Hello);
    }

    /// Boot with a charter and run; nobody has to say so.
    ///
    /// Errors: why it is refused.
    pub fn load(&mut self, charter: &[u8]) -> Result<(), Refusal> {
        let outcome = load_into::<B, X, R, W>(&mut self.steward, charter);
        if outcome.is_ok() {
            self.address = self.steward.plan().address;
        }
        self.boot.note_loaded(charter, outcome);
        self.ticked = None;
        outcome
    }

    /// The steward behind the wire.
    pub fn steward(&self) -> &Steward<B, X, R> {
        &self.steward
    }

    /// Where the start-up conversation stands.
    pub fn phase(&self) -> Phase {
        self.boot.phase()
    }

    /// What has been counted since boot.
    pub fn counts(&self) -> Counts {
        self.counts
    }

    /// Tick of measurements that were accepted and not ticked yet.
    pub fn pending_tick(&self) -> Option<u32> {
        let newest = self.steward.newest_tick().filter(|_| self.phase() == Phase::Running);
        newest.filter(|&tick| self.ticked != Some(tick))
    }

    /// Take in bytes from the wire; what must be answered waits for [`Self::answer`].
    // Not inlined: its temporaries must not lie on the stack of everything else.
    #[inline(never)]
    pub fn receive(&mut self, mut bytes: &[u8]) {
        let Self { steward, decoder, boot, address, key, ticked, peers, counts, .. } = self;
        let Some(key) = key else {
            return;
        };
        let broken_before = broken(decoder);
        while let Some(raw) = decoder.feed(&mut bytes) {
            let used = match frame::open(raw, key) {
                Ok((header, message)) if header.to == *address => {
                    note_peer(peers, &header);
                    hear::<B, X, R, W, C>(steward, boot, address, ticked, &message)
                }
                Ok(_) | Err(_) => false,
            };
            if used {
                counts.accepted = counts.accepted.wrapping_add(1);
            } else {
                counts.refused = counts.refused.wrapping_add(1);
            }
        }
        let broken = broken(decoder).wrapping_sub(broken_before);
        counts.refused = counts.refused.wrapping_add(broken);
    }

    /// Hand out what the start-up conversation has to say, each with the address it is for.
    // Not inlined: its temporaries must not lie on the stack of everything else.
    #[inline(never)]
    pub fn answer(&mut self, out: &mut dyn FnMut(u8, &[u8])) {
        let identity = self.identity.unwrap_or(UNKNOWN);
        for answer in self.boot.take_answers() {
            let message = match answer {
                Answer::Hello => Message::Hello(Hello {
                    role: Role::Steward,
                    protocol: PROTOCOL_VERSION,
                    version: VERSION,
                    core: identity.core,
                    buses_max: B.min(usize::from(u8::MAX)) as u8,
                    unknowns_max: X.min(usize::from(u16::MAX)) as u16,
                    rows_max: R.min(usize::from(u16::MAX)) as u16,
                    charter: self.boot.hash(),
                    last_fault: identity.last_fault,
                }),
                Answer::State(state) => Message::CharterState(state),
            };
            self.send(PLANT, &message, true, out);
        }
    }

    /// Move one tick on; `out` gets every frame with the address it is for.
    // Not inlined: its temporaries must not lie on the stack of everything else.
    #[inline(never)]
    pub fn tick(&mut self, tick: u32, out: &mut dyn FnMut(u8, &[u8])) {
        if self.phase() != Phase::Running {
            return;
        }
        self.ticked = Some(tick);
        let Self { steward, address, key, boot_id, peers, counts, raw, wire, .. } = self;
        let (from, seen) = (*address, *counts);
        let Some(key) = key else {
            return;
        };
        steward.tick(tick, &mut |say| {
            let (to, mut message) = match say {
                Say::Plant(message) => (PLANT, message),
                Say::Neighbour(to, message) => (to, message),
            };
            if let Message::Status(status) = &mut message {
                status.accepted = seen.accepted;
                status.refused = seen.refused;
            }
            let Some(peer) = peer_of(peers, to) else {
                return;
            };
            peer.counter = peer.counter.wrapping_add(1);
            let header = header(&message, from, peer, *boot_id);
            if let Ok(frame) = frame::seal(&header, &message, key, raw, wire) {
                counts.sent = counts.sent.wrapping_add(1);
                out(to, frame);
            }
        });
    }

    /// Say what the last tick cost; leaves every counter as it is.
    pub fn report(&mut self, effort: Effort, out: &mut dyn FnMut(u8, &[u8])) {
        self.send(PLANT, &Message::Effort(effort), false, out);
    }

    fn send(
        &mut self,
        to: u8,
        message: &Message<'_>,
        counted: bool,
        out: &mut dyn FnMut(u8, &[u8]),
    ) {
        let Self { address, key, boot_id, peers, counts, raw, wire, .. } = self;
        let (Some(key), Some(peer)) = (key, peer_of(peers, to)) else {
            return;
        };
        peer.counter = peer.counter.wrapping_add(u32::from(counted));
        let header = header(message, *address, peer, *boot_id);
        if let Ok(frame) = frame::seal(&header, message, key, raw, wire) {
            counts.sent = counts.sent.wrapping_add(u32::from(counted));
            out(to, frame);
        }
    }
}

/// What a node says of itself before it has been introduced.
const UNKNOWN: Identity = Identity { address: 0, core: "", last_fault: 0 };

/// A charter goes to the steward, unless its frames would not fit into W bytes.
fn load_into<const B: usize, const X: usize, const R: usize, const W: usize>(
    steward: &mut Steward<B, X, R>,
    charter: &[u8],
) -> Result<(), Refusal> {
    steward.load(charter)?;
    if steward.plan().wire_bytes() <= W { Ok(()) } else { Err(Refusal::Capacity) }
}

/// A message for this node: start-up first, then the steward while it runs.
fn hear<const B: usize, const X: usize, const R: usize, const W: usize, const C: usize>(
    steward: &mut Steward<B, X, R>,
    boot: &mut Boot<C>,
    address: &mut u8,
    ticked: &mut Option<u32>,
    message: &Message<'_>,
) -> bool {
    let used = boot.hear(message, |charter| {
        load_into::<B, X, R, W>(steward, charter)?;
        *address = steward.plan().address;
        *ticked = None;
        Ok(())
    });
    used || (boot.phase() == Phase::Running && steward.hear(message))
}

fn header(message: &Message<'_>, from: u8, peer: &Peer, boot_id: u32) -> Header {
    Header {
        id: message.id(),
        from,
        to: peer.address,
        boot_id,
        peer_boot_id: peer.boot_id,
        counter: peer.counter,
    }
}

/// A small decimal number, evaluated by the compiler.
const fn decimal(text: &str) -> u8 {
    let mut bytes = text.as_bytes();
    let mut value = 0_u8;
    while let [digit, rest @ ..] = bytes {
        value = value.wrapping_mul(10).wrapping_add(digit.wrapping_sub(b'0'));
        bytes = rest;
    }
    value
}

/// Pieces that were no frames at all.
fn broken<const N: usize>(decoder: &FrameDecoder<N>) -> u32 {
    decoder.overlong().wrapping_add(decoder.undecodable())
}

/// The entry of a peer, made if there is room.
fn peer_of<const N: usize>(peers: &mut Vec<Peer, N>, address: u8) -> Option<&mut Peer> {
    if !peers.iter().any(|peer| peer.address == address) {
        let _full = peers.push(Peer { address, boot_id: 0, counter: 0 });
    }
    peers.iter_mut().find(|peer| peer.address == address)
}

fn note_peer<const N: usize>(peers: &mut Vec<Peer, N>, header: &Header) {
    if let Some(peer) = peer_of(peers, header.from) {
        peer.boot_id = header.boot_id;
    }
}
