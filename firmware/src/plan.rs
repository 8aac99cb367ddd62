//! The plan: a charter taken apart into fixed tables.
//!
//! Contract: everything in a [`Plan`] is finite, in range and refers to
//! something that exists; nothing downstream checks again. A plan is built once
//! and not changed; schedules and base points that move live in the steward.
//!
//! Order of the unknowns, everywhere: units, feeders, tie deviations, mid-tie
//! angle deviations (one of each per tie).

use crate::law::kernel::{abs, put};
use crate::law::scale::zeros;
use heapless::Vec;
use hedgerow_protocol::charter::{
    CharterReader, Feeder, Header, Line, Meter, Settings, Tie, Unit, sensitivity_len,
};
use hedgerow_protocol::limits::{TIES_MAX, wire_bytes};
use hedgerow_protocol::message::Refusal;
use nalgebra::SMatrix;
use serde::Deserialize;

/// Largest power or susceptance a charter may hold, pu: far above any real area.
const VALUE_MAX: f32 = 1e6;

/// A charter in tables. B buses, X unknowns, R rows at most.
#[derive(Clone, Debug)]
pub struct Plan<const B: usize, const X: usize, const R: usize> {
    /// Address of this steward.
    pub address: u8,
    /// Power base in MVA.
    pub base_mva: f32,
    /// Settings of the law.
    pub settings: Settings,
    /// Number of buses.
    pub buses: usize,
    /// Internal lines.
    pub lines: Vec<Line, R>,
    /// Ties.
    pub ties: Vec<Tie, TIES_MAX>,
    /// Units and storages.
    pub units: Vec<Unit, X>,
    /// Feeders.
    pub feeders: Vec<Feeder, X>,
    /// Frequency meters.
    pub meters: Vec<Meter, B>,
    /// Inverse Laplacian grounded at bus 0, of the lines closed at boot.
    pub sensitivity: SMatrix<f32, B, B>,
}

impl<const B: usize, const X: usize, const R: usize> Plan<B, X, R> {
    /// An empty plan.
    pub const fn new() -> Self {
        Self {
            address: 0,
            base_mva: 0.0,
            settings: EMPTY_SETTINGS,
            buses: 0,
            lines: Vec::new(),
            ties: Vec::new(),
            units: Vec::new(),
            feeders: Vec::new(),
            meters: Vec::new(),
            sensitivity: zeros(),
        }
    }

    /// Number of actuators: units, then feeders.
    pub fn actuators(&self) -> usize {
        self.units.len() + self.feeders.len()
    }

    /// Number of unknowns.
    pub fn cols(&self) -> usize {
        self.actuators() + 2 * self.ties.len()
    }

    /// Column of a tie's deviation.
    pub fn tie_col(&self, tie: usize) -> usize {
        self.actuators() + tie
    }

    /// Column of a tie's mid-angle deviation.
    pub fn angle_col(&self, tie: usize) -> usize {
        self.actuators() + self.ties.len() + tie
    }

    /// Number of equality rows: the balance, then an angle row per meshed tie but one.
    pub fn eqs(&self) -> usize {
        let meshed = self.ties.iter().filter(|tie| tie.meshed).count();
        1 + meshed.saturating_sub(1)
    }

    /// Number of rows: equalities, then lines.
    pub fn rows(&self) -> usize {
        self.eqs() + self.lines.len()
    }

    /// Bytes on the wire of the largest frame to or from this area.
    pub fn wire_bytes(&self) -> usize {
        wire_bytes(
            self.meters.len(),
            self.lines.len(),
            self.ties.len(),
            self.units.len(),
            self.feeders.len(),
        )
    }

    /// Bus of an actuator, if it exists.
    pub fn actuator_bus(&self, actuator: usize) -> Option<usize> {
        let unit = self.units.get(actuator).map(|unit| unit.bus);
        let feeder = || {
            let index = actuator.checked_sub(self.units.len())?;
            self.feeders.get(index).map(|feeder| feeder.bus)
        };
        unit.or_else(feeder).map(usize::from)
    }

    /// Take a charter apart.
    ///
    /// Errors: what [`CharterReader::open`] says; [`Refusal::Capacity`] when the
    /// area is larger than this build; [`Refusal::Range`] when a value is not
    /// finite or refers to nothing. The plan is unusable after an error.
    pub fn load(&mut self, charter: &[u8]) -> Result<(), Refusal> {
        let (header, mut reader) = CharterReader::open(charter)?;
        self.take_header(&header)?;
        take_into(&mut reader, header.lines, &mut self.lines)?;
        take_into(&mut reader, header.ties, &mut self.ties)?;
        take_into(&mut reader, header.units, &mut self.units)?;
        take_into(&mut reader, header.feeders, &mut self.feeders)?;
        take_into(&mut reader, header.meters, &mut self.meters)?;
        if self.cols() > X || self.rows() > R {
            return Err(Refusal::Capacity);
        }
        self.take_sensitivity(&mut reader)?;
        if !reader.is_done() {
            return Err(Refusal::Malformed);
        }
        if self.is_in_range() { Ok(()) } else { Err(Refusal::Range) }
    }

    fn take_header(&mut self, header: &Header<'_>) -> Result<(), Refusal> {
        self.address = header.address;
        self.base_mva = header.base_mva;
        self.settings = header.settings;
        self.buses = usize::from(header.buses);
        if self.buses > B {
            return Err(Refusal::Capacity);
        }
        let base_fits = header.base_mva > 0.0 && header.base_mva < VALUE_MAX;
        if self.buses == 0 || header.address == 0 || !base_fits {
            return Err(Refusal::Range);
        }
        if settings_in_range(&header.settings) { Ok(()) } else { Err(Refusal::Range) }
    }

    #[inline(never)]
    fn take_sensitivity(&mut self, reader: &mut CharterReader<'_>) -> Result<(), Refusal> {
        self.sensitivity.fill(0.0);
        let mut left = sensitivity_len(self.buses);
        for row in 1..self.buses {
            for col in 1..=row {
                let value = reader.take_finite()?;
                left = left.saturating_sub(1);
                for (i, j) in [(row, col), (col, row)] {
                    if let Some(column) = self.sensitivity.data.0.get_mut(j) {
                        put(column, i, value);
                    }
                }
            }
        }
        if left == 0 { Ok(()) } else { Err(Refusal::Malformed) }
    }

    fn is_in_range(&self) -> bool {
        let bus = |index: u8| usize::from(index) < self.buses;
        let fine = |value: f32| value > -VALUE_MAX && value < VALUE_MAX;
        let positive = |value: f32| value > 0.0 && value < VALUE_MAX;
        let lines = self.lines.iter().all(|line| {
            bus(line.from)
                && bus(line.to)
                && line.from != line.to
                && fine(line.susceptance)
                && abs(line.susceptance) > 1.0 / VALUE_MAX
                && positive(line.rating)
        });
        let ties = self.ties.iter().all(|tie| {
            bus(tie.bus)
                && positive(tie.reactance)
                && positive(tie.rating)
                && fine(tie.schedule)
                && fine(tie.angle)
        });
        let units = self.units.iter().all(|unit| {
            bus(unit.bus)
                && [
                    unit.base,
                    unit.emergency_low,
                    unit.emergency_high,
                    unit.ramp,
                    unit.droop_pu_per_hz,
                ]
                .into_iter()
                .all(fine)
                && positive(unit.cost)
                && unit.emergency_low <= unit.low
                && unit.low <= unit.high
                && unit.high <= unit.emergency_high
        });
        let feeders = self.feeders.iter().all(|feeder| {
            bus(feeder.bus)
                && feeder.load >= 0.0
                && fine(feeder.load)
                && positive(feeder.price)
                && positive(feeder.curvature)
        });
        let meters = self.meters.iter().all(|meter| bus(meter.bus) && positive(meter.weight));
        lines && ties && units && feeders && meters && !self.meters.is_empty()
    }
}

impl<const B: usize, const X: usize, const R: usize> Default for Plan<B, X, R> {
    fn default() -> Self {
        Self::new()
    }
}

fn take_into<'a, T: Deserialize<'a>, const N: usize>(
    reader: &mut CharterReader<'a>,
    count: u8,
    table: &mut Vec<T, N>,
) -> Result<(), Refusal> {
    table.clear();
    for _ in 0..count {
        table.push(reader.take()?).map_err(|_| Refusal::Capacity)?;
    }
    Ok(())
}

fn settings_in_range(s: &Settings) -> bool {
    let share = |value: f32| (0.0..=1.0).contains(&value);
    let positive = |value: f32| value > 0.0 && value < VALUE_MAX;
    share(s.filter_gain)
        && share(s.envelope_keep)
        && share(s.agreement_relax)
        && share(s.climb_margin)
        && [s.tick_s, s.tie_price, s.tie_curvature, s.agreement_penalty, s.proof_threshold]
            .into_iter()
            .all(positive)
        && [s.dual_clamp, s.tie_band, s.angle_band, s.climb_tolerance, s.return_free_hz]
            .into_iter()
            .all(positive)
        && (0.0..VALUE_MAX).contains(&s.damping_pu_per_hz)
        && (0.0..VALUE_MAX).contains(&s.return_ramp)
        && s.iterations > 0
        && s.iterations <= 1000
        && s.shadow_iterations <= 1000
        && s.lowest_rung <= 3
        && s.proof_ticks > 0
        && s.climb_ticks > 0
        && s.settle_ticks > 0
}

/// Before a charter: all zero, so that a static plan takes no flash.
const EMPTY_SETTINGS: Settings = Settings {
    tick_s: 0.0,
    iterations: 0,
    shadow_iterations: 0,
    filter_gain: 0.0,
    envelope_keep: 0.0,
    freeze_ticks: 0,
    damping_pu_per_hz: 0.0,
    lowest_rung: 0,
    tie_band: 0.0,
    angle_band: 0.0,
    tie_price: 0.0,
    tie_curvature: 0.0,
    agreement_penalty: 0.0,
    agreement_relax: 0.0,
    settle_ticks: 0,
    help_hops: 0,
    neighbour_ticks: 0,
    proof_threshold: 0.0,
    proof_ticks: 0,
    persist_ticks: 0,
    climb_ticks: 0,
    climb_margin: 0.0,
    climb_tolerance: 0.0,
    dual_clamp: 0.0,
    return_ramp: 0.0,
    return_free_hz: 0.0,
};
