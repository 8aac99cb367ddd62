//! A board in a seat, alone or with its twin in this process beside it.
//!
//! Contract: what a board hears in a tick goes out in one piece, neighbours
//! first and measurements last, since those make it tick; its status ends the
//! tick. Whatever it has not said by then within the time-out makes it gone,
//! and a board that is gone is killed. The twin hears the very same bytes.

use super::compare::compare;
use super::notes::{Effort, Notes, Shared};
use super::process::Emulator;
use super::talk::{Talk, opened};
use super::twin::Twin;
use super::wire::{Wire, WireError};
use crate::rehearsal::{Gone, Seat, SeatCounts, Source};
use hedgerow_protocol::auth::Key;
use hedgerow_protocol::cobs::DELIMITER;
use hedgerow_protocol::message::Message;
use std::time::{Duration, Instant};

/// How long a board that is told to stop may take to end by itself.
const GRACE: Duration = Duration::from_secs(1);

/// Frames that a board may say in a tick: a largest proof is 6 vectors of 2 parts.
const FRAMES_PER_TICK: usize = 64;

/// A board at work.
pub struct BoardSeat {
    pub(super) name: String,
    pub(super) area: usize,
    pub(super) address: u8,
    pub(super) key: Key,
    pub(super) wire: Wire,
    /// The process, unless somebody else minds it.
    pub(super) emulator: Option<Emulator>,
    pub(super) twin: Option<Twin>,
    pub(super) time_out: Duration,
    pub(super) shared: Shared,
    /// Frames sent to it at start-up.
    pub(super) counter: u32,
    pub(super) board_boot: u32,
    pub(super) from_neighbours: Vec<u8>,
    pub(super) from_plant: Vec<u8>,
    pub(super) counts: SeatCounts,
    pub(super) tick: u32,
    pub(super) gone: bool,
}

impl Seat for BoardSeat {
    fn hear(&mut self, source: Source, wire: &[u8]) {
        let piece = match source {
            Source::Plant => &mut self.from_plant,
            Source::Neighbour => &mut self.from_neighbours,
        };
        piece.extend_from_slice(wire);
        // A frame hurt in its delimiter must not swallow the next one's start.
        if wire.last() != Some(&DELIMITER) {
            piece.push(DELIMITER);
        }
        self.shared.borrow_mut().heard(self.area, wire);
    }

    fn begin(&mut self, tick: u32) -> Result<(), Gone> {
        self.tick = tick;
        let mut bytes = std::mem::take(&mut self.from_neighbours);
        bytes.append(&mut self.from_plant);
        self.shared.borrow_mut().tick_begins(self.area, tick, bytes.len());
        let sent = self.wire.send(&bytes, Instant::now() + self.time_out);
        if let Some(twin) = &mut self.twin {
            twin.hear(&bytes);
        }
        sent.map_err(|why| self.lost(&why))
    }

    fn finish(&mut self, tick: u32, out: &mut dyn FnMut(u8, &[u8])) -> Result<(), Gone> {
        let beside = self.twin.as_mut().map(Twin::tick);
        let deadline = Instant::now() + self.time_out;
        let mut said = 0;
        for _ in 0..FRAMES_PER_TICK {
            let wire = match self.wire.next(deadline) {
                Ok(wire) => wire,
                Err(why) => return Err(self.lost(&why)),
            };
            let (to, last) = match self.take_in(&wire) {
                Taken::Speech { to, ends } => (to, ends == Some(tick)),
                Taken::Aside => continue,
            };
            if let Some(beside) = &beside {
                self.hold_against(tick, said, Some(&wire), beside.get(said).map(Vec::as_slice));
            }
            said += 1;
            self.counts.sent += 1;
            self.shared.borrow_mut().said(self.area, tick, &wire);
            out(to, &wire);
            if last {
                if let Some(more) = beside.as_ref().and_then(|beside| beside.get(said)) {
                    self.hold_against(tick, said, None, Some(more));
                }
                return Ok(());
            }
        }
        self.gone = true;
        Err(Gone(format!("it says {FRAMES_PER_TICK} frames in tick {tick} and no status")))
    }

    fn counts(&self) -> SeatCounts {
        self.counts
    }
}

/// What a frame from the board is to the loop.
enum Taken {
    /// Something the steward says; whether it ends a tick, and which.
    Speech { to: u8, ends: Option<u32> },
    /// Nothing of the run's.
    Aside,
}

impl BoardSeat {
    /// Look at a frame: who it is for, and whether it ends the tick.
    fn take_in(&mut self, wire: &[u8]) -> Taken {
        let mut raw = wire.to_vec();
        let Some((header, message)) = opened(&mut raw, &self.key) else {
            self.shared.borrow_mut().garbled(self.area);
            return Taken::Aside;
        };
        match message {
            Message::Status(status) => {
                self.counts.refused = u64::from(status.refused);
                Taken::Speech { to: header.to, ends: Some(status.tick) }
            }
            Message::Effort(effort) => {
                let effort = Effort {
                    tick: effort.tick,
                    instructions: effort.instructions,
                    stack_bytes: effort.stack_bytes,
                    rebuilt: effort.rebuilt,
                    proof: false,
                };
                self.shared.borrow_mut().effort(self.area, effort);
                Taken::Aside
            }
            Message::ProofPart(part) => {
                self.shared.borrow_mut().proof(self.area, part.tick);
                Taken::Speech { to: header.to, ends: None }
            }
            Message::Hello(_) | Message::CharterState(_) => Taken::Aside,
            _ => Taken::Speech { to: header.to, ends: None },
        }
    }

    fn hold_against(&self, tick: u32, frame: usize, board: Option<&[u8]>, twin: Option<&[u8]>) {
        let found = compare((&self.name, tick, frame), board, twin, &self.key);
        self.shared.borrow_mut().compared(found);
    }

    /// The board can not be talked to any more: say why.
    fn lost(&mut self, why: &WireError) -> Gone {
        self.gone = true;
        let ended = match (why, &mut self.emulator) {
            // The pipe closes a moment before the process has ended.
            (WireError::Closed, Some(emulator)) => {
                emulator.wait(Instant::now() + GRACE);
                emulator.ending()
            }
            _ => None,
        };
        let waited = self.time_out.as_secs_f64();
        Gone(match (why, ended) {
            (_, Some(how)) => format!("its process ended ({how})"),
            (WireError::Silent, None) => format!("no status within {waited} s"),
            (_, None) => why.to_string(),
        })
    }

    /// Tell the board to stop and hear it out.
    fn stop(&mut self) {
        let deadline = Instant::now() + GRACE;
        let mut show = |_: bool, _: &[u8]| {};
        let mut talk = Talk {
            wire: &mut self.wire,
            key: &self.key,
            address: self.address,
            counter: self.counter,
            board_boot: self.board_boot,
            show: &mut show,
        };
        if talk.stop(self.tick, deadline).is_err() {
            return;
        }
        while let Ok(wire) = self.wire.next(deadline) {
            self.take_in(&wire);
        }
        if let Some(emulator) = &mut self.emulator {
            let ended = emulator.wait(deadline);
            self.shared.borrow_mut().ended(self.area, ended);
        }
    }
}

impl Drop for BoardSeat {
    fn drop(&mut self) {
        if !self.gone {
            self.stop();
        }
    }
}

/// Hand notes back once nobody writes to them any more; a copy otherwise.
pub(super) fn settle(shared: Shared) -> Notes {
    match std::rc::Rc::try_unwrap(shared) {
        Ok(notes) => notes.into_inner(),
        Err(shared) => std::mem::take(&mut *shared.borrow_mut()),
    }
}
