//! The same steward in this process, fed the very bytes that a board is fed.
//!
//! Contract: it boots with the board's boot id, address and start-up
//! conversation, so that from the first tick on every one of its frames has to
//! be the board's, to the last counter.

use super::talk::Greeting;
use crate::rehearsal::HostNode;
use hedgerow_firmware::boot::Identity;
use hedgerow_protocol::auth::Key;
use hedgerow_protocol::cobs::DELIMITER;

/// A steward beside a board.
pub struct Twin(Box<HostNode>);

impl Twin {
    /// Boot like the board that said `greeting` and was `told` these bytes so far.
    pub fn new(key: &Key, greeting: &Greeting, address: u8, told: &[u8]) -> Self {
        let mut node = Box::new(HostNode::new(key.clone(), greeting.boot_id));
        node.introduce(Identity { address, core: "host", last_fault: greeting.last_fault });
        // What it answers is not compared: its name and capacity are its own.
        node.answer(&mut |_, _| {});
        // Frame by frame, since the queue for answers is short.
        for frame in told.split_inclusive(|&byte| byte == DELIMITER) {
            node.receive(frame);
            node.answer(&mut |_, _| {});
        }
        Self(node)
    }

    /// Take in what the board takes in.
    pub fn hear(&mut self, bytes: &[u8]) {
        self.0.receive(bytes);
    }

    /// Tick if measurements make it, and hand out its frames.
    pub fn tick(&mut self) -> Vec<Vec<u8>> {
        let mut frames = Vec::new();
        if let Some(tick) = self.0.pending_tick() {
            self.0.tick(tick, &mut |_, wire| frames.push(wire.to_vec()));
        }
        frames
    }
}
