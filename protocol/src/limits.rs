//! Capacities and sizes that both sides of a wire must agree on, with their
//! derivation. Capacities of a particular board are its own constants; these
//! are the largest that any build may have.

/// Version of the frame and of every message in it.
pub const PROTOCOL_VERSION: u8 = 1;

/// Most buses of one area: `u8` indices and a 64-wide estimate table.
pub const BUSES_MAX: usize = 64;
/// Most internal lines of one area: 1.5 lines a bus.
pub const LINES_MAX: usize = 96;
/// Most ties of one area.
pub const TIES_MAX: usize = 12;
/// Most units and storages of one area.
pub const UNITS_MAX: usize = 32;
/// Most feeders of one area.
pub const FEEDERS_MAX: usize = 48;

/// Bytes of one reading: an `f32` and its age.
pub const READING_BYTES: usize = 5;

/// Largest payload: a full [`crate::message::Measurements`] of the largest
/// area: tick and length prefixes (5 + 9 x 2), a reading per bus, line, tie and
/// unit, two per feeder, and three bit fields.
pub const PAYLOAD_MAX: usize = 23
    + READING_BYTES * (BUSES_MAX + LINES_MAX + TIES_MAX + UNITS_MAX + 2 * FEEDERS_MAX)
    + LINES_MAX.div_ceil(8)
    + TIES_MAX.div_ceil(8)
    + UNITS_MAX.div_ceil(8);

/// Largest charter of any build.
pub const CHARTER_MAX: usize =
    charter_bytes(BUSES_MAX, LINES_MAX, TIES_MAX, UNITS_MAX, FEEDERS_MAX);

/// Bytes that hold the charter of an area of this size.
///
/// A bound: header and settings 256 (a name of 96 bytes included), lines 12 each,
/// ties 26, units and storages 35, feeders 15, meters 5 (one a bus), 4 per
/// packed sensitivity, and the checksum.
pub const fn charter_bytes(
    buses: usize,
    lines: usize,
    ties: usize,
    units: usize,
    feeders: usize,
) -> usize {
    let tables = 12 * lines + 26 * ties + 35 * units + 15 * feeders + 5 * buses;
    256 + tables + 4 * crate::charter::sensitivity_len(buses) + 4
}

/// Header bytes: version, id, from, to, boot id, echoed boot id, counter.
pub const HEADER_BYTES: usize = 16;
/// Bytes of the truncated HMAC-SHA-256 tag.
pub const TAG_BYTES: usize = 16;
/// Bytes of the CRC-32 checksum.
pub const CRC_BYTES: usize = 4;
/// Frame bytes besides the payload, before COBS.
pub const OVERHEAD_BYTES: usize = HEADER_BYTES + TAG_BYTES + CRC_BYTES;
/// Largest frame before COBS.
pub const FRAME_MAX: usize = PAYLOAD_MAX + OVERHEAD_BYTES;
/// Largest frame on the wire: COBS adds a byte per started 254, and the delimiter.
pub const WIRE_MAX: usize = FRAME_MAX + FRAME_MAX.div_ceil(254) + 1;

/// Coded bytes that hold any frame to or from an area of this size, delimiter included.
///
/// No less than a frame with a part of a charter or of a proof.
pub const fn wire_bytes(
    buses: usize,
    lines: usize,
    ties: usize,
    units: usize,
    feeders: usize,
) -> usize {
    let readings = READING_BYTES * (buses + lines + ties + units + 2 * feeders);
    let bits = lines.div_ceil(8) + ties.div_ceil(8) + units.div_ceil(8);
    let payload = 23 + readings + bits;
    let frame = OVERHEAD_BYTES + if payload > PART_MAX { payload } else { PART_MAX };
    frame + frame.div_ceil(254) + 1
}

/// Largest payload of a charter or proof part, chosen so that the frame fits a 512-byte buffer.
pub const PART_MAX: usize = 400;

const _: () = assert!(BUSES_MAX <= 255 && LINES_MAX <= 255 && TIES_MAX <= 255, "indices are u8");
