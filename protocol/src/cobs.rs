//! Consistent Overhead Byte Stuffing: bytes without zeros, so that a zero can
//! mark the end of a frame.
//!
//! Contract: [`encode`] writes into a buffer of its own, [`decode_in_place`]
//! shrinks within the buffer it is given; neither handles the delimiter. A
//! buffer that is too small and bytes that are no encoding give `None`.
//!
//! Source: S. Cheshire, M. Baker, "Consistent Overhead Byte Stuffing",
//! IEEE/ACM Transactions on Networking 7(2), 1999.

/// The byte that ends a frame and never occurs inside one.
pub const DELIMITER: u8 = 0;

/// Code of a block of 254 bytes without a zero after it.
const FULL: u8 = 0xFF;

/// Most bytes that `raw_len` bytes become, delimiter not counted.
pub const fn encoded_max(raw_len: usize) -> usize {
    raw_len + if raw_len == 0 { 1 } else { raw_len.div_ceil(254) }
}

/// Encode `raw` into `wire` and return the number of bytes written.
///
/// Errors: `None` when `wire` is too small.
/// Cost: one pass over `raw`.
///
/// ```
/// let mut wire = [0; 8];
/// assert_eq!(hedgerow_protocol::cobs::encode(&[0x11, 0x22, 0, 0x33], &mut wire), Some(5));
/// assert_eq!(wire[..5], [0x03, 0x11, 0x22, 0x02, 0x33]);
/// ```
pub fn encode(raw: &[u8], wire: &mut [u8]) -> Option<usize> {
    let mut code_at = 0;
    let mut next = 1;
    let mut code = 1u8;
    for &byte in raw {
        // A full block is closed only when more follows, so that none trails.
        if code == FULL {
            *wire.get_mut(code_at)? = code;
            code_at = next;
            next += 1;
            code = 1;
        }
        if byte == DELIMITER {
            *wire.get_mut(code_at)? = code;
            code_at = next;
            code = 1;
        } else {
            *wire.get_mut(next)? = byte;
            code += 1;
        }
        next += 1;
    }
    *wire.get_mut(code_at)? = code;
    Some(next)
}

/// Decode within `buffer` and return the number of bytes that are left at its start.
///
/// Errors: `None` when a block runs over the end or a zero is inside.
/// Cost: one pass over `buffer`.
///
/// ```
/// let mut buffer = [0x03, 0x11, 0x22, 0x02, 0x33];
/// assert_eq!(hedgerow_protocol::cobs::decode_in_place(&mut buffer), Some(4));
/// assert_eq!(buffer[..4], [0x11, 0x22, 0, 0x33]);
/// ```
pub fn decode_in_place(buffer: &mut [u8]) -> Option<usize> {
    let mut read = 0;
    let mut written = 0;
    while let Some(&code) = buffer.get(read) {
        read += 1;
        // A code of zero has no block: the subtraction says so.
        for _ in 0..code.checked_sub(1)? {
            let byte = *buffer.get(read)?;
            if byte == DELIMITER {
                return None;
            }
            *buffer.get_mut(written)? = byte;
            read += 1;
            written += 1;
        }
        if code != FULL && read < buffer.len() {
            *buffer.get_mut(written)? = 0;
            written += 1;
        }
    }
    Some(written)
}

#[cfg(test)]
#[allow(clippy::unwrap_used, clippy::expect_used, clippy::indexing_slicing)]
mod tests {
    use super::{decode_in_place, encode, encoded_max};
    use std::vec::Vec;

    /// Pairs raw, coded: Cheshire and Baker (1999), the last one their own
    /// packet, the others widely printed; from memory, checked with an
    /// independent implementation.
    fn table() -> Vec<(Vec<u8>, Vec<u8>)> {
        let run = |from: u8, to: u8| (from..=to).collect::<Vec<u8>>();
        let join = |parts: &[&[u8]]| parts.concat();
        std::vec![
            (Vec::new(), std::vec![1]),
            (std::vec![0], std::vec![1, 1]),
            (std::vec![0, 0], std::vec![1, 1, 1]),
            (std::vec![0, 0x11, 0], std::vec![1, 2, 0x11, 1]),
            (std::vec![0x11, 0x22, 0, 0x33], std::vec![3, 0x11, 0x22, 2, 0x33]),
            (std::vec![0x11, 0x22, 0x33, 0x44], std::vec![5, 0x11, 0x22, 0x33, 0x44]),
            (std::vec![0x11, 0, 0, 0], std::vec![2, 0x11, 1, 1, 1]),
            (run(1, 0xFE), join(&[&[0xFF], &run(1, 0xFE)])),
            (join(&[&[0], &run(1, 0xFE)]), join(&[&[1, 0xFF], &run(1, 0xFE)])),
            (run(1, 0xFF), join(&[&[0xFF], &run(1, 0xFE), &[2, 0xFF]])),
            (join(&[&run(2, 0xFF), &[0]]), join(&[&[0xFF], &run(2, 0xFF), &[1, 1]])),
            (join(&[&run(3, 0xFF), &[0, 1]]), join(&[&[0xFE], &run(3, 0xFF), &[2, 1]])),
            (
                std::vec![0x45, 0, 0, 0x2C, 0x4C, 0x79, 0, 0, 0x40, 6, 0x4F, 0x37],
                std::vec![2, 0x45, 1, 4, 0x2C, 0x4C, 0x79, 1, 5, 0x40, 6, 0x4F, 0x37],
            ),
        ]
    }

    #[test]
    fn encodes_the_published_examples() {
        for (raw, coded) in table() {
            let mut wire = [0xEE; 300];
            let len = encode(&raw, &mut wire).unwrap();
            assert_eq!(wire[..len], coded, "{raw:02X?}");
            assert!(len <= encoded_max(raw.len()));
        }
    }

    #[test]
    fn decodes_the_published_examples() {
        for (raw, mut coded) in table() {
            let len = decode_in_place(&mut coded).unwrap();
            assert_eq!(coded[..len], raw);
        }
    }

    #[test]
    fn refuses_a_zero_inside_and_a_block_over_the_end() {
        for bad in [&[3, 0x11, 0][..], &[0], &[1, 0, 1], &[4, 0x11, 0x22], &[2], &[0xFF; 254]] {
            assert_eq!(decode_in_place(&mut bad.to_vec()), None, "{bad:02X?}");
        }
    }

    #[test]
    fn says_when_the_wire_buffer_is_too_small() {
        for (raw, coded) in table() {
            for room in 0..coded.len() {
                assert_eq!(encode(&raw, &mut std::vec![0; room]), None);
            }
        }
    }
}
