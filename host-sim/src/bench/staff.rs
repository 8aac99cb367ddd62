//! Fills the seats of a bench: nodes in this process and boards, as assigned.

use super::image::Images;
use super::logbook::Direction;
use super::node::{Core, LinkKind, NodeKind};
use super::notes::Shared;
use super::process::{Emulator, Start};
use super::seat::BoardSeat;
use super::talk::{Talk, TalkError};
use super::twin::Twin;
use super::wire::{Wire, WireError};
use super::{BenchError, Setup};
use crate::charter::Area;
use crate::rehearsal::{Gone, InProcess, RehearsalError, Seat, SeatCounts, Source, Staff};
use hedgerow_protocol::auth::{Key, REHEARSAL_KEY};
use std::time::{Duration, Instant};

/// Fills the seats.
pub struct Bencher {
    pub(super) kinds: Vec<NodeKind>,
    pub(super) link: LinkKind,
    pub(super) images: Images,
    pub(super) side_by_side: bool,
    pub(super) start_patience: Duration,
    pub(super) time_out: Duration,
    pub(super) shared: Shared,
}

impl Bencher {
    /// A staff for this set-up.
    pub fn new(setup: &Setup, shared: Shared) -> Self {
        Self {
            kinds: setup.kinds.clone(),
            link: setup.link,
            images: setup.images.clone(),
            side_by_side: setup.side_by_side,
            start_patience: setup.start_patience,
            time_out: setup.time_out,
            shared,
        }
    }

    fn board(
        &mut self,
        area: &Area,
        core: Core,
        name: &str,
        boot: u32,
    ) -> Result<BoardSeat, BenchError> {
        let image = self.images.find(core, self.link)?;
        let start = Start {
            core,
            image: &image,
            link: self.link,
            address: area.address(),
            boot,
            patience: self.start_patience,
        };
        let (emulator, wire) = Emulator::start(&start)?;
        self.seated(area, name, core, wire, Some(emulator))
    }

    /// Hold the start-up conversation over a wire and take a seat at it.
    pub(super) fn seated(
        &mut self,
        area: &Area,
        name: &str,
        core: Core,
        mut wire: Wire,
        mut emulator: Option<Emulator>,
    ) -> Result<BoardSeat, BenchError> {
        let key = Key::new(&REHEARSAL_KEY);
        let mut told = Vec::new();
        let shared = self.shared.clone();
        let mut show = |from_board: bool, frame: &[u8]| {
            let direction = if from_board { Direction::FromSteward } else { Direction::ToSteward };
            shared.borrow_mut().log(0, direction, area.index, frame);
            if !from_board {
                told.extend_from_slice(frame);
            }
        };
        let mut talk = Talk {
            wire: &mut wire,
            key: &key,
            address: area.address(),
            counter: 0,
            board_boot: 0,
            show: &mut show,
        };
        let greeting = talk.start(area, self.start_patience).map_err(|why| {
            // Its link closes a moment before the process has ended.
            let ended = emulator.as_mut().filter(|_| is_closed(&why)).and_then(|emulator| {
                emulator.wait(Instant::now() + Duration::from_secs(1));
                emulator.ending()
            });
            match ended {
                Some(how) => BenchError::Ended { why, how },
                None => why.into(),
            }
        })?;
        let (counter, board_boot) = (talk.counter, talk.board_boot);
        let twin = self.side_by_side.then(|| Twin::new(&key, &greeting, area.address(), &told));
        self.shared.borrow_mut().started(area.index, core, greeting);
        Ok(BoardSeat {
            name: name.to_owned(),
            area: area.index,
            address: area.address(),
            key,
            wire,
            emulator,
            twin,
            time_out: self.time_out,
            shared: self.shared.clone(),
            counter,
            board_boot,
            from_neighbours: Vec::new(),
            from_plant: Vec::new(),
            counts: SeatCounts::default(),
            tick: 0,
            gone: false,
        })
    }
}

fn is_closed(why: &TalkError) -> bool {
    matches!(why, TalkError::NoAnswer { why: WireError::Closed, .. })
}

impl Staff for Bencher {
    fn seat(
        &mut self,
        area: &Area,
        name: &str,
        boot: u32,
    ) -> Result<Box<dyn Seat>, RehearsalError> {
        match self.kinds.get(area.index) {
            Some(&NodeKind::Emulated(core)) => {
                let seat = self.board(area, core, name, boot).map_err(|why| {
                    RehearsalError::Seat { area: name.to_owned(), why: Box::new(why) }
                })?;
                Ok(Box::new(seat))
            }
            Some(NodeKind::InProcess) | None => {
                let inner = InProcess.seat(area, name, boot)?;
                Ok(Box::new(Logged { inner, area: area.index, shared: self.shared.clone() }))
            }
        }
    }
}

/// A seat in this process whose frames go to the logbook too.
struct Logged {
    inner: Box<dyn Seat>,
    area: usize,
    shared: Shared,
}

impl Seat for Logged {
    fn hear(&mut self, source: Source, wire: &[u8]) {
        self.shared.borrow_mut().heard(self.area, wire);
        self.inner.hear(source, wire);
    }

    fn begin(&mut self, tick: u32) -> Result<(), Gone> {
        self.inner.begin(tick)
    }

    fn finish(&mut self, tick: u32, out: &mut dyn FnMut(u8, &[u8])) -> Result<(), Gone> {
        let Self { inner, area, shared } = self;
        inner.finish(tick, &mut |to, wire| {
            shared.borrow_mut().said(*area, tick, wire);
            out(to, wire);
        })
    }

    fn counts(&self) -> SeatCounts {
        self.inner.counts()
    }
}
