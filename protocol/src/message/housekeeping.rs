//! Start-up and identity.

use serde::{Deserialize, Serialize};

/// What a node is.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum Role {
    /// Plant, or the host that plays it.
    Plant,
    /// The controller of an area.
    Steward,
}

/// Who I am; the first thing said after a boot.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct Hello<'a> {
    /// What the sender is.
    pub role: Role,
    /// Protocol version of the sender.
    pub protocol: u8,
    /// Firmware version, three numbers.
    pub version: [u8; 3],
    /// Name of the processor core.
    pub core: &'a str,
    /// Most buses it can hold.
    pub buses_max: u8,
    /// Most unknowns (units + feeders + two per tie).
    pub unknowns_max: u16,
    /// Most rows (lines + ties).
    pub rows_max: u16,
    /// First 16 bytes of the SHA-256 of the charter it holds; zeros = none.
    pub charter: [u8; 16],
    /// Number of the last latched fault; 0 = none.
    pub last_fault: u8,
}

/// A part of a charter.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct CharterPart<'a> {
    /// Offset of the first byte.
    pub offset: u16,
    /// Length of the whole charter in bytes.
    pub total: u16,
    /// The bytes.
    pub bytes: &'a [u8],
}

/// Why a steward does not accept something it was told at start-up.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum Refusal {
    /// No charter, or not all of it.
    NoCharter,
    /// Its checksum is wrong.
    Checksum,
    /// It does not decode.
    Malformed,
    /// Written for another version of the protocol.
    Version,
    /// Too large for this build.
    Capacity,
    /// A value in it is out of range.
    Range,
    /// The hash asked for is not that of the charter held.
    OtherCharter,
}

/// What became of the charter.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct CharterState {
    /// Bytes received in order so far.
    pub received: u16,
    /// First 16 bytes of the SHA-256 of the charter accepted; zeros = none.
    pub hash: [u8; 16],
    /// Why it is refused, if it is.
    pub refused: Option<Refusal>,
}

/// Start to act on the charter with this hash.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct Run {
    /// Hash of the charter meant.
    pub charter: [u8; 16],
}

/// Stop acting; actuators follow their own rule of silence.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct Stop {
    /// Tick at which the order was given.
    pub tick: u32,
}

/// What one tick cost; sent after the status of that tick by builds that measure themselves.
///
/// It repeats the counter of the frame before it, so that a build that measures
/// counts its other frames as one that does not.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct Effort {
    /// Tick of the measurements that were answered.
    pub tick: u32,
    /// Instructions executed since the tick before, reading and writing frames included.
    pub instructions: u32,
    /// Deepest stack seen since boot, in bytes.
    pub stack_bytes: u32,
    /// Whether the scaling was built again in this tick.
    pub rebuilt: bool,
}
