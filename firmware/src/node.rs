//! A steward behind a wire: bytes in, bytes out.
//!
//! Contract: [`Node::receive`] takes any bytes at any split; a frame is used only
//! after length, checksum, version, tag and address have been checked, and what
//! it says only after the steward has checked it too. Everything refused is
//! counted, nothing refused is answered. [`Node::tick`] hands out whole frames.
//!
//! Boot id, echo and counter are filled in every frame; judging freshness by them
//! is not part of this version.

use crate::steward::{Say, Steward};
use heapless::Vec;
use hedgerow_protocol::auth::Key;
use hedgerow_protocol::decoder::FrameDecoder;
use hedgerow_protocol::frame::{self, Header, PLANT};
use hedgerow_protocol::limits::{FRAME_MAX, TIES_MAX, WIRE_MAX};
use hedgerow_protocol::message::{Message, Refusal};

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

/// A steward with its frames. At most B buses, X unknowns, R rows.
pub struct Node<const B: usize, const X: usize, const R: usize> {
    steward: Steward<B, X, R>,
    decoder: FrameDecoder<WIRE_MAX>,
    key: Key,
    boot_id: u32,
    peers: Vec<Peer, { TIES_MAX + 1 }>,
    counts: Counts,
    raw: [u8; FRAME_MAX],
    wire: [u8; WIRE_MAX],
}

impl<const B: usize, const X: usize, const R: usize> Node<B, X, R> {
    /// A node without a charter; `boot_id` must differ from boot to boot and not be 0.
    pub fn new(key: Key, boot_id: u32) -> Self {
        Self {
            steward: Steward::new(),
            decoder: FrameDecoder::new(),
            key,
            boot_id,
            peers: Vec::new(),
            counts: Counts::default(),
            raw: [0; FRAME_MAX],
            wire: [0; WIRE_MAX],
        }
    }

    /// Boot with a charter.
    ///
    /// Errors: why it is refused.
    pub fn load(&mut self, charter: &[u8]) -> Result<(), Refusal> {
        self.steward.load(charter)
    }

    /// The steward behind the wire.
    pub fn steward(&self) -> &Steward<B, X, R> {
        &self.steward
    }

    /// What has been counted since boot.
    pub fn counts(&self) -> Counts {
        self.counts
    }

    /// Take in bytes from the wire.
    pub fn receive(&mut self, mut bytes: &[u8]) {
        let Self { steward, decoder, key, peers, counts, .. } = self;
        let address = steward.plan().address;
        let broken_before = broken(decoder);
        while let Some(raw) = decoder.feed(&mut bytes) {
            let used = match frame::open(raw, key) {
                Ok((header, message)) if header.to == address => {
                    note_peer(peers, &header);
                    steward.hear(&message)
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

    /// Move one tick on; `out` gets every frame with the address it is for.
    pub fn tick(&mut self, tick: u32, out: &mut dyn FnMut(u8, &[u8])) {
        let Self { steward, key, boot_id, peers, counts, raw, wire, .. } = self;
        let from = steward.plan().address;
        let seen = *counts;
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
            let header = Header {
                id: message.id(),
                from,
                to,
                boot_id: *boot_id,
                peer_boot_id: peer.boot_id,
                counter: peer.counter,
            };
            if let Ok(frame) = frame::seal(&header, &message, key, raw, wire) {
                counts.sent = counts.sent.wrapping_add(1);
                out(to, frame);
            }
        });
    }
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
