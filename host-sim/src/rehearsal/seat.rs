//! What sits in an area: a steward within this process, a board, or both side by side.
//!
//! Contract: the loop hands over whole frames, then calls [`Seat::begin`] on all
//! seats and [`Seat::finish`] on all, so that seats on other processors work at
//! the same time. A seat that can not go on says so once and is left empty; its
//! area then counts as one whose steward has died.

use super::RehearsalError;
use crate::charter::Area;
use hedgerow_firmware::node::Node;
use hedgerow_protocol::auth::{Key, REHEARSAL_KEY};

/// A node that holds the largest area.
pub type HostNode = Node<64, 112, 112>;

/// Who sent a frame to a steward.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Source {
    /// The plant, or the operator by way of it.
    Plant,
    /// The steward of another area.
    Neighbour,
}

/// Why a seat can not go on, in words.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Gone(pub String);

/// Counters of a seat since its boot, in frames.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct SeatCounts {
    /// Sent by the steward.
    pub sent: u64,
    /// Refused by it.
    pub refused: u64,
}

/// A steward at work, wherever it runs.
pub trait Seat {
    /// Take one frame as it arrived: whole, hurt or twice.
    fn hear(&mut self, source: Source, wire: &[u8]);

    /// Everything of this tick has been handed over: start to work on it.
    ///
    /// Errors: the seat is gone.
    fn begin(&mut self, _tick: u32) -> Result<(), Gone> {
        Ok(())
    }

    /// Hand out every frame of this tick with the address it is for.
    ///
    /// Errors: the seat is gone; what it said before that has been handed out.
    fn finish(&mut self, tick: u32, out: &mut dyn FnMut(u8, &[u8])) -> Result<(), Gone>;

    /// What has been counted since boot.
    fn counts(&self) -> SeatCounts;
}

/// Who fills the seats.
pub trait Staff {
    /// Boot a steward with the area's charter; `boot` counts from 1.
    ///
    /// Errors: why there is none, for the run's first boots; later ones leave the seat empty.
    fn seat(&mut self, area: &Area, name: &str, boot: u32)
    -> Result<Box<dyn Seat>, RehearsalError>;
}

/// Fills every seat with a steward within this process.
#[derive(Clone, Copy, Debug, Default)]
pub struct InProcess;

impl Staff for InProcess {
    fn seat(
        &mut self,
        area: &Area,
        name: &str,
        boot: u32,
    ) -> Result<Box<dyn Seat>, RehearsalError> {
        let mut node = Box::new(HostNode::new(Key::new(&REHEARSAL_KEY), boot));
        node.load(&area.bytes)
            .map_err(|why| RehearsalError::Refused { area: name.to_owned(), why })?;
        Ok(Box::new(NodeSeat(node)))
    }
}

/// A steward within this process.
struct NodeSeat(Box<HostNode>);

impl Seat for NodeSeat {
    fn hear(&mut self, _source: Source, wire: &[u8]) {
        self.0.receive(wire);
    }

    fn finish(&mut self, tick: u32, out: &mut dyn FnMut(u8, &[u8])) -> Result<(), Gone> {
        self.0.tick(tick, out);
        Ok(())
    }

    fn counts(&self) -> SeatCounts {
        let counts = self.0.counts();
        SeatCounts { sent: u64::from(counts.sent), refused: u64::from(counts.refused) }
    }
}
