//! What the seats of a bench note down for everybody: logbook, differences, effort.
//!
//! Contract: one thread, one writer at a time; nothing here changes the run.

use super::compare::Difference;
use super::logbook::{Direction, Logbook};
use super::node::Core;
use super::talk::Greeting;
use serde::Serialize;
use std::cell::RefCell;
use std::rc::Rc;

/// Notes that all seats share.
pub type Shared = Rc<RefCell<Notes>>;

/// What a tick cost a board.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
pub struct Effort {
    /// The tick.
    pub tick: u32,
    /// Instructions from the measurements' arrival to the last frame.
    pub instructions: u32,
    /// Deepest stack since boot, bytes.
    pub stack_bytes: u32,
    /// Whether the tick rebuilt the problem.
    pub rebuilt: bool,
    /// Whether a proof was said in it: the rung changes, and the rebuild follows.
    pub proof: bool,
}

impl Effort {
    /// Whether it is a tick like any other.
    pub fn is_plain(&self) -> bool {
        !self.rebuilt && !self.proof
    }
}

/// Bytes to and from a board in one tick, as on the wire.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize)]
pub struct Traffic {
    /// To the board.
    pub heard_bytes: usize,
    /// From the board.
    pub said_bytes: usize,
}

/// What is known of one board after a run.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct BoardNotes {
    /// Index of its area.
    pub area: usize,
    /// Core that was asked for.
    pub core: Core,
    /// What it said of itself.
    pub greeting: Greeting,
    /// Effort per tick, if its image measures it.
    pub efforts: Vec<Effort>,
    /// Ticks in which a proof was said.
    pub proof_ticks: Vec<u32>,
    /// Bytes per tick.
    pub traffic: Vec<Traffic>,
    /// Frames from it that were none.
    pub garbled: u64,
    /// Times it was booted.
    pub boots: u32,
    /// Whether it ended by itself when told to.
    pub ended: Option<bool>,
}

/// Everything noted in a run.
#[derive(Debug, Default)]
pub struct Notes {
    /// The logbook, if one is kept.
    pub logbook: Option<Logbook>,
    /// One entry per board.
    pub boards: Vec<BoardNotes>,
    /// The first difference found.
    pub difference: Option<Difference>,
    /// Frames that were compared.
    pub frames_compared: u64,
    /// Tick at work.
    tick: u32,
}

impl Notes {
    /// Empty notes, with a logbook or without.
    pub fn keeping(logbook: Option<Logbook>) -> Self {
        Self { logbook, ..Self::default() }
    }

    fn board(&mut self, area: usize) -> Option<&mut BoardNotes> {
        self.boards.iter_mut().find(|board| board.area == area)
    }

    /// A board has been started.
    pub fn started(&mut self, area: usize, core: Core, greeting: Greeting) {
        match self.board(area) {
            Some(board) => {
                board.greeting = greeting;
                board.boots += 1;
            }
            None => self.boards.push(BoardNotes {
                area,
                core,
                greeting,
                efforts: Vec::new(),
                proof_ticks: Vec::new(),
                traffic: Vec::new(),
                garbled: 0,
                boots: 1,
                ended: None,
            }),
        }
    }

    /// A frame goes to a board, or to any steward that is logged.
    pub fn heard(&mut self, area: usize, wire: &[u8]) {
        let tick = self.tick;
        self.log(tick, Direction::ToSteward, area, wire);
    }

    /// A tick begins with this many bytes for the board.
    pub fn tick_begins(&mut self, area: usize, tick: u32, heard_bytes: usize) {
        self.tick = tick;
        if let Some(board) = self.board(area) {
            board.traffic.push(Traffic { heard_bytes, said_bytes: 0 });
        }
    }

    /// A frame comes from a steward.
    pub fn said(&mut self, area: usize, tick: u32, wire: &[u8]) {
        self.log(tick, Direction::FromSteward, area, wire);
        if let Some(traffic) = self.board(area).and_then(|board| board.traffic.last_mut()) {
            traffic.said_bytes += wire.len();
        }
    }

    /// Add a frame to the logbook, if there is one.
    pub fn log(&mut self, tick: u32, direction: Direction, area: usize, wire: &[u8]) {
        if let Some(logbook) = &mut self.logbook {
            logbook.add(tick, direction, area as u8, wire);
        }
    }

    /// The host has come to the end of a tick.
    pub fn tick_ends(&mut self, next: u32) {
        self.tick = next;
        if let Some(logbook) = &mut self.logbook {
            logbook.flush();
        }
    }

    /// A frame from a board is none.
    pub fn garbled(&mut self, area: usize) {
        if let Some(board) = self.board(area) {
            board.garbled += 1;
        }
    }

    /// A part of a proof comes from a board.
    pub fn proof(&mut self, area: usize, tick: u32) {
        if let Some(board) = self.board(area)
            && board.proof_ticks.last() != Some(&tick)
        {
            board.proof_ticks.push(tick);
        }
    }

    /// A board says what a tick cost it, after all else of that tick.
    pub fn effort(&mut self, area: usize, effort: Effort) {
        if let Some(board) = self.board(area) {
            let proof = board.proof_ticks.last() == Some(&effort.tick);
            board.efforts.push(Effort { proof, ..effort });
        }
    }

    /// A frame has been compared with its twin.
    pub fn compared(&mut self, found: Option<Difference>) {
        self.frames_compared += 1;
        if self.difference.is_none() {
            self.difference = found;
        }
    }

    /// A board that was told to stop has ended by itself, or not.
    pub fn ended(&mut self, area: usize, by_itself: bool) {
        if let Some(board) = self.board(area) {
            board.ended = Some(by_itself);
        }
    }
}
