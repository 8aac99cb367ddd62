//! The decoder finds every frame, whatever comes before and however it is cut.

use crate::parts::{headers, parts, sealed};
use hedgerow_protocol::auth::{Key, REHEARSAL_KEY};
use hedgerow_protocol::cobs;
use hedgerow_protocol::decoder::FrameDecoder;
use hedgerow_protocol::frame;
use hedgerow_protocol::limits::FRAME_MAX;
use proptest::collection::vec;
use proptest::prelude::*;

/// Room for any frame of `parts(2)`, and little more, so that garbage overruns it.
const ROOM: usize = 256;

/// Everything that the decoder hands out of these bytes.
fn fed(decoder: &mut FrameDecoder<ROOM>, mut bytes: &[u8]) -> Vec<Vec<u8>> {
    let mut frames = Vec::new();
    while let Some(raw) = decoder.feed(&mut bytes) {
        frames.push(raw.to_vec());
    }
    assert!(bytes.is_empty(), "bytes were left");
    frames
}

fn opens(raw: &[u8]) -> bool {
    frame::open(raw, &Key::new(&REHEARSAL_KEY)).is_ok()
}

#[test]
fn longest_coding_is_as_long_as_stated() {
    for len in 1..=FRAME_MAX {
        let raw = vec![1; len];
        let mut wire = vec![0; cobs::encoded_max(len)];
        assert_eq!(cobs::encode(&raw, &mut wire), Some(cobs::encoded_max(len)));
    }
}

proptest! {
    #[test]
    fn coding_has_no_zero_and_comes_back(raw in vec(prop_oneof![Just(0u8), any::<u8>()], 0..700)) {
        let mut wire = vec![0; cobs::encoded_max(raw.len())];
        let len = cobs::encode(&raw, &mut wire).unwrap();
        prop_assert!(!wire[..len].contains(&0));
        let back = cobs::decode_in_place(&mut wire[..len]).unwrap();
        prop_assert_eq!(&wire[..back], &raw[..]);
    }

    #[test]
    fn finds_the_second_frame_after_any_garbage(
        garbage in vec(prop_oneof![3 => any::<u8>(), 1 => Just(0u8)], 0..900),
        header in headers(),
        first in parts(2),
        second in parts(2),
    ) {
        let (raw_first, wire_first) = sealed(&header, &first.message());
        let (raw_second, wire_second) = sealed(&header, &second.message());
        let mut decoder = FrameDecoder::<ROOM>::new();
        let stream = [&garbage[..], &wire_first, &wire_second].concat();
        let found: Vec<_> = fed(&mut decoder, &stream).into_iter().filter(|raw| opens(raw)).collect();
        prop_assert_eq!(found.last(), Some(&raw_second));
        // Garbage that ends in a delimiter costs nothing at all.
        if garbage.last().is_none_or(|&byte| byte == 0) {
            prop_assert_eq!(found, vec![raw_first, raw_second]);
        }
    }

    #[test]
    fn cut_streams_give_the_same_frames_and_counts(
        pieces in vec(vec(prop_oneof![4 => any::<u8>(), 1 => Just(0u8)], 0..400), 0..6),
        header in headers(),
        said in vec(parts(2), 1..4),
        cuts in vec(1..40usize, 1..30),
    ) {
        let mut stream = Vec::new();
        for (index, parts) in said.iter().enumerate() {
            stream.extend(pieces.get(index).into_iter().flatten());
            stream.push(0);
            stream.extend(sealed(&header, &parts.message()).1);
        }
        let mut whole = FrameDecoder::<ROOM>::new();
        let expected = fed(&mut whole, &stream);

        let mut cut = FrameDecoder::<ROOM>::new();
        let mut found = Vec::new();
        let mut rest = &stream[..];
        for &len in cuts.iter().cycle() {
            let (piece, left) = rest.split_at(len.min(rest.len()));
            found.extend(fed(&mut cut, piece));
            rest = left;
            if rest.is_empty() {
                break;
            }
        }
        prop_assert_eq!(found, expected);
        let counts = |decoder: &FrameDecoder<ROOM>| {
            (decoder.frames(), decoder.overlong(), decoder.undecodable())
        };
        prop_assert_eq!(counts(&cut), counts(&whole));
    }

    #[test]
    fn any_flipped_bit_on_the_wire_costs_at_most_its_neighbour(
        header in headers(),
        parts in parts(2),
        place in any::<proptest::sample::Index>(),
    ) {
        let (raw, wire) = sealed(&header, &parts.message());
        let bit = place.index(wire.len() * 8);
        let mut hurt = wire.clone();
        hurt[bit / 8] ^= 1 << (bit % 8);
        let stream = [&hurt[..], &wire, &wire].concat();
        let found: Vec<_> = fed(&mut FrameDecoder::new(), &stream)
            .into_iter()
            .filter(|raw| opens(raw))
            .collect();
        // The delimiter itself may be hit: then two frames run together.
        let hit_delimiter = bit / 8 == wire.len() - 1;
        prop_assert_eq!(found.len(), if hit_delimiter { 1 } else { 2 });
        prop_assert!(found.iter().all(|found| *found == raw));
    }
}
