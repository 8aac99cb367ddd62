//! A frame opens to what was sealed, and to nothing when a bit of it is wrong.

use crate::parts::{headers, parts, sealed};
use hedgerow_protocol::auth::{Key, REHEARSAL_KEY};
use hedgerow_protocol::frame::{self, FrameError, Header, SealError};
use hedgerow_protocol::limits::{FRAME_MAX, HEADER_BYTES, OVERHEAD_BYTES, PROTOCOL_VERSION};
use hedgerow_protocol::message::{Message, PayloadError, Stop};
use proptest::prelude::*;

fn key() -> Key {
    Key::new(&REHEARSAL_KEY)
}

fn some_header() -> Header {
    Header { id: 0, from: 1, to: 2, boot_id: 3, peer_boot_id: 4, counter: 5 }
}

/// A raw frame with these header and payload bytes and a right checksum; the
/// tag is right if `key` is.
fn forged(start: [u8; 4], payload: &[u8], key: &Key) -> Vec<u8> {
    let mut raw = start.to_vec();
    raw.extend([0; HEADER_BYTES - 4]);
    raw.extend(payload);
    raw.extend(key.tag(&raw));
    let crc = crc::Crc::<u32>::new(&crc::CRC_32_ISO_HDLC);
    raw.extend(crc.checksum(&raw).to_le_bytes());
    raw
}

#[test]
fn checksum_has_the_catalogued_check_value() {
    // CRC-32/ISO-HDLC of the ASCII digits 1 to 9, from memory: CBF43926.
    let crc = crc::Crc::<u32>::new(&crc::CRC_32_ISO_HDLC);
    assert_eq!(crc.checksum(b"123456789"), 0xCBF4_3926);
}

#[test]
fn checks_come_in_their_order() {
    let other = Key::new(b"another key");
    let good = forged([PROTOCOL_VERSION, 5, 1, 2], &[9], &key());
    assert!(frame::open(&good, &key()).is_ok());

    let wrong_tag = forged([PROTOCOL_VERSION, 0xEE, 1, 2], &[9], &other);
    assert_eq!(frame::open(&wrong_tag, &key()), Err(FrameError::Tag));
    let wrong_version = forged([7, 0xEE, 1, 2], &[9], &other);
    assert_eq!(frame::open(&wrong_version, &key()), Err(FrameError::Version(7)));
    let mut wrong_sum = wrong_version;
    wrong_sum[5] ^= 1;
    assert_eq!(frame::open(&wrong_sum, &key()), Err(FrameError::Checksum));
    let short = &wrong_sum[..OVERHEAD_BYTES - 1];
    assert_eq!(frame::open(short, &key()), Err(FrameError::Length));
    let long = [1; FRAME_MAX + 1];
    assert_eq!(frame::open(&long, &key()), Err(FrameError::Length));
}

#[test]
fn authentic_frames_with_a_wrong_payload_are_refused() {
    let open = |id, payload: &[u8]| {
        let raw = forged([PROTOCOL_VERSION, id, 1, 2], payload, &key());
        frame::open(&raw, &key()).map(|(header, _)| header.id)
    };
    assert_eq!(open(5, &[9]), Ok(5));
    let malformed = Err(FrameError::Payload(PayloadError::Malformed));
    assert_eq!(open(5, &[]), malformed, "missing");
    assert_eq!(open(5, &[9, 9]), malformed, "left over");
    // Tick, two lists of floats and one of bits; the first list is 3 bytes long.
    assert_eq!(open(0x20, &[7, 3, 1, 2, 3, 0, 0]), malformed, "partial float");
    assert_eq!(open(0x20, &[7, 4, 1, 2, 3, 4, 0, 0]), Ok(0x20));
    let unknown = Err(FrameError::Payload(PayloadError::UnknownId(0x7F)));
    assert_eq!(open(0x7F, &[9]), unknown);
}

#[test]
fn version_error_names_both_versions() {
    let said = FrameError::Version(7).to_string();
    assert_eq!(said, "frame of protocol version 7, this is version 1");
}

#[test]
fn says_which_buffer_is_too_small() {
    let said = Message::Stop(Stop { tick: 300 });
    let (raw_len, wire_len) = (OVERHEAD_BYTES + 2, OVERHEAD_BYTES + 4);
    let seal = |raw: usize, wire: usize| {
        let (mut raw, mut wire) = (vec![0; raw], vec![0; wire]);
        frame::seal(&some_header(), &said, &key(), &mut raw, &mut wire).map(<[u8]>::len)
    };
    assert_eq!(seal(raw_len, wire_len), Ok(wire_len));
    for short in 0..raw_len {
        assert_eq!(seal(short, wire_len), Err(SealError::Raw));
    }
    for short in 0..wire_len {
        assert_eq!(seal(raw_len, short), Err(SealError::Wire));
    }
}

#[test]
fn refuses_to_seal_what_no_receiver_takes() {
    let bytes = [1; FRAME_MAX];
    let said = Message::CharterPart(hedgerow_protocol::message::CharterPart {
        offset: 0,
        total: 0,
        bytes: &bytes,
    });
    let (mut raw, mut wire) = ([0; 2 * FRAME_MAX], [0; 3 * FRAME_MAX]);
    assert_eq!(
        frame::seal(&some_header(), &said, &key(), &mut raw, &mut wire),
        Err(SealError::Payload)
    );
}

#[test]
fn peek_needs_a_header_and_nothing_else() {
    let (raw, _) = sealed(&some_header(), &Message::Stop(Stop { tick: 1 }));
    let header = Header { id: 5, ..some_header() };
    assert_eq!(frame::peek(&raw[..HEADER_BYTES]), Some(header));
    assert_eq!(frame::peek(&raw[..HEADER_BYTES - 1]), None);
}

proptest! {
    #[test]
    fn every_message_comes_back_as_it_was(header in headers(), parts in parts(9)) {
        let message = parts.message();
        let (raw, _) = sealed(&header, &message);
        let (heard_header, heard) = frame::open(&raw, &key()).unwrap();
        prop_assert_eq!(heard_header, Header { id: message.id(), ..header });
        prop_assert_eq!(heard, message);
    }

    #[test]
    fn any_flipped_bit_is_refused(header in headers(), parts in parts(3)) {
        let (mut raw, _) = sealed(&header, &parts.message());
        for bit in 0..raw.len() * 8 {
            raw[bit / 8] ^= 1 << (bit % 8);
            prop_assert_eq!(frame::open(&raw, &key()).err(), Some(FrameError::Checksum));
            raw[bit / 8] ^= 1 << (bit % 8);
        }
    }

    #[test]
    fn any_changed_byte_is_refused_even_with_its_checksum_mended(
        header in headers(),
        parts in parts(3),
        place in any::<proptest::sample::Index>(),
        change in 1..=u8::MAX,
    ) {
        let (mut raw, _) = sealed(&header, &parts.message());
        let body = raw.len() - 4;
        let at = place.index(body);
        raw[at] ^= change;
        prop_assert_eq!(frame::open(&raw, &key()).err(), Some(FrameError::Checksum));
        let sum = crc::Crc::<u32>::new(&crc::CRC_32_ISO_HDLC).checksum(&raw[..body]);
        raw[body..].copy_from_slice(&sum.to_le_bytes());
        let expected = if at == 0 { FrameError::Version(raw[0]) } else { FrameError::Tag };
        prop_assert_eq!(frame::open(&raw, &key()).err(), Some(expected));
    }

    #[test]
    fn any_truncation_is_refused(header in headers(), parts in parts(3)) {
        let (raw, _) = sealed(&header, &parts.message());
        for len in 0..raw.len() {
            prop_assert!(frame::open(&raw[..len], &key()).is_err());
            prop_assert!(frame::open(&raw[raw.len() - len..], &key()).is_err());
        }
    }

    #[test]
    fn arbitrary_bytes_never_open(bytes in proptest::collection::vec(any::<u8>(), 0..200)) {
        prop_assert!(frame::open(&bytes, &key()).is_err());
    }

    #[test]
    fn arbitrary_payloads_decode_or_are_refused_without_a_panic(
        id in any::<u8>(),
        payload in proptest::collection::vec(any::<u8>(), 0..80),
    ) {
        if let Ok(message) = Message::decode(id, &payload) {
            // What decodes is a message: it can be said again and heard the same.
            let mut out = [0; 200];
            let said = message.encode(&mut out).unwrap();
            let again = Message::decode(id, said).unwrap();
            prop_assert_eq!(std::format!("{again:?}"), std::format!("{message:?}"));
        }
    }
}
