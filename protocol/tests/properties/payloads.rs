//! Sizes of the largest messages, and the wire format of the parts of all.

use crate::parts::sealed;
use hedgerow_protocol::frame::Header;
use hedgerow_protocol::limits::*;
use hedgerow_protocol::message::*;
use serde::{Deserialize, Serialize};
use std::fmt::Debug;

/// Buffer that every frame but measurements must fit, delimiter included.
const SMALL_WIRE: usize = 512;

/// Bytes without a zero, for the worst case of the coding.
const FULL: [u8; 1024] = [0xAB; 1024];

fn header() -> Header {
    Header {
        id: 0,
        from: 254,
        to: 253,
        boot_id: u32::MAX,
        peer_boot_id: u32::MAX,
        counter: u32::MAX,
    }
}

fn readings(count: usize) -> Readings<'static> {
    Readings(&FULL[..READING_BYTES * count])
}

fn floats(count: usize) -> Floats<'static> {
    Floats(&FULL[..4 * count])
}

fn bits(count: usize) -> Bits<'static> {
    Bits(&FULL[..count.div_ceil(8)])
}

#[test]
fn largest_measurements_are_as_long_as_derived() {
    let message = Message::Measurements(Measurements {
        tick: u32::MAX,
        freq_dev_hz: readings(BUSES_MAX),
        line_flow_mw: readings(LINES_MAX),
        tie_flow_mw: readings(TIES_MAX),
        output_mw: readings(UNITS_MAX),
        shed_mw: readings(FEEDERS_MAX),
        feeder_load_mw: readings(FEEDERS_MAX),
        line_closed: bits(LINES_MAX),
        tie_closed: bits(TIES_MAX),
        unit_in_service: bits(UNITS_MAX),
    });
    let mut out = [0; PAYLOAD_MAX];
    let len = message.encode(&mut out).unwrap().len();
    // The derivation counts two length bytes per list; the ties' readings and
    // the three bit fields are shorter than 128 bytes and take one.
    assert_eq!(len, PAYLOAD_MAX - 4);
    let (raw, wire) = sealed(&header(), &message);
    assert_eq!(raw.len(), len + OVERHEAD_BYTES);
    assert!(wire.len() <= WIRE_MAX);
}

/// The largest of every other message that a build may send.
fn largest_others() -> Vec<Message<'static>> {
    let part_bytes = PART_MAX - 3 - 3 - 2;
    // proof, tick, rung, topology, claim, vector, first, total, three list lengths.
    let proof_overhead = 3 + 5 + 1 + 3 + 1 + 4 + 1 + 3 + 3 + 4;
    let bit_bytes = LINES_MAX.div_ceil(8) + TIES_MAX.div_ceil(8);
    vec![
        Message::Hello(Hello {
            role: Role::Steward,
            protocol: u8::MAX,
            version: [u8::MAX; 3],
            core: "a name of a core that is sixty-four bytes long, and no byte more",
            buses_max: u8::MAX,
            unknowns_max: u16::MAX,
            rows_max: u16::MAX,
            charter: [u8::MAX; 16],
            last_fault: u8::MAX,
        }),
        Message::CharterPart(CharterPart {
            offset: u16::MAX,
            total: u16::MAX,
            bytes: &FULL[..part_bytes],
        }),
        Message::Orders(Orders {
            tick: u32::MAX,
            setpoint_mw: floats(UNITS_MAX),
            shed_mw: floats(FEEDERS_MAX),
            take_off: bits(UNITS_MAX),
        }),
        Message::Status(Status {
            tick: u32::MAX,
            rung: Rung::Shed,
            verdict: Verdict::Blind,
            proven_mw: f32::MAX,
            load_mw: f32::MAX,
            shed_mw: f32::MAX,
            topology: u16::MAX,
            ties_open: u16::MAX,
            feeders_locked: u64::MAX,
            tie_deviation_mw: floats(TIES_MAX),
            accepted: u32::MAX,
            refused: u32::MAX,
        }),
        Message::ProofPart(ProofPart {
            proof: u16::MAX,
            tick: u32::MAX,
            rung: Rung::Shed,
            topology: u16::MAX,
            root: u8::MAX,
            line_closed: bits(LINES_MAX),
            tie_closed: bits(TIES_MAX),
            claimed_mw: f32::MAX,
            vector: ProofVector::BoxHigh,
            first: u16::MAX,
            total: u16::MAX,
            values: floats((PART_MAX - proof_overhead - bit_bytes) / 4),
        }),
        Message::TieTerms(TieTerms {
            tie: u16::MAX,
            tick: u32::MAX,
            round: u16::MAX,
            ready: true,
            bid: [f32::MAX; 2],
            bid_before: [f32::MAX; 2],
            deviation: [f32::MAX; 2],
            open: true,
            detached: true,
            distance: u8::MAX,
            rung: Rung::Shed,
        }),
    ]
}

#[test]
fn every_other_message_fits_a_small_buffer_and_parts_their_limit() {
    for message in largest_others() {
        let (raw, wire) = sealed(&header(), &message);
        assert!(wire.len() <= SMALL_WIRE, "{} bytes: {message:?}", wire.len());
        let is_part = matches!(message, Message::CharterPart(_) | Message::ProofPart(_));
        let payload = raw.len() - OVERHEAD_BYTES;
        // A proof part may leave up to three bytes of its last float free.
        assert_eq!(is_part, (PART_MAX - 3..=PART_MAX).contains(&payload), "{message:?}");
    }
}

/// Check that `value` becomes these bytes and comes back.
fn both_ways<'a, T: Serialize + Deserialize<'a> + PartialEq + Debug>(value: T, bytes: &'a [u8]) {
    let mut out = [0; 64];
    assert_eq!(postcard::to_slice(&value, &mut out).unwrap(), bytes, "{value:?}");
    assert_eq!(postcard::from_bytes::<T>(bytes).unwrap(), value);
}

#[derive(Debug, PartialEq, Serialize, Deserialize)]
struct Mixed {
    flag: (bool, u8),
    list: [u16; 3],
    some: Option<u8>,
}

#[test]
fn fields_are_coded_as_the_published_format_says() {
    // Own vectors of the postcard wire format, made by another program.
    both_ways(255u8, &[0xFF]);
    both_ways(300u16, &[0xAC, 0x02]);
    both_ways(16_384u16, &[0x80, 0x80, 0x01]);
    both_ways(u16::MAX, &[0xFF, 0xFF, 0x03]);
    both_ways(127u32, &[0x7F]);
    both_ways(2_097_151u32, &[0xFF, 0xFF, 0x7F]);
    both_ways(u32::MAX, &[0xFF, 0xFF, 0xFF, 0xFF, 0x0F]);
    both_ways(u64::MAX, &[0xFF, 0xFF, 0xFF, 0xFF, 0xFF, 0xFF, 0xFF, 0xFF, 0xFF, 0x01]);
    both_ways(-32.005_86f32, &[0x00, 0x06, 0x00, 0xC2]);
    both_ways(1.0f32, &[0x00, 0x00, 0x80, 0x3F]);
    both_ways("hello", b"\x05hello");
    both_ways("é", &[0x02, 0xC3, 0xA9]);
    both_ways(None::<u8>, &[0x00]);
    both_ways(Some(0u8), &[0x01, 0x00]);
    let mixed = Mixed { flag: (true, 9), list: [1, 128, 300], some: None };
    both_ways(mixed, &[1, 9, 0x01, 0x80, 0x01, 0xAC, 0x02, 0]);
}

#[test]
fn enum_numbers_are_frozen() {
    for (number, rung) in Rung::ALL.into_iter().enumerate() {
        both_ways(rung, &[number as u8]);
        assert_eq!(Rung::from_number(number as u8), Some(rung));
    }
    for (number, vector) in ProofVector::ALL.into_iter().enumerate() {
        both_ways(vector, &[number as u8]);
    }
    for (number, verdict) in
        [Verdict::Settled, Verdict::Working, Verdict::Impossible, Verdict::Blind]
            .into_iter()
            .enumerate()
    {
        both_ways(verdict, &[number as u8]);
    }
    for (number, refusal) in [
        Refusal::NoCharter,
        Refusal::Checksum,
        Refusal::Malformed,
        Refusal::Version,
        Refusal::Capacity,
        Refusal::Range,
        Refusal::OtherCharter,
    ]
    .into_iter()
    .enumerate()
    {
        both_ways(refusal, &[number as u8]);
    }
    both_ways(Role::Plant, &[0]);
    both_ways(Role::Steward, &[1]);
}

#[test]
fn fields_that_are_out_of_range_or_cut_are_refused() {
    let refused = |ok: bool| assert!(!ok);
    refused(postcard::from_bytes::<u16>(&[0xFF, 0xFF, 0x04]).is_ok());
    refused(postcard::from_bytes::<bool>(&[0x02]).is_ok());
    refused(postcard::from_bytes::<Option<u8>>(&[0x02]).is_ok());
    refused(postcard::from_bytes::<&str>(&[0x02, 0x41]).is_ok());
    refused(postcard::from_bytes::<u32>(&[]).is_ok());
    refused(postcard::from_bytes::<Rung>(&[4]).is_ok());
    refused(postcard::from_bytes::<Verdict>(&[4]).is_ok());
    refused(postcard::from_bytes::<ProofVector>(&[6]).is_ok());
}
