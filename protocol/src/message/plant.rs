//! Plant to steward: measurements and the operator's orders.

use super::packed::{Bits, Readings};
use serde::{Deserialize, Serialize};

/// Everything the plant measured in one tick, in the charter's order.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Measurements<'a> {
    /// Number of the tick.
    pub tick: u32,
    /// Frequency deviation in Hz, one per frequency meter.
    #[serde(borrow)]
    pub freq_dev_hz: Readings<'a>,
    /// Flow in MW, one per internal line, along the line.
    #[serde(borrow)]
    pub line_flow_mw: Readings<'a>,
    /// Flow in MW, one per tie, out of the area.
    #[serde(borrow)]
    pub tie_flow_mw: Readings<'a>,
    /// Output in MW, one per unit.
    #[serde(borrow)]
    pub output_mw: Readings<'a>,
    /// Load taken off in MW, one per feeder.
    #[serde(borrow)]
    pub shed_mw: Readings<'a>,
    /// Load in MW that opening the feeder would take off now, or took off.
    #[serde(borrow)]
    pub feeder_load_mw: Readings<'a>,
    /// Breaker status, one per internal line.
    #[serde(borrow)]
    pub line_closed: Bits<'a>,
    /// Breaker status, one per tie.
    #[serde(borrow)]
    pub tie_closed: Bits<'a>,
    /// Breaker status, one per unit.
    #[serde(borrow)]
    pub unit_in_service: Bits<'a>,
}

impl Measurements<'_> {
    /// Whether every list holds whole elements.
    pub(super) fn is_whole(&self) -> bool {
        self.freq_dev_hz.is_whole()
            && self.line_flow_mw.is_whole()
            && self.tie_flow_mw.is_whole()
            && self.output_mw.is_whole()
            && self.shed_mw.is_whole()
            && self.feeder_load_mw.is_whole()
    }
}

/// A tie's agreed flow goes to a new value on a ramp.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Schedule {
    /// Index of the tie in the charter.
    pub tie: u8,
    /// New agreed flow in MW, out of the area.
    pub export_mw: f32,
    /// Length of the ramp in ticks; 0 = at once.
    pub ramp_ticks: u32,
}

/// A unit's base point goes to a new value on a ramp.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct BasePoint {
    /// Index of the unit in the charter.
    pub unit: u8,
    /// New base point in MW.
    pub base_mw: f32,
    /// Length of the ramp in ticks; 0 = at once.
    pub ramp_ticks: u32,
}

/// The operator lets the area's shed feeders return.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Restore {
    /// Tick at which the order was given.
    pub tick: u32,
}
