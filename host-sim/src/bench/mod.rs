//! The bench: a play with boards in the loop, in lockstep with the plant.
//!
//! Contract: the loop is that of [`crate::rehearsal`]; only the seats differ.
//! Virtual time moves on when every board has answered, so a run depends on
//! grid, play and images alone. Nothing is left behind however it ends: no
//! process, pipe, socket or directory.
//!
//! Data flow: `node` says what sits where, `image` finds what boards run,
//! `process` starts them, `wire` carries bytes, `talk` holds the start-up
//! conversation, `seat` sits in the loop, `twin` and `compare` hold each frame
//! against a steward in this process, `logbook` keeps them all.

pub mod compare;
pub mod image;
pub mod logbook;
pub mod node;
pub mod notes;
pub mod process;
mod seat;
mod staff;
pub mod talk;
mod twin;
pub mod wire;

#[cfg(test)]
mod tests;

use crate::case::model::{Grid, Play};
use crate::rehearsal::{Attended, RehearsalError, attend};
use compare::Difference;
use image::{ImageError, Images};
use logbook::Logbook;
use node::{LinkKind, NodeKind};
use notes::{BoardNotes, Notes};
use process::StartError;
use staff::Bencher;
use std::cell::RefCell;
use std::rc::Rc;
use std::time::{Duration, Instant};
use talk::TalkError;
use thiserror::Error;

/// How long a board may take to start.
pub const START_PATIENCE: Duration = Duration::from_secs(20);
/// How long a board may take for a tick before it counts as gone.
pub const TICK_TIME_OUT: Duration = Duration::from_secs(5);

/// Why a board is not in its seat.
#[derive(Debug, Error)]
pub enum BenchError {
    /// Nothing to run on it.
    #[error(transparent)]
    Image(#[from] ImageError),
    /// It does not start.
    #[error(transparent)]
    Start(#[from] StartError),
    /// It does not take part.
    #[error(transparent)]
    Talk(#[from] TalkError),
    /// Its process ended in the start-up conversation.
    #[error("{why}; its process ended ({how})")]
    Ended {
        /// Where the conversation broke off.
        why: TalkError,
        /// How it ended.
        how: String,
    },
    /// The play asks for what boards can not do.
    #[error(
        "the play puts link faults between plant and stewards too (plant_too): a board keeps time by its measurements and would lose it; use in-process nodes, or take that setting out"
    )]
    PlantFaults,
}

impl BenchError {
    /// Whether the input is to blame, not the environment.
    pub fn is_input(&self) -> bool {
        match self {
            BenchError::Talk(TalkError::Capacity { .. } | TalkError::Refused { .. }) => true,
            BenchError::PlantFaults => true,
            BenchError::Image(_)
            | BenchError::Start(_)
            | BenchError::Talk(_)
            | BenchError::Ended { .. } => false,
        }
    }
}

/// What a bench is to be.
#[derive(Debug)]
pub struct Setup {
    /// What sits in each area.
    pub kinds: Vec<NodeKind>,
    /// How bytes get to emulated boards.
    pub link: LinkKind,
    /// Images given by hand.
    pub images: Images,
    /// Whether a steward in this process runs beside each board.
    pub side_by_side: bool,
    /// How long a board may take to start.
    pub start_patience: Duration,
    /// How long it may take for a tick.
    pub time_out: Duration,
}

impl Setup {
    /// These nodes over named pipes, nothing beside them.
    pub fn of(kinds: Vec<NodeKind>) -> Self {
        Self {
            kinds,
            link: LinkKind::Fifo,
            images: Images::default(),
            side_by_side: false,
            start_patience: START_PATIENCE,
            time_out: TICK_TIME_OUT,
        }
    }
}

/// A run on the bench.
#[derive(Debug)]
pub struct Benched {
    /// The record, and boards that were lost.
    pub attended: Attended,
    /// What is known of each board.
    pub boards: Vec<BoardNotes>,
    /// First difference to a steward in this process, if they were compared.
    pub difference: Option<Difference>,
    /// Frames that were compared.
    pub frames_compared: u64,
    /// Time from the first tick to the last, s.
    pub run_wall_s: f64,
    /// Time to start the boards, s.
    pub start_wall_s: f64,
    /// What went wrong with the logbook.
    pub logbook_error: Option<std::io::Error>,
}

impl Benched {
    /// Virtual time over time taken.
    pub fn times_real(&self) -> f64 {
        self.attended.recording.duration_s / self.run_wall_s.max(1e-9)
    }
}

/// Run a play on the bench.
///
/// `watch` is told the share done once a tick; when it returns false the run
/// stops. It also stops at the first difference.
/// Errors: [`RehearsalError`], before the first tick; a [`BenchError`] is its `Seat`.
pub fn bench(
    grid: &Grid,
    play: &Play,
    setup: &Setup,
    logbook: Option<Logbook>,
    watch: &mut dyn FnMut(f64) -> bool,
) -> Result<Benched, RehearsalError> {
    let boards = setup.kinds.iter().any(|kind| matches!(kind, NodeKind::Emulated(_)));
    if boards && play.links.plant_too {
        let area = grid.name.clone();
        return Err(RehearsalError::Seat { area, why: Box::new(BenchError::PlantFaults) });
    }
    let shared = Rc::new(RefCell::new(Notes::keeping(logbook)));
    let staff = Box::new(Bencher::new(setup, shared.clone()));
    let begun = Instant::now();
    let (mut first, mut last) = (None, begun);
    let mut ticks = 0;
    let attended = attend(grid, play, staff, &mut |share| {
        last = Instant::now();
        // The first tick's own time is taken for granted: it is one of thousands.
        first.get_or_insert(last);
        ticks += 1;
        let mut notes = shared.borrow_mut();
        notes.tick_ends(ticks);
        watch(share) && notes.difference.is_none()
    })?;
    let first = first.unwrap_or(last);
    let mut notes = seat::settle(shared);
    let logbook_error = notes.logbook.as_mut().and_then(|logbook| logbook.finish().err());
    Ok(Benched {
        attended,
        boards: notes.boards,
        difference: notes.difference,
        frames_compared: notes.frames_compared,
        run_wall_s: (last - first).as_secs_f64(),
        start_wall_s: (first - begun).as_secs_f64(),
        logbook_error,
    })
}
