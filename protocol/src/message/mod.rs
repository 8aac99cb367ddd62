//! What can be said, one file per conversation.
//!
//! Contract: the message ids are append-only; a golden test freezes each id and
//! the bytes of one example. Numbers inside a decoded message are still the
//! sender's word: the receiver checks finiteness and range before use.

pub mod housekeeping;
pub mod neighbour;
pub mod packed;
pub mod plant;
pub mod steward;

pub use housekeeping::{CharterPart, CharterState, Effort, Hello, Refusal, Role, Run, Stop};
pub use neighbour::TieTerms;
pub use packed::{Bits, Floats, Reading, Readings};
pub use plant::{BasePoint, Measurements, Restore, Schedule};
pub use steward::{Orders, ProofPart, ProofVector, Rung, Status, Verdict};

/// A message of any kind, borrowing the payload it was decoded from.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Message<'a> {
    /// Who I am.
    Hello(Hello<'a>),
    /// A part of a charter.
    CharterPart(CharterPart<'a>),
    /// What became of the charter.
    CharterState(CharterState),
    /// Start to act.
    Run(Run),
    /// Stop acting.
    Stop(Stop),
    /// What a tick cost.
    Effort(Effort),
    /// Everything the plant measured in one tick.
    Measurements(Measurements<'a>),
    /// A tie's agreed flow.
    Schedule(Schedule),
    /// A unit's base point.
    BasePoint(BasePoint),
    /// The operator lets shed load return.
    Restore(Restore),
    /// Set-points for units and feeders.
    Orders(Orders<'a>),
    /// How the steward sees its area.
    Status(Status<'a>),
    /// A part of a proof.
    ProofPart(ProofPart<'a>),
    /// One end's terms for a tie.
    TieTerms(TieTerms),
}

/// Why a payload is not a message.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum PayloadError {
    /// No message has this id.
    UnknownId(u8),
    /// The bytes do not decode, or some are left over.
    Malformed,
    /// The payload does not fit the buffer given.
    TooLong,
}

macro_rules! ids {
    ($($id:literal => $kind:ident),* $(,)?) => {
        impl<'a> Message<'a> {
            /// The id that the frame carries.
            pub const fn id(&self) -> u8 {
                match self { $(Message::$kind(_) => $id,)* }
            }

            /// Decode a payload.
            ///
            /// Errors: unknown id, undecodable or left-over bytes, a list with a partial element.
            pub fn decode(id: u8, payload: &'a [u8]) -> Result<Self, PayloadError> {
                let message = match id {
                    $($id => {
                        let (inner, rest) = postcard::take_from_bytes(payload)
                            .map_err(|_| PayloadError::Malformed)?;
                        if !rest.is_empty() {
                            return Err(PayloadError::Malformed);
                        }
                        Message::$kind(inner)
                    })*
                    other => return Err(PayloadError::UnknownId(other)),
                };
                if message.is_whole() { Ok(message) } else { Err(PayloadError::Malformed) }
            }

            /// Encode the payload into `out` and return the part used.
            ///
            /// Errors: [`PayloadError::TooLong`] when it does not fit.
            pub fn encode<'b>(&self, out: &'b mut [u8]) -> Result<&'b mut [u8], PayloadError> {
                match self {
                    $(Message::$kind(inner) => postcard::to_slice(inner, out),)*
                }
                .map_err(|_| PayloadError::TooLong)
            }
        }
    };
}

ids! {
    0x01 => Hello,
    0x02 => CharterPart,
    0x03 => CharterState,
    0x04 => Run,
    0x05 => Stop,
    0x06 => Effort,
    0x10 => Measurements,
    0x11 => Schedule,
    0x12 => BasePoint,
    0x13 => Restore,
    0x20 => Orders,
    0x21 => Status,
    0x22 => ProofPart,
    0x30 => TieTerms,
}

impl Message<'_> {
    /// Whether every packed list holds whole elements.
    fn is_whole(&self) -> bool {
        match self {
            Message::Measurements(m) => m.is_whole(),
            Message::Orders(o) => o.setpoint_mw.is_whole() && o.shed_mw.is_whole(),
            Message::Status(s) => s.tie_deviation_mw.is_whole(),
            Message::ProofPart(p) => p.values.is_whole(),
            Message::Hello(_)
            | Message::CharterPart(_)
            | Message::CharterState(_)
            | Message::Run(_)
            | Message::Stop(_)
            | Message::Effort(_)
            | Message::Schedule(_)
            | Message::BasePoint(_)
            | Message::Restore(_)
            | Message::TieTerms(_) => true,
        }
    }
}
