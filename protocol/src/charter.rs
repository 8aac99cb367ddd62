//! The charter: the compiled, fixed-size data of one area that a steward boots with.
//!
//! Contract: a charter is a run of postcard records in a fixed order (header,
//! lines, ties, units, feeders, frequency meters, sensitivities) followed by a
//! CRC-32 of all bytes before it. [`CharterWriter`] makes it on the host,
//! [`CharterReader`] takes it apart in the steward, record by record, so that
//! neither needs a second copy. The reader checks checksum, version, counts and
//! finiteness; what is in range for this build is the steward's to say.
//!
//! Units: power in pu on `base_mva`, angles in rad, ramps in pu per second.

use crate::limits;
use crate::message::Refusal;
use serde::{Deserialize, Serialize};

/// Version of the charter's layout.
pub const CHARTER_FORMAT: u8 = 1;

/// Counts, identity and settings.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Header<'a> {
    /// Layout version, [`CHARTER_FORMAT`].
    pub format: u8,
    /// Address of the area's steward, 1 to 254.
    pub address: u8,
    /// Name of the area.
    pub name: &'a str,
    /// Power base in MVA.
    pub base_mva: f32,
    /// Nominal frequency in Hz.
    pub nominal_hz: f32,
    /// Number of buses.
    pub buses: u8,
    /// Number of internal lines.
    pub lines: u8,
    /// Number of ties.
    pub ties: u8,
    /// Number of units.
    pub units: u8,
    /// Number of feeders.
    pub feeders: u8,
    /// Number of frequency meters.
    pub meters: u8,
    /// Settings of the law.
    pub settings: Settings,
}

/// Settings of the law, already turned into per-tick figures by the host.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Settings {
    /// Tick in s.
    pub tick_s: f32,
    /// Iterations of the law per tick.
    pub iterations: u16,
    /// Iterations of the shadow per tick.
    pub shadow_iterations: u16,
    /// Low-pass gain of the estimates, 1 - exp(-tick / filter time).
    pub filter_gain: f32,
    /// What remains of an innovation envelope after a tick, exp(-tick / envelope time).
    pub envelope_keep: f32,
    /// Ticks for which estimates stay frozen after a known event.
    pub freeze_ticks: u16,
    /// Assumed damping of the area's load, pu per Hz; any value >= 0 gives the same rest point.
    pub damping_pu_per_hz: f32,
    /// Lowest rung allowed, 0 to 3.
    pub lowest_rung: u8,
    /// Tie band at `lean` and below, pu.
    pub tie_band: f32,
    /// Mid-tie angle band, pu.
    pub angle_band: f32,
    /// Price of a tie deviation per pu at each end.
    pub tie_price: f32,
    /// Curvature of the price of a tie deviation.
    pub tie_curvature: f32,
    /// Penalty of the neighbour agreement.
    pub agreement_penalty: f32,
    /// Relaxation of the neighbour agreement, 0 to 1.
    pub agreement_relax: f32,
    /// Ticks a round needs before a bid is ready.
    pub settle_ticks: u16,
    /// Help radius in areas.
    pub help_hops: u8,
    /// Ticks without a word after which a neighbour counts as gone, and for
    /// which a neighbour that has not answered yet counts as open.
    pub neighbour_ticks: u16,
    /// Violation that must be proven, pu.
    pub proof_threshold: f32,
    /// Ticks in a row for which it must be proven.
    pub proof_ticks: u16,
    /// Weight of proofs under what neighbours deliver before a step down, ticks.
    pub persist_ticks: u16,
    /// Ticks in a row for which the shadow must fit before a climb.
    pub climb_ticks: u16,
    /// Share by which limits and ranges are tightened for a climb.
    pub climb_margin: f32,
    /// Row violation that the shadow may leave, pu.
    pub climb_tolerance: f32,
    /// Clamp of the scaled duals.
    pub dual_clamp: f32,
    /// Total shed load may return at most this fast, pu per s.
    pub return_ramp: f32,
    /// Above this frequency deviation load returns freely, Hz.
    pub return_free_hz: f32,
}

/// An internal line.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Line {
    /// Local index of the sending bus.
    pub from: u8,
    /// Local index of the receiving bus.
    pub to: u8,
    /// Susceptance 1/x in pu.
    pub susceptance: f32,
    /// Rating in pu.
    pub rating: f32,
    /// Whether its flow is measured.
    pub metered: bool,
    /// Whether it is closed at boot; the sensitivities hold for exactly that state.
    pub closed: bool,
}

/// A tie line, seen from this area.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Tie {
    /// Number of the tie in the grid.
    pub number: u16,
    /// Local index of its bus.
    pub bus: u8,
    /// Address of the neighbour at the other end.
    pub neighbour: u8,
    /// Reactance in pu.
    pub reactance: f32,
    /// Rating in pu.
    pub rating: f32,
    /// Agreed export in pu.
    pub schedule: f32,
    /// Mid-tie angle in rad, relative to local bus 0, at schedule.
    pub angle: f32,
    /// Whether this area is at the line's `from` end.
    pub from_end: bool,
    /// Whether it lies on a loop of areas, so that its angle must be held too.
    pub meshed: bool,
    /// Whether it is closed at boot.
    pub closed: bool,
}

/// A unit or storage.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Unit {
    /// Local index of its bus.
    pub bus: u8,
    /// Whether the steward may move it; otherwise it is left at its output.
    pub available: bool,
    /// Whether it is a storage.
    pub storage: bool,
    /// Base point in pu.
    pub base: f32,
    /// Normal range less reserve, lower end, pu.
    pub low: f32,
    /// Normal range less reserve, upper end, pu.
    pub high: f32,
    /// Emergency range, lower end, pu.
    pub emergency_low: f32,
    /// Emergency range, upper end, pu.
    pub emergency_high: f32,
    /// Curvature of its cost, per pu squared.
    pub cost: f32,
    /// Ramp limit in pu per s.
    pub ramp: f32,
    /// Droop response in pu per Hz; 0 = none.
    pub droop_pu_per_hz: f32,
}

/// A sheddable load.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Feeder {
    /// Local index of its bus.
    pub bus: u8,
    /// Load it takes off at most, pu.
    pub load: f32,
    /// Price per pu.
    pub price: f32,
    /// Curvature of the price, per pu squared.
    pub curvature: f32,
    /// Whether it is a breaker that takes all or nothing.
    pub switched: bool,
    /// Whether it may return without the operator.
    pub automatic: bool,
}

/// A frequency meter.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Meter {
    /// Local index of its bus.
    pub bus: u8,
    /// Weight in the area's frequency, any positive scale (inertia behind it).
    pub weight: f32,
}

/// Number of entries of the packed sensitivities of `buses` buses: the lower
/// triangle, row by row, of the inverse Laplacian grounded at local bus 0,
/// without the zero row and column of bus 0.
pub const fn sensitivity_len(buses: usize) -> usize {
    let free = buses.saturating_sub(1);
    free * (free + 1) / 2
}

const CRC32: crc::Crc<u32> = crc::Crc::<u32>::new(&crc::CRC_32_ISO_HDLC);

/// Writes a charter into a buffer, record by record, in the fixed order.
pub struct CharterWriter<'b> {
    buffer: &'b mut [u8],
    used: usize,
}

impl<'b> CharterWriter<'b> {
    /// Start in an empty buffer.
    pub fn new(buffer: &'b mut [u8]) -> Self {
        Self { buffer, used: 0 }
    }

    /// Append one record.
    ///
    /// Errors: [`Refusal::Capacity`] when the buffer is full.
    pub fn put<T: Serialize>(&mut self, record: &T) -> Result<(), Refusal> {
        let room = self.buffer.get_mut(self.used..).ok_or(Refusal::Capacity)?;
        let written = postcard::to_slice(record, room).map_err(|_| Refusal::Capacity)?;
        self.used += written.len();
        Ok(())
    }

    /// Append the checksum and return the charter's bytes.
    ///
    /// Errors: [`Refusal::Capacity`] when the buffer is full.
    pub fn finish(self) -> Result<&'b [u8], Refusal> {
        let Self { buffer, used } = self;
        let body = buffer.get(..used).ok_or(Refusal::Capacity)?;
        let sum = CRC32.checksum(body).to_le_bytes();
        let end = used + sum.len();
        buffer.get_mut(used..end).ok_or(Refusal::Capacity)?.copy_from_slice(&sum);
        buffer.get(..end).ok_or(Refusal::Capacity)
    }
}

/// Takes a charter apart, record by record, in the fixed order.
#[derive(Clone, Copy, Debug)]
pub struct CharterReader<'a> {
    rest: &'a [u8],
}

impl<'a> CharterReader<'a> {
    /// Check checksum and header, and stand before the first line.
    ///
    /// Errors: [`Refusal::Checksum`], [`Refusal::Malformed`], [`Refusal::Version`]
    /// or [`Refusal::Capacity`] (more than any build can hold).
    pub fn open(bytes: &'a [u8]) -> Result<(Header<'a>, Self), Refusal> {
        let (body, sum) = bytes.split_last_chunk::<4>().ok_or(Refusal::NoCharter)?;
        if CRC32.checksum(body) != u32::from_le_bytes(*sum) {
            return Err(Refusal::Checksum);
        }
        if body.first() != Some(&CHARTER_FORMAT) {
            return Err(Refusal::Version);
        }
        let mut reader = Self { rest: body };
        let header: Header<'a> = reader.take()?;
        let fits = usize::from(header.buses) <= limits::BUSES_MAX
            && usize::from(header.lines) <= limits::LINES_MAX
            && usize::from(header.ties) <= limits::TIES_MAX
            && usize::from(header.units) <= limits::UNITS_MAX
            && usize::from(header.feeders) <= limits::FEEDERS_MAX
            && header.meters <= header.buses;
        if fits { Ok((header, reader)) } else { Err(Refusal::Capacity) }
    }

    /// Take the next record.
    ///
    /// Errors: [`Refusal::Malformed`] when the bytes are not one.
    pub fn take<T: Deserialize<'a>>(&mut self) -> Result<T, Refusal> {
        let (record, rest) =
            postcard::take_from_bytes(self.rest).map_err(|_| Refusal::Malformed)?;
        self.rest = rest;
        Ok(record)
    }

    /// Take a record that must be a finite number.
    ///
    /// Errors: [`Refusal::Malformed`], [`Refusal::Range`].
    pub fn take_finite(&mut self) -> Result<f32, Refusal> {
        let value: f32 = self.take()?;
        if value.is_finite() { Ok(value) } else { Err(Refusal::Range) }
    }

    /// Whether everything has been taken.
    pub fn is_done(&self) -> bool {
        self.rest.is_empty()
    }
}
