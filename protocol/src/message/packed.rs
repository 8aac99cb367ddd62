//! Packed lists inside payloads: readings, floats and bits over borrowed bytes.
//!
//! Contract: a list borrows the payload, so that no message needs a capacity of
//! its own and nothing is copied. A trailing partial element is refused when
//! the message is decoded, by [`well_formed`](super::Message::decode).

use crate::limits::READING_BYTES;
use serde::{Deserialize, Serialize};

/// Age that says "no value".
pub const AGE_MISSING: u8 = u8::MAX;

/// A measured value and how old it is.
#[derive(Clone, Copy, Debug, PartialEq)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct Reading {
    /// The value, in the unit that the list states.
    pub value: f32,
    /// Age in ticks; [`AGE_MISSING`] = no value.
    pub age_ticks: u8,
}

impl Reading {
    /// A reading taken in this tick.
    pub const fn fresh(value: f32) -> Self {
        Self { value, age_ticks: 0 }
    }

    /// No value.
    pub const fn missing() -> Self {
        Self { value: 0.0, age_ticks: AGE_MISSING }
    }

    /// The value if it is finite, not older than `age_ticks_max` and within `limit` of zero.
    pub fn usable(self, age_ticks_max: u8, limit: f32) -> Option<f32> {
        let good = self.age_ticks <= age_ticks_max
            && self.age_ticks != AGE_MISSING
            && self.value.is_finite()
            && self.value >= -limit
            && self.value <= limit;
        good.then_some(self.value)
    }
}

/// A list of [`Reading`]s: 4 bytes little-endian `f32`, 1 byte age, each.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct Readings<'a>(#[serde(borrow)] pub &'a [u8]);

impl<'a> Readings<'a> {
    /// Number of readings.
    pub fn len(self) -> usize {
        self.0.len() / READING_BYTES
    }

    /// Whether there is none.
    pub fn is_empty(self) -> bool {
        self.0.is_empty()
    }

    /// Whether the bytes are a whole number of readings.
    pub fn is_whole(self) -> bool {
        self.0.len().is_multiple_of(READING_BYTES)
    }

    /// The readings in order.
    pub fn iter(self) -> impl Iterator<Item = Reading> + Clone + 'a {
        self.0.as_chunks::<READING_BYTES>().0.iter().map(|&[a, b, c, d, age_ticks]| Reading {
            value: f32::from_le_bytes([a, b, c, d]),
            age_ticks,
        })
    }
}

/// Write readings into `out`, to be wrapped in a [`Readings`].
///
/// Errors: `None` when `out` is too small.
pub fn pack_readings(
    readings: impl Iterator<Item = Reading>,
    out: &mut [u8],
) -> Option<Readings<'_>> {
    let mut used = 0;
    for reading in readings {
        let room = out.get_mut(used..)?.first_chunk_mut::<READING_BYTES>()?;
        let [a, b, c, d] = plus_zero(reading.value).to_le_bytes();
        *room = [a, b, c, d, reading.age_ticks];
        used += READING_BYTES;
    }
    out.get(..used).map(Readings)
}

/// A list of `f32`, little-endian.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct Floats<'a>(#[serde(borrow)] pub &'a [u8]);

impl<'a> Floats<'a> {
    /// Number of values.
    pub fn len(self) -> usize {
        self.0.len() / 4
    }

    /// Whether there is none.
    pub fn is_empty(self) -> bool {
        self.0.is_empty()
    }

    /// Whether the bytes are a whole number of values.
    pub fn is_whole(self) -> bool {
        self.0.len().is_multiple_of(4)
    }

    /// The values in order.
    pub fn iter(self) -> impl Iterator<Item = f32> + Clone + 'a {
        self.0.as_chunks::<4>().0.iter().map(|&bytes| f32::from_le_bytes(bytes))
    }
}

/// Write values into `out`, to be wrapped in a [`Floats`]; -0 is written as +0.
///
/// Errors: `None` when `out` is too small.
pub fn pack_floats(values: impl Iterator<Item = f32>, out: &mut [u8]) -> Option<Floats<'_>> {
    let mut used = 0;
    for value in values {
        *out.get_mut(used..)?.first_chunk_mut::<4>()? = plus_zero(value).to_le_bytes();
        used += 4;
    }
    out.get(..used).map(Floats)
}

/// The value with -0 replaced by +0: cores differ in the sign of a zero result.
fn plus_zero(value: f32) -> f32 {
    if value == 0.0 { 0.0 } else { value }
}

/// A list of flags, least significant bit of the first byte first.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct Bits<'a>(#[serde(borrow)] pub &'a [u8]);

impl Bits<'_> {
    /// Flag `index`, or none beyond the end.
    pub fn get(self, index: usize) -> Option<bool> {
        self.0.get(index / 8).map(|byte| byte >> (index % 8) & 1 == 1)
    }

    /// Whether there are bytes for `count` flags, and no more.
    pub fn holds(self, count: usize) -> bool {
        self.0.len() == count.div_ceil(8)
    }
}

/// Write flags into `out`, to be wrapped in a [`Bits`].
///
/// Errors: `None` when `out` is too small.
pub fn pack_bits(flags: impl Iterator<Item = bool>, out: &mut [u8]) -> Option<Bits<'_>> {
    let mut used = 0;
    for (index, flag) in flags.enumerate() {
        let byte = out.get_mut(index / 8)?;
        if index % 8 == 0 {
            *byte = 0;
            used += 1;
        }
        *byte |= u8::from(flag) << (index % 8);
    }
    out.get(..used).map(Bits)
}
