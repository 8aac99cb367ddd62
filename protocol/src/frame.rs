//! One frame: header, payload, tag, checksum, COBS, delimiter.
//!
//! Contract: [`seal`] writes a message into the caller's buffers; [`open`]
//! checks length, checksum, version, tag and payload, in that order, and hands
//! out a message that borrows the frame. Nothing allocates. Whether a frame is
//! meant for the receiver, and whether it is fresh, is the receiver's to check:
//! the fields for it are in [`Header`], and the tag covers them.
//!
//! Data flow: message -> payload in `raw` -> tag -> CRC -> COBS in `wire`, and
//! back by way of [`crate::decoder::FrameDecoder`].

use crate::auth::Key;
use crate::cobs;
use crate::limits::{
    CRC_BYTES, FRAME_MAX, HEADER_BYTES, OVERHEAD_BYTES, PAYLOAD_MAX, PROTOCOL_VERSION, TAG_BYTES,
};
use crate::message::{Message, PayloadError};
use core::fmt;

/// Address of the plant, and of the host that plays it. Stewards are 1 to 254.
pub const PLANT: u8 = 0;

const CRC32: crc::Crc<u32> = crc::Crc::<u32>::new(&crc::CRC_32_ISO_HDLC);

/// What stands before the payload, besides the version.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct Header {
    /// Id of the message; [`seal`] ignores it and takes the message's own.
    pub id: u8,
    /// Address of the sender.
    pub from: u8,
    /// Address of the receiver.
    pub to: u8,
    /// Number of the sender's boot, never 0.
    pub boot_id: u32,
    /// The receiver's boot id as the sender last heard it; 0 = not known yet.
    pub peer_boot_id: u32,
    /// Counts the frames from this sender to this receiver since boot.
    pub counter: u32,
}

/// Why a message can not be sealed.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum SealError {
    /// The frame does not fit the buffer for raw bytes.
    Raw,
    /// The payload is longer than any receiver accepts.
    Payload,
    /// The coded frame does not fit the buffer for wire bytes.
    Wire,
}

/// Why bytes are not a frame.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum FrameError {
    /// Shorter than an empty frame or longer than the largest.
    Length,
    /// The CRC-32 is wrong.
    Checksum,
    /// It is of another version of the protocol, this one.
    Version(u8),
    /// The tag is not that of this key.
    Tag,
    /// The payload is not a message.
    Payload(PayloadError),
}

impl fmt::Display for SealError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            SealError::Raw => "the frame does not fit the raw buffer",
            SealError::Payload => "the payload is longer than a frame may carry",
            SealError::Wire => "the coded frame does not fit the wire buffer",
        })
    }
}

impl core::error::Error for SealError {}

impl fmt::Display for FrameError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            FrameError::Length => f.write_str("frame too short or too long"),
            FrameError::Checksum => f.write_str("wrong checksum"),
            FrameError::Version(theirs) => {
                write!(f, "frame of protocol version {theirs}, this is version {PROTOCOL_VERSION}")
            }
            FrameError::Tag => f.write_str("wrong tag: another key, or a forged frame"),
            FrameError::Payload(PayloadError::UnknownId(id)) => {
                write!(f, "no message has the id 0x{id:02X}")
            }
            FrameError::Payload(_) => f.write_str("the payload is not the message its id says"),
        }
    }
}

impl core::error::Error for FrameError {}

/// Seal `message` under `header`: the bytes for the wire, delimiter included.
///
/// `raw` needs [`FRAME_MAX`] bytes and `wire` [`crate::limits::WIRE_MAX`] to
/// hold any message; less will do for smaller ones.
///
/// Errors: [`SealError`] when a buffer is too small or the payload too long.
/// Cost: four passes over the frame (payload, tag, checksum, COBS).
///
/// ```
/// use hedgerow_protocol::{auth::{Key, REHEARSAL_KEY}, cobs, frame, message};
/// let key = Key::new(&REHEARSAL_KEY);
/// let header = frame::Header {
///     id: 0, from: frame::PLANT, to: 1, boot_id: 7, peer_boot_id: 0, counter: 1,
/// };
/// let said = message::Message::Stop(message::Stop { tick: 5 });
/// let (mut raw, mut wire) = ([0; 64], [0; 64]);
/// let sent = frame::seal(&header, &said, &key, &mut raw, &mut wire)?.to_vec();
///
/// let (&delimiter, coded) = sent.split_last().unwrap();
/// assert_eq!(delimiter, cobs::DELIMITER);
/// let mut coded = coded.to_vec();
/// let len = cobs::decode_in_place(&mut coded).unwrap();
/// let (heard_header, heard) = frame::open(&coded[..len], &key).unwrap();
/// assert_eq!((heard_header.to, heard), (1, said));
/// # Ok::<(), frame::SealError>(())
/// ```
pub fn seal<'w>(
    header: &Header,
    message: &Message<'_>,
    key: &Key,
    raw: &mut [u8],
    wire: &'w mut [u8],
) -> Result<&'w [u8], SealError> {
    let payload_end = write_body(header, message, raw)?;
    let tag_end = payload_end + TAG_BYTES;
    let tag = key.tag(raw.get(..payload_end).ok_or(SealError::Raw)?);
    write_at(raw, payload_end, &tag)?;
    let sum = CRC32.checksum(raw.get(..tag_end).ok_or(SealError::Raw)?);
    write_at(raw, tag_end, &sum.to_le_bytes())?;

    let whole = raw.get(..tag_end + CRC_BYTES).ok_or(SealError::Raw)?;
    let coded = cobs::encode(whole, wire).ok_or(SealError::Wire)?;
    *wire.get_mut(coded).ok_or(SealError::Wire)? = cobs::DELIMITER;
    wire.get(..=coded).ok_or(SealError::Wire)
}

/// Write header and payload to the start of `raw` and return where they end.
fn write_body(header: &Header, message: &Message<'_>, raw: &mut [u8]) -> Result<usize, SealError> {
    let (start, room) = raw.split_first_chunk_mut::<HEADER_BYTES>().ok_or(SealError::Raw)?;
    *start = header_bytes(&Header { id: message.id(), ..*header });
    let payload_len = message.encode(room).map_err(|_| SealError::Raw)?.len();
    if payload_len > PAYLOAD_MAX {
        return Err(SealError::Payload);
    }
    Ok(HEADER_BYTES + payload_len)
}

/// Copy `bytes` to `raw` at `start`.
fn write_at<const N: usize>(
    raw: &mut [u8],
    start: usize,
    bytes: &[u8; N],
) -> Result<(), SealError> {
    let room =
        raw.get_mut(start..).and_then(|rest| rest.first_chunk_mut::<N>()).ok_or(SealError::Raw)?;
    *room = *bytes;
    Ok(())
}

/// Check a raw frame and take it apart.
///
/// Checked in this order: length, checksum, version, tag, id and payload. A
/// message that comes out is authentic and well-formed; its numbers are not
/// checked, nor whether it is fresh or meant for the receiver.
///
/// Errors: the first check that fails.
/// Cost: two passes over the frame (checksum, tag).
pub fn open<'r>(raw: &'r [u8], key: &Key) -> Result<(Header, Message<'r>), FrameError> {
    if raw.len() < OVERHEAD_BYTES || raw.len() > FRAME_MAX {
        return Err(FrameError::Length);
    }
    let (tagged, sum) = raw.split_last_chunk::<CRC_BYTES>().ok_or(FrameError::Length)?;
    if CRC32.checksum(tagged) != u32::from_le_bytes(*sum) {
        return Err(FrameError::Checksum);
    }
    let (body, tag) = tagged.split_last_chunk::<TAG_BYTES>().ok_or(FrameError::Length)?;
    let (start, payload) = body.split_first_chunk::<HEADER_BYTES>().ok_or(FrameError::Length)?;
    let (version, header) = header_of(start);
    if version != PROTOCOL_VERSION {
        return Err(FrameError::Version(version));
    }
    if !key.verify(body, tag) {
        return Err(FrameError::Tag);
    }
    let message = Message::decode(header.id, payload).map_err(FrameError::Payload)?;
    Ok((header, message))
}

/// The header of a raw frame, with nothing checked but that it is long enough.
///
/// For routing and counting only: a receiver acts on [`open`] alone.
pub fn peek(raw: &[u8]) -> Option<Header> {
    raw.first_chunk::<HEADER_BYTES>().map(|start| header_of(start).1)
}

/// The header's bytes, version first.
fn header_bytes(header: &Header) -> [u8; HEADER_BYTES] {
    let [b0, b1, b2, b3] = header.boot_id.to_le_bytes();
    let [p0, p1, p2, p3] = header.peer_boot_id.to_le_bytes();
    let [c0, c1, c2, c3] = header.counter.to_le_bytes();
    [
        PROTOCOL_VERSION,
        header.id,
        header.from,
        header.to,
        b0,
        b1,
        b2,
        b3,
        p0,
        p1,
        p2,
        p3,
        c0,
        c1,
        c2,
        c3,
    ]
}

/// Version and header of the bytes.
fn header_of(bytes: &[u8; HEADER_BYTES]) -> (u8, Header) {
    let &[version, id, from, to, b0, b1, b2, b3, p0, p1, p2, p3, c0, c1, c2, c3] = bytes;
    let header = Header {
        id,
        from,
        to,
        boot_id: u32::from_le_bytes([b0, b1, b2, b3]),
        peer_boot_id: u32::from_le_bytes([p0, p1, p2, p3]),
        counter: u32::from_le_bytes([c0, c1, c2, c3]),
    };
    (version, header)
}
