//! Arbitrary messages: owned parts, and the message that borrows from them.

use hedgerow_protocol::auth::{Key, REHEARSAL_KEY};
use hedgerow_protocol::frame::{self, Header};
use hedgerow_protocol::limits::{FRAME_MAX, WIRE_MAX};
use hedgerow_protocol::message::*;
use proptest::collection::vec;
use proptest::prelude::*;

/// Number of kinds of message.
const KINDS: u8 = 14;

/// What a message of any kind is made of.
#[derive(Clone, Debug)]
pub struct Parts {
    kind: u8,
    small: [u8; 3],
    middle: [u16; 3],
    large: [u32; 3],
    huge: u64,
    name: String,
    hash: [u8; 16],
    floats: [f32; 6],
    readings: [Vec<u8>; 6],
    lists: [Vec<u8>; 2],
    bits: [Vec<u8>; 3],
}

/// Parts of any message with lists of up to `longest` elements.
pub fn parts(longest: usize) -> impl Strategy<Value = Parts> {
    let packed =
        move |size| vec(vec(any::<u8>(), size), 0..=longest).prop_map(|elements| elements.concat());
    let numbers = (0..KINDS, any::<[u8; 3]>(), any::<[u16; 3]>(), any::<[u32; 3]>(), any::<u64>());
    let fixed = ("[a-z0-9é-]{0,24}", any::<[u8; 16]>(), any::<[f32; 6]>());
    let lists = (
        proptest::array::uniform6(packed(5)),
        proptest::array::uniform2(packed(4)),
        proptest::array::uniform3(packed(1)),
    );
    (numbers, fixed, lists).prop_map(
        |((kind, small, middle, large, huge), (name, hash, floats), (readings, lists, bits))| {
            Parts { kind, small, middle, large, huge, name, hash, floats, readings, lists, bits }
        },
    )
}

impl Parts {
    /// The message made of these parts.
    pub fn message(&self) -> Message<'_> {
        self.housekeeping().unwrap_or_else(|| self.working())
    }

    fn housekeeping(&self) -> Option<Message<'_>> {
        let [a, b, c] = self.small;
        let [d, e, _] = self.middle;
        Some(match self.kind {
            0 => Message::Hello(Hello {
                role: if a % 2 == 0 { Role::Plant } else { Role::Steward },
                protocol: b,
                version: self.small,
                core: &self.name,
                buses_max: c,
                unknowns_max: d,
                rows_max: e,
                charter: self.hash,
                last_fault: a,
            }),
            1 => Message::CharterPart(CharterPart { offset: d, total: e, bytes: &self.bits[0] }),
            2 => Message::CharterState(CharterState {
                received: d,
                hash: self.hash,
                refused: [
                    None,
                    Some(Refusal::NoCharter),
                    Some(Refusal::Checksum),
                    Some(Refusal::Malformed),
                    Some(Refusal::Version),
                    Some(Refusal::Capacity),
                    Some(Refusal::Range),
                    Some(Refusal::OtherCharter),
                ][usize::from(a % 8)],
            }),
            3 => Message::Run(Run { charter: self.hash }),
            4 => Message::Stop(Stop { tick: self.large[0] }),
            _ => return None,
        })
    }

    fn working(&self) -> Message<'_> {
        let [a, ..] = self.small;
        let [tick, ramp_ticks, _] = self.large;
        match self.kind {
            5 => Message::Measurements(self.measurements()),
            6 => Message::Schedule(Schedule { tie: a, export_mw: self.floats[0], ramp_ticks }),
            7 => Message::BasePoint(BasePoint { unit: a, base_mw: self.floats[0], ramp_ticks }),
            8 => Message::Restore(Restore { tick }),
            9 => Message::Orders(Orders {
                tick,
                setpoint_mw: Floats(&self.lists[0]),
                shed_mw: Floats(&self.lists[1]),
                take_off: Bits(&self.bits[0]),
            }),
            10 => Message::Status(self.status()),
            11 => Message::ProofPart(self.proof_part()),
            12 => Message::Effort(Effort {
                tick,
                instructions: ramp_ticks,
                stack_bytes: self.large[2],
                rebuilt: a % 2 == 1,
            }),
            _ => Message::TieTerms(self.tie_terms()),
        }
    }

    fn rung(&self) -> Rung {
        Rung::ALL[usize::from(self.small[0] % 4)]
    }

    fn measurements(&self) -> Measurements<'_> {
        let [a, b, c, d, e, f] = &self.readings;
        let [lines, ties, units] = &self.bits;
        Measurements {
            tick: self.large[0],
            freq_dev_hz: Readings(a),
            line_flow_mw: Readings(b),
            tie_flow_mw: Readings(c),
            output_mw: Readings(d),
            shed_mw: Readings(e),
            feeder_load_mw: Readings(f),
            line_closed: Bits(lines),
            tie_closed: Bits(ties),
            unit_in_service: Bits(units),
        }
    }

    fn status(&self) -> Status<'_> {
        let [tick, accepted, refused] = self.large;
        let [proven_mw, load_mw, shed_mw, ..] = self.floats;
        Status {
            tick,
            rung: self.rung(),
            verdict: [Verdict::Settled, Verdict::Working, Verdict::Impossible, Verdict::Blind]
                [usize::from(self.small[1] % 4)],
            proven_mw,
            load_mw,
            shed_mw,
            topology: self.middle[0],
            ties_open: self.middle[1],
            feeders_locked: self.huge,
            tie_deviation_mw: Floats(&self.lists[0]),
            accepted,
            refused,
        }
    }

    fn proof_part(&self) -> ProofPart<'_> {
        let [proof, first, total] = self.middle;
        ProofPart {
            proof,
            tick: self.large[0],
            rung: self.rung(),
            topology: first,
            root: self.small[0],
            line_closed: Bits(&self.bits[0]),
            tie_closed: Bits(&self.bits[1]),
            claimed_mw: self.floats[0],
            vector: ProofVector::ALL[usize::from(self.small[1] % 6)],
            first,
            total,
            values: Floats(&self.lists[0]),
        }
    }

    fn tie_terms(&self) -> TieTerms {
        let [a, b, c, d, e, f] = self.floats;
        TieTerms {
            tie: self.middle[0],
            tick: self.large[0],
            round: self.middle[1],
            ready: self.small[0] > 127,
            bid: [a, b],
            bid_before: [c, d],
            deviation: [e, f],
            open: self.small[1] > 127,
            detached: self.small[2] > 127,
            distance: self.small[1],
            rung: self.rung(),
        }
    }
}

/// Any header.
pub fn headers() -> impl Strategy<Value = Header> {
    (any::<[u8; 2]>(), any::<[u32; 3]>()).prop_map(|([from, to], [boot, peer, counter])| Header {
        id: 0,
        from,
        to,
        boot_id: boot,
        peer_boot_id: peer,
        counter,
    })
}

/// Raw frame and wire bytes of a message under the rehearsal key.
pub fn sealed(header: &Header, message: &Message<'_>) -> (Vec<u8>, Vec<u8>) {
    let (mut raw, mut wire) = ([0; FRAME_MAX], [0; WIRE_MAX]);
    let key = Key::new(&REHEARSAL_KEY);
    let sent = frame::seal(header, message, &key, &mut raw, &mut wire)
        .expect("parts are small enough")
        .to_vec();
    let (_, coded) = sent.split_last().expect("there is a delimiter");
    let mut plain = coded.to_vec();
    let len = hedgerow_protocol::cobs::decode_in_place(&mut plain).expect("own coding decodes");
    plain.truncate(len);
    (plain, sent)
}
