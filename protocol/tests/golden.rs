//! The worked examples of `WIRE.md`, byte by byte.
//!
//! Contract: every message has exactly one example there, its id is frozen
//! here, and what the page says about sizes is what the code does. The hex on
//! the page was made by an independent implementation, not by this crate.

mod page;

use hedgerow_protocol::auth::{Key, REHEARSAL_KEY};
use hedgerow_protocol::decoder::FrameDecoder;
use hedgerow_protocol::frame::{self, Header, PLANT};
use hedgerow_protocol::limits::{FRAME_MAX, OVERHEAD_BYTES, PAYLOAD_MAX, WIRE_MAX};
use hedgerow_protocol::message::packed::{pack_bits, pack_floats, pack_readings};
use hedgerow_protocol::message::*;
use page::{PAGE, examples, hex};

/// Name, id, from and to, in the order of the page; append only.
const FROZEN: [(&str, u8, u8, u8); 14] = [
    ("Hello", 0x01, 1, PLANT),
    ("CharterPart", 0x02, PLANT, 1),
    ("CharterState", 0x03, 1, PLANT),
    ("Run", 0x04, PLANT, 1),
    ("Stop", 0x05, PLANT, 1),
    ("Measurements", 0x10, PLANT, 1),
    ("Schedule", 0x11, PLANT, 1),
    ("BasePoint", 0x12, PLANT, 1),
    ("Restore", 0x13, PLANT, 1),
    ("Orders", 0x20, 1, PLANT),
    ("Status", 0x21, 1, PLANT),
    ("ProofPart", 0x22, 1, PLANT),
    ("TieTerms", 0x30, 1, 2),
    ("Effort", 0x06, 1, PLANT),
];

const HASH: [u8; 16] = [0, 1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12, 13, 14, 15];

fn readings<'b>(values: &[Reading], room: &'b mut [u8]) -> Readings<'b> {
    pack_readings(values.iter().copied(), room).unwrap()
}

fn floats<'b>(values: &[f32], room: &'b mut [u8]) -> Floats<'b> {
    pack_floats(values.iter().copied(), room).unwrap()
}

fn bits<'b>(flags: &[bool], room: &'b mut [u8]) -> Bits<'b> {
    pack_bits(flags.iter().copied(), room).unwrap()
}

/// The example of this name, where it has no packed list.
fn plain_example(name: &str) -> Option<Message<'static>> {
    Some(match name {
        "Hello" => Message::Hello(Hello {
            role: Role::Steward,
            protocol: 1,
            version: [0, 1, 0],
            core: "cortex-m4f",
            buses_max: 64,
            unknowns_max: 104,
            rows_max: 108,
            charter: HASH,
            last_fault: 0,
        }),
        "CharterPart" => Message::CharterPart(CharterPart {
            offset: 400,
            total: 1234,
            bytes: &[0xDE, 0xAD, 0, 0xBE, 0xEF],
        }),
        "CharterState" => Message::CharterState(CharterState {
            received: 405,
            hash: [0; 16],
            refused: Some(Refusal::Checksum),
        }),
        "Run" => Message::Run(Run { charter: HASH }),
        "Stop" => Message::Stop(Stop { tick: 300 }),
        "Effort" => Message::Effort(Effort {
            tick: 7,
            instructions: 712_345,
            stack_bytes: 4321,
            rebuilt: true,
        }),
        "Schedule" => Message::Schedule(Schedule { tie: 2, export_mw: -45.5, ramp_ticks: 300 }),
        "BasePoint" => Message::BasePoint(BasePoint { unit: 3, base_mw: 250.0, ramp_ticks: 0 }),
        "Restore" => Message::Restore(Restore { tick: 9 }),
        "TieTerms" => Message::TieTerms(TieTerms {
            tie: 3,
            tick: 7,
            round: 12,
            ready: true,
            bid: [0.125, -0.5],
            bid_before: [0.25, 0.0],
            deviation: [0.0625, 0.0],
            open: false,
            detached: false,
            distance: 1,
            rung: Rung::Lean,
        }),
        _ => return None,
    })
}

/// Call `use_it` with the message of the example of this name.
fn with_example<R>(name: &str, use_it: impl FnOnce(Message<'_>) -> R) -> R {
    if let Some(message) = plain_example(name) {
        return use_it(message);
    }
    let mut room = [[0; 16]; 9];
    let [b0, b1, b2, b3, b4, b5, b6, b7, b8] = &mut room;
    let fresh = Reading::fresh;
    let old = Reading { value: -30.25, age_ticks: 1 };
    let message = match name {
        "Measurements" => Message::Measurements(Measurements {
            tick: 7,
            freq_dev_hz: readings(&[fresh(-0.05)], b0),
            line_flow_mw: readings(&[fresh(120.5), Reading::missing()], b1),
            tie_flow_mw: readings(&[old], b2),
            output_mw: readings(&[fresh(80.0)], b3),
            // -0 in, +0 on the wire.
            shed_mw: readings(&[fresh(-0.0)], b4),
            feeder_load_mw: readings(&[fresh(12.5)], b5),
            line_closed: bits(&[true, false], b6),
            tie_closed: bits(&[true], b7),
            unit_in_service: bits(&[true], b8),
        }),
        "Orders" => Message::Orders(Orders {
            tick: 7,
            setpoint_mw: floats(&[81.5, -20.0], b0),
            shed_mw: floats(&[-0.0, 4.25], b1),
            take_off: bits(&[false, true], b2),
        }),
        "Status" => Message::Status(Status {
            tick: 7,
            rung: Rung::Lean,
            verdict: Verdict::Impossible,
            proven_mw: 12.5,
            load_mw: 400.0,
            shed_mw: 0.0,
            topology: 3,
            ties_open: 0b101,
            feeders_locked: 1 << 40,
            tie_deviation_mw: floats(&[-1.5], b0),
            accepted: 1000,
            refused: 2,
        }),
        "ProofPart" => Message::ProofPart(ProofPart {
            proof: 1,
            tick: 7,
            rung: Rung::Keep,
            topology: 3,
            root: 2,
            line_closed: bits(&[true, false, true], b0),
            tie_closed: bits(&[true], b1),
            claimed_mw: 12.5,
            vector: ProofVector::Dual,
            first: 64,
            total: 66,
            values: floats(&[0.5, -0.25], b2),
        }),
        other => panic!("no example named {other}"),
    };
    use_it(message)
}

/// The header of the example at this place of [`FROZEN`].
fn header_of(place: usize) -> Header {
    let (name, id, from, to) = FROZEN[place];
    Header {
        id,
        from,
        to,
        boot_id: 0x1122_3344,
        peer_boot_id: if name == "Hello" { 0 } else { 0x5566_7788 },
        counter: place as u32 + 1,
    }
}

#[test]
fn page_has_one_example_of_every_message_and_of_the_charter() {
    let mut names: Vec<_> = FROZEN.iter().map(|row| row.0).chain(["Charter"]).collect();
    names.sort_unstable();
    assert_eq!(examples().into_keys().collect::<Vec<_>>(), names);
}

#[test]
fn ids_are_frozen_and_no_others_exist() {
    for (name, id, ..) in FROZEN {
        assert_eq!(with_example(name, |message| message.id()), id, "{name}");
        assert!(PAGE.contains(&format!("| 0x{id:02X} | `{name}` |")));
    }
    for id in 0..=u8::MAX {
        let known = FROZEN.iter().any(|row| row.1 == id);
        let refused = Message::decode(id, &[]) == Err(PayloadError::UnknownId(id));
        assert_eq!(known, !refused, "id 0x{id:02X}");
    }
}

#[test]
fn payloads_and_wire_bytes_are_those_of_the_page() {
    let page = examples();
    let key = Key::new(&REHEARSAL_KEY);
    for (place, (name, ..)) in FROZEN.into_iter().enumerate() {
        let (mut payload, mut raw, mut wire) = ([0; FRAME_MAX], [0; FRAME_MAX], [0; WIRE_MAX]);
        with_example(name, |message| {
            let payload = message.encode(&mut payload).unwrap();
            assert_eq!(hex(payload), hex(&page[name]["payload"]), "{name} payload");
            let sent = frame::seal(&header_of(place), &message, &key, &mut raw, &mut wire).unwrap();
            assert_eq!(hex(sent), hex(&page[name]["wire"]), "{name} wire");
        });
    }
}

#[test]
fn wire_bytes_of_the_page_open_to_the_examples() {
    let page = examples();
    let key = Key::new(&REHEARSAL_KEY);
    for (place, (name, ..)) in FROZEN.into_iter().enumerate() {
        let mut decoder = FrameDecoder::<WIRE_MAX>::new();
        let mut bytes = &page[name]["wire"][..];
        let raw = decoder.feed(&mut bytes).expect("a whole frame");
        let (header, heard) = frame::open(raw, &key).unwrap();
        assert_eq!(header, header_of(place));
        assert_eq!(frame::peek(raw), Some(header));
        with_example(name, |message| assert_eq!(heard, message));
    }
}

#[test]
fn page_states_the_sizes_of_the_code() {
    assert!(PAGE.contains(&format!("| 0 to {PAYLOAD_MAX} | payload |")));
    assert!(PAGE.contains(&format!("length ({OVERHEAD_BYTES} to {FRAME_MAX} bytes")));
}
