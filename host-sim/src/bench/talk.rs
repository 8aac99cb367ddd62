//! The start-up conversation: hello, charter, run; and stop.
//!
//! Contract: nothing is taken from a board but by frames that are checked like
//! any other. A board is run only when it has read back the hash of the very
//! charter that was sent; one that is too small is told nothing and named with
//! both numbers.

use super::wire::{Wire, WireError};
use crate::charter::Area;
use hedgerow_protocol::auth::{Key, digest16};
use hedgerow_protocol::cobs;
use hedgerow_protocol::frame::{self, Header, PLANT};
use hedgerow_protocol::limits::{FRAME_MAX, PART_MAX, PROTOCOL_VERSION, WIRE_MAX};
use hedgerow_protocol::message::{
    CharterPart, CharterState, Hello, Message, Refusal, Role, Run, Stop,
};
use serde::Serialize;
use std::time::{Duration, Instant};
use thiserror::Error;

/// Boot id of the host in start-up conversations.
const HOST_BOOT: u32 = 1;
/// After how long a hello is said again.
const HELLO_AGAIN: Duration = Duration::from_millis(500);
/// Bytes of a charter in one part: what offset, total and length leave of a payload.
const PART_BYTES: usize = PART_MAX - 8;

/// Why a board can not be run.
#[derive(Debug, Error)]
pub enum TalkError {
    /// It says nothing.
    #[error("the board says no hello within {0:.0} s")]
    NoHello(f64),
    /// It does not answer.
    #[error("the board does not answer {to}: {why}")]
    NoAnswer {
        /// To what.
        to: &'static str,
        /// Why not.
        why: WireError,
    },
    /// It is too small.
    #[error("the area has {count} {noun}, the board's build holds {most}")]
    Capacity {
        /// What is too large.
        noun: &'static str,
        /// How many the area has.
        count: usize,
        /// How many the board holds.
        most: usize,
    },
    /// It speaks another version.
    #[error("the board speaks protocol version {theirs}, this program {PROTOCOL_VERSION}")]
    Version {
        /// The board's version.
        theirs: u8,
    },
    /// It refuses.
    #[error("the board refuses {what}: {why:?}")]
    Refused {
        /// What it refuses.
        what: &'static str,
        /// Why.
        why: Refusal,
    },
    /// It took the charter but reads back another.
    #[error("the board reads back another charter than was sent")]
    OtherCharter,
}

/// What a board has said of itself.
#[derive(Clone, Debug, PartialEq, Eq, Serialize)]
pub struct Greeting {
    /// Its core.
    pub core: String,
    /// Version of its firmware.
    pub version: [u8; 3],
    /// Most buses it holds.
    pub buses_max: usize,
    /// Most unknowns: units, feeders and two per tie.
    pub unknowns_max: usize,
    /// Most rows: lines and ties.
    pub rows_max: usize,
    /// Number of its boot.
    pub boot_id: u32,
    /// Number of its last latched fault, 0 for none.
    pub last_fault: u8,
}

/// The host's side of the conversation with one board.
pub struct Talk<'a> {
    /// The link.
    pub wire: &'a mut Wire,
    /// Key of both sides.
    pub key: &'a Key,
    /// Address of the board.
    pub address: u8,
    /// Frames sent so far.
    pub counter: u32,
    /// Boot of the board as last heard.
    pub board_boot: u32,
    /// Gets every frame: whether the board sent it, and the frame.
    pub show: &'a mut dyn FnMut(bool, &[u8]),
}

impl Talk<'_> {
    /// Wait for the hello, hand over the charter and run the board.
    ///
    /// Errors: [`TalkError`].
    pub fn start(&mut self, area: &Area, patience: Duration) -> Result<Greeting, TalkError> {
        let greeting = self.greet(patience)?;
        fits(area, &greeting)?;
        self.upload(&area.bytes, patience)?;
        let charter = digest16(&area.bytes);
        let run = Message::Run(Run { charter });
        let state = self.ask("the order to run", &run, patience)?;
        match state.refused {
            Some(why) => Err(TalkError::Refused { what: "to run", why }),
            None => Ok(greeting),
        }
    }

    /// Tell the board to stop; whether it does is not waited for.
    ///
    /// Errors: what the link says.
    pub fn stop(&mut self, tick: u32, deadline: Instant) -> Result<(), WireError> {
        self.say(&Message::Stop(Stop { tick }), deadline)
    }

    /// Wait for a hello; ask for one now and then.
    fn greet(&mut self, patience: Duration) -> Result<Greeting, TalkError> {
        let deadline = Instant::now() + patience;
        while Instant::now() < deadline {
            let until = deadline.min(Instant::now() + HELLO_AGAIN);
            let heard = self.hear(until, |boot_id, message| match message {
                Message::Hello(hello) if hello.role == Role::Steward => {
                    Some((hello.protocol, greeting_of(boot_id, &hello)))
                }
                _ => None,
            });
            match heard {
                Ok((PROTOCOL_VERSION, greeting)) => return Ok(greeting),
                Ok((theirs, _)) => return Err(TalkError::Version { theirs }),
                Err(WireError::Silent) => {}
                Err(why) => return Err(TalkError::NoAnswer { to: "at its boot", why }),
            }
            let sent = self.say(&own_hello(), deadline);
            sent.map_err(|why| TalkError::NoAnswer { to: "hello", why })?;
        }
        Err(TalkError::NoHello(patience.as_secs_f64()))
    }

    /// Send the charter in parts, each from where the board says it is.
    fn upload(&mut self, bytes: &[u8], patience: Duration) -> Result<(), TalkError> {
        let total = bytes.len() as u16;
        let mut offset = 0;
        // Bounded: every turn moves on, or ends it.
        while let Some(rest) = bytes.get(offset..).filter(|rest| !rest.is_empty()) {
            let part = rest.get(..PART_BYTES).unwrap_or(rest);
            let message =
                Message::CharterPart(CharterPart { offset: offset as u16, total, bytes: part });
            let state = self.ask("a part of the charter", &message, patience)?;
            if let Some(why) = state.refused {
                return Err(TalkError::Refused { what: "the charter", why });
            }
            let next = usize::from(state.received);
            if next == bytes.len() && state.hash == digest16(bytes) {
                return Ok(());
            }
            if next <= offset || next == bytes.len() {
                return Err(TalkError::OtherCharter);
            }
            offset = next;
        }
        Err(TalkError::OtherCharter)
    }

    /// Say something that is answered with the charter's state.
    fn ask(
        &mut self,
        to: &'static str,
        message: &Message<'_>,
        patience: Duration,
    ) -> Result<CharterState, TalkError> {
        let deadline = Instant::now() + patience;
        self.say(message, deadline).map_err(|why| TalkError::NoAnswer { to, why })?;
        self.hear(deadline, |_, message| match message {
            Message::CharterState(state) => Some(state),
            _ => None,
        })
        .map_err(|why| TalkError::NoAnswer { to, why })
    }

    fn say(&mut self, message: &Message<'_>, deadline: Instant) -> Result<(), WireError> {
        self.counter += 1;
        let header = Header {
            id: message.id(),
            from: PLANT,
            to: self.address,
            boot_id: HOST_BOOT,
            peer_boot_id: self.board_boot,
            counter: self.counter,
        };
        let (mut raw, mut wire) = ([0; FRAME_MAX], [0; WIRE_MAX]);
        // Parts are cut to fit a frame; nothing else here is long.
        let sealed = frame::seal(&header, message, self.key, &mut raw, &mut wire);
        let sealed: &[u8] = sealed.map_or(&[], |sealed| sealed);
        (self.show)(false, sealed);
        self.wire.send(sealed, deadline)
    }

    /// Wait for the first message from the board that `pick` takes.
    fn hear<T>(
        &mut self,
        deadline: Instant,
        pick: impl Fn(u32, Message<'_>) -> Option<T>,
    ) -> Result<T, WireError> {
        loop {
            let wire = self.wire.next(deadline)?;
            (self.show)(true, &wire);
            let mut raw = wire;
            if let Some((header, message)) = opened(&mut raw, self.key)
                && header.from == self.address
                && header.to == PLANT
            {
                self.board_boot = header.boot_id;
                if let Some(picked) = pick(header.boot_id, message) {
                    return Ok(picked);
                }
            }
        }
    }
}

/// Take a wire frame apart in place; none if it is not one of ours.
pub fn opened<'w>(wire: &'w mut [u8], key: &Key) -> Option<(Header, Message<'w>)> {
    let (_, coded) = wire.split_last_mut()?;
    let len = cobs::decode_in_place(coded)?;
    frame::open(coded.get(..len)?, key).ok()
}

fn own_hello() -> Message<'static> {
    Message::Hello(Hello {
        role: Role::Plant,
        protocol: PROTOCOL_VERSION,
        version: [0, 1, 0],
        core: "host",
        buses_max: 0,
        unknowns_max: 0,
        rows_max: 0,
        charter: [0; 16],
        last_fault: 0,
    })
}

fn greeting_of(boot_id: u32, hello: &Hello<'_>) -> Greeting {
    Greeting {
        core: hello.core.to_owned(),
        version: hello.version,
        buses_max: usize::from(hello.buses_max),
        unknowns_max: usize::from(hello.unknowns_max),
        rows_max: usize::from(hello.rows_max),
        boot_id,
        last_fault: hello.last_fault,
    }
}

/// Whether an area fits the board.
///
/// Errors: [`TalkError::Capacity`] with both numbers.
pub fn fits(area: &Area, greeting: &Greeting) -> Result<(), TalkError> {
    let unknowns = area.units.len() + area.feeders.len() + 2 * area.ties.len();
    let loops = area.meshed.iter().filter(|&&meshed| meshed).count();
    let rows = area.lines.len() + 1 + loops.saturating_sub(1);
    let counts = [
        ("buses", area.buses.len(), greeting.buses_max),
        ("unknowns (units, feeders and two per tie)", unknowns, greeting.unknowns_max),
        ("rows (lines, the balance and ties on loops)", rows, greeting.rows_max),
    ];
    match counts.into_iter().find(|(_, count, most)| count > most) {
        Some((noun, count, most)) => Err(TalkError::Capacity { noun, count, most }),
        None => Ok(()),
    }
}
