//! The start-up conversation: who I am, a charter in parts, run, stop.
//!
//! Contract: a charter arrives in parts, in order, into a staging buffer of C
//! bytes; when it is whole it goes to the steward, and what became of it is
//! answered with its hash. A part that repeats what is there is answered and
//! changes nothing; one at offset 0 starts anew. Nothing acts before `Run` has
//! named the hash of the charter held; any other hash is refused.
//!
//! Data flow: message -> [`Boot::hear`] -> a queue of [`Answer`]s, which
//! [`Node::answer`](crate::node::Node::answer) seals.

use heapless::Vec;
use hedgerow_protocol::auth::digest16;
use hedgerow_protocol::message::{CharterPart, CharterState, Message, Refusal, Run};

/// The hash that means "no charter".
const NO_HASH: [u8; 16] = [0; 16];
/// Answers kept for one read; a host that waits for each needs one.
const ANSWERS: usize = 8;

/// What a board is, apart from its charter.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Identity {
    /// Address until a charter brings one.
    pub address: u8,
    /// Name of the processor core.
    pub core: &'static str,
    /// Number of the last latched fault; 0 = none.
    pub last_fault: u8,
}

/// Something to be said at start-up.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Answer {
    /// Who I am.
    Hello,
    /// What became of the charter.
    State(CharterState),
}

/// Where the conversation stands.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Phase {
    /// No charter, or only a part of one.
    Waiting,
    /// A charter is held; `Run` is missing.
    Loaded,
    /// The steward acts.
    Running,
    /// `Stop` was heard.
    Stopped,
}

/// State of the conversation, with room for a charter of C bytes.
#[derive(Clone, Debug)]
pub struct Boot<const C: usize> {
    staging: [u8; C],
    received: u16,
    hash: [u8; 16],
    phase: Phase,
    answers: Vec<Answer, ANSWERS>,
}

impl<const C: usize> Boot<C> {
    /// Nothing said yet.
    pub const fn new() -> Self {
        Self {
            staging: [0; C],
            received: 0,
            hash: NO_HASH,
            phase: Phase::Waiting,
            answers: Vec::new(),
        }
    }

    /// Where the conversation stands.
    pub fn phase(&self) -> Phase {
        self.phase
    }

    /// Hash of the charter held; zeros = none.
    pub fn hash(&self) -> [u8; 16] {
        self.hash
    }

    /// Queue an answer; the oldest gives way when nobody fetches them.
    pub fn say(&mut self, answer: Answer) {
        if self.answers.is_full() {
            self.answers.remove(0);
        }
        let _room_was_made = self.answers.push(answer);
    }

    /// The answers queued, oldest first; they are taken off the queue.
    pub fn take_answers(&mut self) -> Vec<Answer, ANSWERS> {
        core::mem::take(&mut self.answers)
    }

    /// A charter came in one piece, with the image or by a call: `outcome` is what the steward said of it.
    pub fn note_loaded(&mut self, charter: &[u8], outcome: Result<(), Refusal>) {
        self.received = 0;
        match outcome {
            Ok(()) => {
                self.hash = digest16(charter);
                self.set_phase(Phase::Running);
            }
            Err(_) => {
                self.hash = NO_HASH;
                self.set_phase(Phase::Waiting);
            }
        }
    }

    /// Take in a message of the start-up conversation; `load` is the steward's.
    ///
    /// Returns whether it was used; messages of other conversations never are.
    pub fn hear(
        &mut self,
        message: &Message<'_>,
        load: impl FnOnce(&[u8]) -> Result<(), Refusal>,
    ) -> bool {
        match message {
            Message::Hello(_) => {
                self.say(Answer::Hello);
                true
            }
            Message::CharterPart(part) => {
                let refused = self.take_part(part, load).err();
                self.say(Answer::State(self.state(refused)));
                refused.is_none()
            }
            Message::Run(run) => {
                let refused = self.run(run).err();
                self.say(Answer::State(self.state(refused)));
                refused.is_none()
            }
            Message::Stop(_) => {
                self.set_phase(Phase::Stopped);
                true
            }
            Message::CharterState(_)
            | Message::Effort(_)
            | Message::Measurements(_)
            | Message::Schedule(_)
            | Message::BasePoint(_)
            | Message::Restore(_)
            | Message::Orders(_)
            | Message::Status(_)
            | Message::ProofPart(_)
            | Message::TieTerms(_) => false,
        }
    }

    fn state(&self, refused: Option<Refusal>) -> CharterState {
        CharterState { received: self.received, hash: self.hash, refused }
    }

    fn take_part(
        &mut self,
        part: &CharterPart<'_>,
        load: impl FnOnce(&[u8]) -> Result<(), Refusal>,
    ) -> Result<(), Refusal> {
        let total = usize::from(part.total);
        let start = usize::from(part.offset);
        let end = start.saturating_add(part.bytes.len());
        if total > C {
            return Err(Refusal::Capacity);
        }
        if end > total || part.bytes.is_empty() {
            return Err(Refusal::Malformed);
        }
        if start == 0 {
            // The steward forgets its old charter as soon as a new one begins to arrive.
            self.received = 0;
            self.hash = NO_HASH;
            self.set_phase(Phase::Waiting);
        }
        if start != usize::from(self.received) || self.phase != Phase::Waiting {
            // Late or repeated: the answer says how far it has come.
            return if end <= usize::from(self.received) {
                Ok(())
            } else {
                Err(Refusal::NoCharter)
            };
        }
        let room = self.staging.get_mut(start..end).ok_or(Refusal::Capacity)?;
        for (to, from) in room.iter_mut().zip(part.bytes) {
            *to = *from;
        }
        self.received = self.received.saturating_add(part.bytes.len() as u16);
        if end < total {
            return Ok(());
        }
        let charter = self.staging.get(..total).ok_or(Refusal::Capacity)?;
        match load(charter) {
            Ok(()) => {
                self.hash = digest16(charter);
                self.set_phase(Phase::Loaded);
                Ok(())
            }
            Err(refusal) => {
                self.received = 0;
                Err(refusal)
            }
        }
    }

    fn run(&mut self, run: &Run) -> Result<(), Refusal> {
        if self.hash == NO_HASH {
            return Err(Refusal::NoCharter);
        }
        if run.charter != self.hash {
            return Err(Refusal::OtherCharter);
        }
        self.set_phase(Phase::Running);
        Ok(())
    }

    /// The one place where the phase changes.
    fn set_phase(&mut self, phase: Phase) {
        self.phase = phase;
    }
}

impl<const C: usize> Default for Boot<C> {
    fn default() -> Self {
        Self::new()
    }
}
