//! Published code vectors through the protocol's public interface.

use hedgerow_protocol::auth::{Key, REHEARSAL_KEY, digest16};
use hedgerow_protocol::cobs;
use hedgerow_protocol::frame::{self, Header, PLANT};
use hedgerow_protocol::message::{BasePoint, Message, PayloadError, Stop};

fn hex(bytes: &[u8]) -> String {
    bytes.iter().map(|byte| format!("{byte:02x}")).collect()
}

/// CRC-32 bit by bit: reflected polynomial, all ones before and after.
fn crc32(bytes: &[u8]) -> u32 {
    let mut rest = u32::MAX;
    for &byte in bytes {
        rest ^= u32::from(byte);
        for _ in 0..8 {
            rest = if rest & 1 == 1 { rest >> 1 ^ 0xEDB8_8320 } else { rest >> 1 };
        }
    }
    !rest
}

/// Source: public CRC catalogue, CRC-32/ISO-HDLC, check value CBF43926 of "123456789", from memory, recomputed bitwise; tolerance none.
#[test]
fn checksum_of_a_frame_is_the_catalogued_crc_32() {
    assert_eq!(crc32(b"123456789"), 0xCBF4_3926);
    let header =
        Header { id: 0, from: PLANT, to: 1, boot_id: 7, peer_boot_id: 3, counter: 123_456_789 };
    let (mut raw, mut wire) = ([0; 64], [0; 64]);
    let key = Key::new(&REHEARSAL_KEY);
    let said = Message::Stop(Stop { tick: 300 });
    let sent = frame::seal(&header, &said, &key, &mut raw, &mut wire).unwrap();
    let mut coded = sent[..sent.len() - 1].to_vec();
    let len = cobs::decode_in_place(&mut coded).unwrap();
    let (body, sum) = coded[..len].split_last_chunk::<4>().unwrap();
    assert_eq!(u32::from_le_bytes(*sum), crc32(body));
    assert_eq!(frame::open(&coded[..len], &key).unwrap().1, said);
}

/// Pairs raw, coded.
fn cobs_examples() -> Vec<(Vec<u8>, Vec<u8>)> {
    let run = |from: u8, to: u8| (from..=to).collect::<Vec<u8>>();
    let packet = [0x45, 0, 0, 0x2C, 0x4C, 0x79, 0, 0, 0x40, 6, 0x4F, 0x37];
    let coded_packet = [2, 0x45, 1, 4, 0x2C, 0x4C, 0x79, 1, 5, 0x40, 6, 0x4F, 0x37];
    vec![
        (vec![], vec![1]),
        (vec![0], vec![1, 1]),
        (vec![0, 0x11, 0], vec![1, 2, 0x11, 1]),
        (vec![0x11, 0x22, 0, 0x33], vec![3, 0x11, 0x22, 2, 0x33]),
        (run(1, 0xFE), [vec![0xFF], run(1, 0xFE)].concat()),
        (run(1, 0xFF), [vec![0xFF], run(1, 0xFE), vec![2, 0xFF]].concat()),
        ([run(3, 0xFF), vec![0, 1]].concat(), [vec![0xFE], run(3, 0xFF), vec![2, 1]].concat()),
        (packet.to_vec(), coded_packet.to_vec()),
    ]
}

/// Source: S. Cheshire, M. Baker, IEEE/ACM Trans. Networking 7(2), 1999 (last example their own packet), from memory, checked with a library; tolerance none.
#[test]
fn byte_stuffing_is_that_of_the_paper_both_ways() {
    for (raw, coded) in cobs_examples() {
        let mut wire = [0xEE; 300];
        let len = cobs::encode(&raw, &mut wire).unwrap();
        assert_eq!(wire[..len], coded);
        let mut back = coded;
        let len = cobs::decode_in_place(&mut back).unwrap();
        assert_eq!(back[..len], raw);
    }
}

/// Source: RFC 4231, HMAC-SHA-256 test cases 1 to 7, first 16 bytes, from memory, recomputed with another library; tolerance none.
#[test]
fn tags_are_those_of_rfc_4231() {
    let long: &[u8] = b"This is a test using a larger than block-size key and a larger than \
        block-size data. The key needs to be hashed before being used by the HMAC algorithm.";
    let cases: [(Vec<u8>, &[u8], &str); 7] = [
        (vec![0x0B; 20], b"Hi There", "b0344c61d8db38535ca8afceaf0bf12b"),
        (b"Jefe".to_vec(), b"what do ya want for nothing?", "5bdcc146bf60754e6a042426089575c7"),
        (vec![0xAA; 20], &[0xDD; 50], "773ea91e36800e46854db8ebd09181a7"),
        ((1..=25).collect(), &[0xCD; 50], "82558a389a443c0ea4cc819899f2083a"),
        (vec![0x0C; 20], b"Test With Truncation", "a3b6167473100ee06e0c796c2955552b"),
        (
            vec![0xAA; 131],
            b"Test Using Larger Than Block-Size Key - Hash Key First",
            "60e431591ee0b67f0d8a26aacbf5b77f",
        ),
        (vec![0xAA; 131], long, "9b09ffa71b942fcb27635fbcd5b0e944"),
    ];
    for (secret, data, expected) in cases {
        let key = Key::new(&secret);
        assert_eq!(hex(&key.tag(data)), expected);
        assert!(key.verify(data, &key.tag(data)));
    }
}

/// Source: FIPS 180-4, SHA-256 of "abc", first 16 bytes, from memory, recomputed; tolerance none.
#[test]
fn digest_is_that_of_fips_180_4() {
    assert_eq!(hex(&digest16(b"abc")), "ba7816bf8f01cfea414140de5dae2223");
}

/// Source: postcard wire format 1.x (unsigned varints, zigzag apart), vectors made by crate postcard 1.2.0; tolerance none.
#[test]
fn whole_numbers_in_messages_are_the_published_varints() {
    let vectors: [(u32, &[u8]); 9] = [
        (0, &[0x00]),
        (127, &[0x7F]),
        (128, &[0x80, 0x01]),
        (300, &[0xAC, 0x02]),
        (16_383, &[0xFF, 0x7F]),
        (16_384, &[0x80, 0x80, 0x01]),
        (65_535, &[0xFF, 0xFF, 0x03]),
        (2_097_152, &[0x80, 0x80, 0x80, 0x01]),
        (u32::MAX, &[0xFF, 0xFF, 0xFF, 0xFF, 0x0F]),
    ];
    for (tick, bytes) in vectors {
        let message = Message::Stop(Stop { tick });
        let mut room = [0; 16];
        assert_eq!(message.encode(&mut room).unwrap(), bytes);
        assert_eq!(Message::decode(message.id(), bytes), Ok(message));
    }
}

/// Source: postcard wire format 1.x, over-long varints and missing bytes as refused by crate postcard 1.2.0, trailing bytes by our own rule; tolerance none.
#[test]
fn bytes_that_are_no_whole_number_are_refused() {
    let id = Message::Stop(Stop { tick: 0 }).id();
    for bytes in [&[][..], &[0xFF, 0xFF, 0xFF, 0xFF, 0x1F], &[0x80], &[0x01, 0x00]] {
        assert_eq!(Message::decode(id, bytes), Err(PayloadError::Malformed), "{bytes:02X?}");
    }
}

/// Source: postcard wire format 1.x, floats as little-endian IEEE 754 bits (-32.005859375 is 00 06 00 C2), vector made by crate postcard 1.2.0; tolerance none.
#[test]
fn floats_in_messages_are_little_endian() {
    let said = BasePoint { unit: 3, base_mw: -32.005_86, ramp_ticks: 300 };
    let message = Message::BasePoint(said);
    let mut room = [0; 32];
    let bytes = message.encode(&mut room).unwrap().to_vec();
    assert_eq!(bytes, [0x03, 0x00, 0x06, 0x00, 0xC2, 0xAC, 0x02]);
    assert_eq!(Message::decode(message.id(), &bytes), Ok(message));
}
