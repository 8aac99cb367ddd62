//! The logbook: every frame of a run, in the order in which the host saw it.
//!
//! Contract: append-only. A file is the magic, a version and records; each
//! record carries its own checksum, so that a file that ends in mid-record is
//! whole up to the record before. The writer flushes when told, once a tick.
//!
//! Layout, little-endian: `hedgelog`, version u16; then per frame tick u32,
//! direction u8 (0 to the steward, 1 from it), area u8, length u16, the frame
//! as on the wire, CRC-32 of all of the record before it.

use std::fs::File;
use std::io::{BufWriter, Write};
use std::path::Path;
use thiserror::Error;

/// First bytes of a logbook.
pub const MAGIC: [u8; 8] = *b"hedgelog";
/// Version of the layout.
pub const VERSION: u16 = 1;
/// Bytes of a record before its frame.
const RECORD_HEAD: usize = 8;
const CRC32: crc::Crc<u32> = crc::Crc::<u32>::new(&crc::CRC_32_ISO_HDLC);

/// Which way a frame went.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Direction {
    /// To the steward.
    ToSteward,
    /// From the steward.
    FromSteward,
}

/// A frame in a logbook.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Entry {
    /// Tick in which the host handed it on.
    pub tick: u32,
    /// Which way it went.
    pub direction: Direction,
    /// Index of the steward's area.
    pub area: u8,
    /// The frame as on the wire, delimiter included.
    pub wire: Vec<u8>,
}

/// Why a file is no logbook.
#[derive(Debug, Error)]
pub enum LogbookError {
    /// It can not be read.
    #[error("cannot read the logbook: {0}")]
    Read(#[from] std::io::Error),
    /// It does not begin like one.
    #[error("this is no logbook: it does not begin with `hedgelog`")]
    Magic,
    /// It is of another version.
    #[error("the logbook has version {0}, this program reads version {VERSION}")]
    Version(u16),
}

/// Writes a logbook; the first error is kept and ends the writing.
#[derive(Debug)]
pub struct Logbook {
    out: BufWriter<File>,
    error: Option<std::io::Error>,
}

impl Logbook {
    /// Begin a new file.
    ///
    /// Errors: what the file system says.
    pub fn create(path: &Path) -> std::io::Result<Self> {
        let mut out = BufWriter::new(File::create(path)?);
        out.write_all(&MAGIC)?;
        out.write_all(&VERSION.to_le_bytes())?;
        out.flush()?;
        Ok(Self { out, error: None })
    }

    /// Add a frame; one longer than a record can say is cut there.
    pub fn add(&mut self, tick: u32, direction: Direction, area: u8, wire: &[u8]) {
        if self.error.is_none() {
            let bytes = record(tick, direction, area, wire);
            self.error = self.out.write_all(&bytes).err();
        }
    }

    /// Write what has been added to the file.
    pub fn flush(&mut self) {
        if self.error.is_none() {
            self.error = self.out.flush().err();
        }
    }

    /// Close the file.
    ///
    /// Errors: the first thing that went wrong since it was begun.
    pub fn finish(&mut self) -> std::io::Result<()> {
        self.flush();
        self.error.take().map_or(Ok(()), Err)
    }
}

fn record(tick: u32, direction: Direction, area: u8, wire: &[u8]) -> Vec<u8> {
    let len = u16::try_from(wire.len()).unwrap_or(u16::MAX);
    let mut bytes = Vec::with_capacity(RECORD_HEAD + usize::from(len) + 4);
    bytes.extend_from_slice(&tick.to_le_bytes());
    bytes.push(u8::from(direction == Direction::FromSteward));
    bytes.push(area);
    bytes.extend_from_slice(&len.to_le_bytes());
    bytes.extend(wire.iter().take(usize::from(len)));
    let sum = CRC32.checksum(&bytes);
    bytes.extend_from_slice(&sum.to_le_bytes());
    bytes
}

/// What a file holds, up to the last whole record.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Reading {
    /// The frames.
    pub entries: Vec<Entry>,
    /// Bytes after the last whole record.
    pub left_over: usize,
}

/// Read a logbook up to its last whole record.
///
/// Errors: [`LogbookError`]; a torn end is none.
pub fn read(path: &Path) -> Result<Reading, LogbookError> {
    parse(&std::fs::read(path)?)
}

/// The same from bytes.
///
/// Errors: [`LogbookError`].
pub fn parse(bytes: &[u8]) -> Result<Reading, LogbookError> {
    let (magic, rest) = bytes.split_first_chunk::<8>().ok_or(LogbookError::Magic)?;
    let (version, mut rest) = rest.split_first_chunk::<2>().ok_or(LogbookError::Magic)?;
    if *magic != MAGIC {
        return Err(LogbookError::Magic);
    }
    let version = u16::from_le_bytes(*version);
    if version != VERSION {
        return Err(LogbookError::Version(version));
    }
    let mut entries = Vec::new();
    while let Some((entry, after)) = one(rest) {
        entries.push(entry);
        rest = after;
    }
    Ok(Reading { entries, left_over: rest.len() })
}

/// The first record, if it is whole, and what follows it.
fn one(bytes: &[u8]) -> Option<(Entry, &[u8])> {
    let &[t0, t1, t2, t3, direction, area, l0, l1] = bytes.first_chunk::<RECORD_HEAD>()?;
    let end = RECORD_HEAD + usize::from(u16::from_le_bytes([l0, l1]));
    let (sum, after) = bytes.get(end..)?.split_first_chunk::<4>()?;
    let summed = bytes.get(..end)?;
    if CRC32.checksum(summed) != u32::from_le_bytes(*sum) {
        return None;
    }
    let direction = match direction {
        0 => Direction::ToSteward,
        1 => Direction::FromSteward,
        _ => return None,
    };
    let wire = summed.get(RECORD_HEAD..)?.to_vec();
    let tick = u32::from_le_bytes([t0, t1, t2, t3]);
    Some((Entry { tick, direction, area, wire }, after))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn sample() -> Vec<u8> {
        let mut bytes = MAGIC.to_vec();
        bytes.extend(VERSION.to_le_bytes());
        bytes.extend(record(7, Direction::ToSteward, 2, &[1, 2, 0]));
        bytes.extend(record(7, Direction::FromSteward, 2, &[]));
        bytes.extend(record(8, Direction::ToSteward, 0, &[9; 300]));
        bytes
    }

    #[test]
    fn reads_back_what_was_written() {
        let found = parse(&sample()).unwrap();
        assert_eq!(found.left_over, 0);
        let first =
            Entry { tick: 7, direction: Direction::ToSteward, area: 2, wire: vec![1, 2, 0] };
        assert_eq!(found.entries[0], first);
        assert_eq!(found.entries[1].direction, Direction::FromSteward);
        assert_eq!((found.entries[2].tick, found.entries[2].wire.len()), (8, 300));
    }

    #[test]
    fn stops_at_the_last_whole_record_wherever_the_file_is_cut() {
        let whole = sample();
        let ends = [10, 25, 37, whole.len()];
        for cut in 10..=whole.len() {
            let found = parse(&whole[..cut]).unwrap();
            let expected = ends.iter().filter(|&&end| end <= cut).count() - 1;
            assert_eq!(found.entries.len(), expected, "cut at {cut}");
            assert_eq!(found.left_over, cut - ends[expected], "cut at {cut}");
        }
    }

    #[test]
    fn stops_at_a_record_with_a_flipped_bit() {
        let mut bytes = sample();
        bytes[26] ^= 4;
        assert_eq!(parse(&bytes).unwrap().entries.len(), 1);
    }

    #[test]
    fn refuses_other_files_and_other_versions() {
        assert!(matches!(parse(b"hedge"), Err(LogbookError::Magic)));
        assert!(matches!(parse(b"hedgehog\x01\x00"), Err(LogbookError::Magic)));
        assert!(matches!(parse(b"hedgelog\x02\x00"), Err(LogbookError::Version(2))));
    }

    #[test]
    fn a_file_that_is_never_closed_is_whole_up_to_the_last_flush() {
        let path = std::env::temp_dir().join(format!("hedgerow-logbook-{}", std::process::id()));
        let mut book = Logbook::create(&path).unwrap();
        book.add(1, Direction::ToSteward, 0, &[5, 0]);
        book.flush();
        book.add(2, Direction::ToSteward, 0, &[6, 0]);
        let found = read(&path).unwrap();
        std::fs::remove_file(&path).unwrap();
        assert_eq!((found.entries.len(), found.left_over), (1, 0));
    }
}
