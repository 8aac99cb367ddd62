//! One whole frame from `WIRE.md`, taken apart with codes written here.
//!
//! The published examples of each code stand beside the code in `protocol/`;
//! here checksum and stuffing are written a second time, bit by bit, so that a
//! mistake shared by writer and reader of the frame would show.

use hedgerow_protocol::auth::{Key, REHEARSAL_KEY};
use hedgerow_protocol::decoder::FrameDecoder;
use hedgerow_protocol::frame;
use hedgerow_protocol::message::{Message, Stop};

/// `Stop` at tick 300, as `WIRE.md` prints it.
const WIRE: &str = "03 01 05 0B 01 44 33 22 11 88 77 66 55 05 01 01 17 AC 02 F8 18 5B C7 59 \
                    39 89 3F D6 EE 2B 17 01 CA 9D 15 BC D6 52 49 00";
/// Its tag, as `WIRE.md` prints it.
const TAG: &str = "F8 18 5B C7 59 39 89 3F D6 EE 2B 17 01 CA 9D 15";

fn bytes(hex: &str) -> Vec<u8> {
    hex.split_whitespace().map(|byte| u8::from_str_radix(byte, 16).expect("hex")).collect()
}

/// CRC-32/ISO-HDLC, one bit at a time.
fn crc32(bytes: &[u8]) -> u32 {
    let shift = |crc: u32, _| if crc & 1 == 1 { (crc >> 1) ^ 0xEDB8_8320 } else { crc >> 1 };
    !bytes.iter().fold(u32::MAX, |crc, &byte| (0..8).fold(crc ^ u32::from(byte), shift))
}

/// Takes the stuffing off a piece without its delimiter.
fn unstuffed(mut coded: &[u8]) -> Vec<u8> {
    let mut out = Vec::new();
    while let Some((&code, rest)) = coded.split_first() {
        let (block, next) = rest.split_at(usize::from(code) - 1);
        out.extend_from_slice(block);
        if code < 0xFF && !next.is_empty() {
            out.push(0);
        }
        coded = next;
    }
    out
}

/// Source: catalogue of parametrised CRC algorithms, CRC-32/ISO-HDLC check value, from memory; tolerance exact.
#[test]
fn the_checksum_written_here_has_the_catalogue_check_value() {
    assert_eq!(crc32(b"123456789"), 0xCBF4_3926);
}

/// Source: S. Cheshire and M. Baker, "Consistent Overhead Byte Stuffing", IEEE/ACM Trans. Networking 7(2), 1999, example of an IP header, from memory; tolerance exact.
#[test]
fn the_stuffing_written_here_decodes_the_published_example() {
    let coded = bytes("02 45 01 04 2C 4C 79 01 05 40 06 4F 37");
    assert_eq!(unstuffed(&coded), bytes("45 00 00 2C 4C 79 00 00 40 06 4F 37"));
}

/// Source: RFC 2104, FIPS 180-4 and the two codes above, tag recomputed with another implementation; tolerance exact.
#[test]
fn the_stop_frame_of_the_wire_page_is_what_every_layer_says_it_is() {
    let wire = bytes(WIRE);
    let (&delimiter, coded) = wire.split_last().expect("bytes");
    assert_eq!(delimiter, 0);
    let raw = unstuffed(coded);
    let (tagged, sum) = raw.split_last_chunk::<4>().expect("a checksum");
    assert_eq!(u32::from_le_bytes(*sum), crc32(tagged));
    let (body, tag) = tagged.split_last_chunk::<16>().expect("a tag");
    assert_eq!(tag.as_slice(), bytes(TAG));
    let key = Key::new(&REHEARSAL_KEY);
    assert_eq!(key.tag(body), *tag);
    assert_eq!(body, bytes("01 05 00 01 44 33 22 11 88 77 66 55 05 00 00 00 AC 02"));

    let mut decoder = FrameDecoder::<64>::new();
    let mut rest = wire.as_slice();
    let found = decoder.feed(&mut rest).expect("one frame");
    assert_eq!(found, raw);
    let (header, message) = frame::open(found, &key).expect("a sound frame");
    assert_eq!((header.from, header.to, header.counter), (0, 1, 5));
    assert_eq!((header.boot_id, header.peer_boot_id), (0x1122_3344, 0x5566_7788));
    assert_eq!(message, Message::Stop(Stop { tick: 300 }));
}
