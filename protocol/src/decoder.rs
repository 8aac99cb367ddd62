//! Finds frames in a stream of bytes.
//!
//! Contract: bytes in, as they come, in pieces of any size; raw frames out,
//! COBS taken off, nothing else checked. Whatever garbage comes, the frame
//! after the next delimiter is found. Every byte given is used: none is lost
//! because a frame ended before it.
//!
//! Data flow: bytes -> own buffer up to a delimiter -> COBS decoded in place ->
//! handed to [`crate::frame::open`].

use crate::cobs;

/// Finds frames of at most `N` coded bytes, delimiter not counted.
///
/// `N` = [`crate::limits::WIRE_MAX`] holds any frame; a receiver that never
/// hears measurements can do with less.
#[derive(Clone, Debug)]
pub struct FrameDecoder<const N: usize> {
    buffer: [u8; N],
    used: usize,
    skipping: bool,
    frames: u32,
    overlong: u32,
    undecodable: u32,
}

impl<const N: usize> FrameDecoder<N> {
    /// An empty decoder.
    pub const fn new() -> Self {
        Self { buffer: [0; N], used: 0, skipping: false, frames: 0, overlong: 0, undecodable: 0 }
    }

    /// Use bytes up to the end of the next frame and hand it out.
    ///
    /// `bytes` is moved on past what was used; `None` means that all of it was.
    /// Call again with the rest until then.
    ///
    /// ```
    /// use hedgerow_protocol::decoder::FrameDecoder;
    /// let mut decoder = FrameDecoder::<16>::new();
    /// let mut bytes: &[u8] = &[0x02, 0x11, 0x00, 0x02, 0x22, 0x00, 0x02];
    /// assert_eq!(decoder.feed(&mut bytes), Some(&[0x11][..]));
    /// assert_eq!(decoder.feed(&mut bytes), Some(&[0x22][..]));
    /// assert_eq!(decoder.feed(&mut bytes), None);
    /// assert!(bytes.is_empty());
    /// ```
    pub fn feed(&mut self, bytes: &mut &[u8]) -> Option<&[u8]> {
        let len = self.advance(bytes)?;
        self.buffer.get(..len)
    }

    /// Frames handed out since the start.
    pub const fn frames(&self) -> u32 {
        self.frames
    }

    /// Pieces longer than the buffer.
    pub const fn overlong(&self) -> u32 {
        self.overlong
    }

    /// Pieces that fit but are no COBS.
    pub const fn undecodable(&self) -> u32 {
        self.undecodable
    }

    /// Use bytes up to the end of the next frame and return its length.
    fn advance(&mut self, bytes: &mut &[u8]) -> Option<usize> {
        // Bounded: each turn uses up a delimiter, or all that is left.
        loop {
            let given = *bytes;
            let Some(end) = given.iter().position(|&byte| byte == cobs::DELIMITER) else {
                self.keep(given);
                *bytes = &[];
                return None;
            };
            self.keep(given.get(..end)?);
            *bytes = given.get(end + 1..)?;
            if let Some(len) = self.finish() {
                return Some(len);
            }
        }
    }

    /// Add a piece to the buffer, or start to skip when it does not fit.
    fn keep(&mut self, piece: &[u8]) {
        if self.skipping {
            return;
        }
        let end = self.used.saturating_add(piece.len());
        match self.buffer.get_mut(self.used..end) {
            Some(room) => {
                for (to, from) in room.iter_mut().zip(piece) {
                    *to = *from;
                }
                self.used = end;
            }
            None => self.skipping = true,
        }
    }

    /// Close the piece at a delimiter; its decoded length if it is a frame.
    fn finish(&mut self) -> Option<usize> {
        let used = core::mem::take(&mut self.used);
        if core::mem::take(&mut self.skipping) {
            self.overlong = self.overlong.wrapping_add(1);
            return None;
        }
        // Two delimiters in a row are an idle line, not an error.
        if used == 0 {
            return None;
        }
        let decoded = self.buffer.get_mut(..used).and_then(cobs::decode_in_place);
        match decoded {
            Some(_) => self.frames = self.frames.wrapping_add(1),
            None => self.undecodable = self.undecodable.wrapping_add(1),
        }
        decoded
    }
}

impl<const N: usize> Default for FrameDecoder<N> {
    fn default() -> Self {
        Self::new()
    }
}

#[cfg(test)]
#[allow(clippy::unwrap_used, clippy::expect_used, clippy::indexing_slicing)]
mod tests {
    use super::FrameDecoder;
    use std::{vec, vec::Vec};

    fn all<const N: usize>(decoder: &mut FrameDecoder<N>, mut bytes: &[u8]) -> Vec<Vec<u8>> {
        let mut frames = Vec::new();
        while let Some(raw) = decoder.feed(&mut bytes) {
            frames.push(raw.to_vec());
        }
        assert!(bytes.is_empty());
        frames
    }

    #[test]
    fn finds_two_frames_in_one_piece_and_one_in_two() {
        let mut decoder = FrameDecoder::<8>::new();
        assert_eq!(all(&mut decoder, &[2, 7, 0, 2, 8, 0, 3, 9]), [[7], [8]]);
        assert_eq!(all(&mut decoder, &[9, 0]), [[9, 9]]);
        assert_eq!(decoder.frames(), 3);
    }

    #[test]
    fn holds_a_frame_of_exactly_its_size_and_counts_one_longer() {
        let mut decoder = FrameDecoder::<4>::new();
        assert_eq!(all(&mut decoder, &[4, 7, 7, 7, 0]), [[7, 7, 7]]);
        assert!(all(&mut decoder, &[5, 7, 7, 7, 7, 0]).is_empty());
        assert_eq!((decoder.frames(), decoder.overlong()), (1, 1));
        assert_eq!(all(&mut decoder, &[2, 8, 0]), [[8]]);
    }

    #[test]
    fn counts_an_overlong_piece_once_however_it_is_cut() {
        let mut decoder = FrameDecoder::<4>::new();
        for _ in 0..5 {
            assert!(all(&mut decoder, &[9; 3]).is_empty());
        }
        assert_eq!(all(&mut decoder, &[0, 2, 8, 0]), [[8]]);
        assert_eq!((decoder.overlong(), decoder.undecodable()), (1, 0));
    }

    #[test]
    fn counts_an_undecodable_piece_and_goes_on() {
        let mut decoder = FrameDecoder::<8>::new();
        assert_eq!(all(&mut decoder, &[9, 1, 0, 2, 8, 0]), [[8]]);
        assert_eq!((decoder.overlong(), decoder.undecodable()), (0, 1));
    }

    #[test]
    fn takes_an_idle_line_for_no_error() {
        let mut decoder = FrameDecoder::<8>::new();
        assert!(all(&mut decoder, &[0; 20]).is_empty());
        assert_eq!((decoder.overlong(), decoder.undecodable()), (0, 0));
        assert_eq!(all(&mut decoder, &[1, 0]), vec![Vec::<u8>::new()]);
    }
}
