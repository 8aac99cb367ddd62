//! The plant's desk for one area: packs measurements into frames, reads what the
//! steward orders and reports.
//!
//! Contract: nothing from a frame is used before length, checksum, version, tag
//! and address have been checked, and every number is checked for finiteness
//! before it reaches the plant. Lists of the wrong length drop the message.

use crate::case::model::Grid;
use crate::charter::Area;
use crate::charter::proof::{Collector, HeardProof};
use crate::plant::Plant;
use hedgerow_protocol::auth::Key;
use hedgerow_protocol::decoder::FrameDecoder;
use hedgerow_protocol::frame::{self, Header, PLANT};
use hedgerow_protocol::limits::{FRAME_MAX, WIRE_MAX};
use hedgerow_protocol::message::packed::{pack_bits, pack_readings};
use hedgerow_protocol::message::{
    Floats, Measurements, Message, Orders, Reading, Rung, Status, Verdict,
};

/// Boot id of the plant's side in rehearsals.
const PLANT_BOOT: u32 = 1;
/// Room for one packed list: readings of the largest list, 96 lines.
const LIST_BYTES: usize = 5 * 96;

/// What a steward last reported.
#[derive(Clone, Debug, PartialEq)]
pub struct Report {
    /// Its rung.
    pub rung: Rung,
    /// Its verdict.
    pub verdict: Verdict,
    /// Shortfall proven at that rung, MW.
    pub proven_mw: f64,
    /// Ties open to help, by place in the charter.
    pub tie_open: Vec<bool>,
    /// Its deviation on each tie, MW along the line.
    pub tie_deviation_mw: Vec<f64>,
    /// Feeders held for the operator.
    pub feeder_locked: Vec<bool>,
}

/// The plant's side of one area's conversation.
pub struct Desk {
    key: Key,
    decoder: FrameDecoder<WIRE_MAX>,
    counter: u32,
    steward_boot: u32,
    raw: Box<[u8; FRAME_MAX]>,
    wire: Box<[u8; WIRE_MAX]>,
    collector: Collector,
    /// Tick of the last orders heard.
    pub last_orders: Option<u32>,
    /// Last report heard.
    pub report: Report,
    /// Frames that were refused here.
    pub refused: u64,
}

impl Desk {
    /// A desk for an area, nothing heard yet.
    pub fn new(area: &Area, key: Key) -> Self {
        Self {
            key,
            decoder: FrameDecoder::new(),
            counter: 0,
            steward_boot: 0,
            raw: Box::new([0; FRAME_MAX]),
            wire: Box::new([0; WIRE_MAX]),
            collector: Collector::default(),
            last_orders: None,
            report: Report {
                rung: Rung::Keep,
                verdict: Verdict::Blind,
                proven_mw: 0.0,
                tie_open: vec![false; area.ties.len()],
                tie_deviation_mw: vec![0.0; area.ties.len()],
                feeder_locked: vec![false; area.feeders.len()],
            },
            refused: 0,
        }
    }

    /// Seal a message to the area's steward; the bytes are good until the next call.
    pub fn seal(&mut self, area: &Area, message: &Message<'_>) -> &[u8] {
        self.counter += 1;
        let header = Header {
            id: message.id(),
            from: PLANT,
            to: area.address(),
            boot_id: PLANT_BOOT,
            peer_boot_id: self.steward_boot,
            counter: self.counter,
        };
        // Every message of the plant fits by the derivation of PAYLOAD_MAX; an empty frame is refused by all.
        frame::seal(&header, message, &self.key, &mut self.raw[..], &mut self.wire[..])
            .unwrap_or(&[])
    }

    /// Measure the area and seal the frame.
    pub fn measure(&mut self, grid: &Grid, area: &Area, plant: &Plant, tick: u32) -> &[u8] {
        let mut room = [[0; LIST_BYTES]; 6];
        let mut bits = [[0; 16]; 3];
        let [freq, lines, ties, outputs, sheds, loads] = &mut room;
        let [line_bits, tie_bits, unit_bits] = &mut bits;
        let fresh = |mw: f64| Reading::fresh(mw as f32);
        let flow = plant.line_flow_mw();
        let line_reading = |&line: &usize| {
            if grid.lines[line].metered { fresh(flow[line]) } else { Reading::missing() }
        };
        let export = area.ties.iter().zip(&area.from_end);
        let export = export.map(|(&tie, &from)| fresh(if from { flow[tie] } else { -flow[tie] }));
        let dark = |bus: usize| plant.bus_island()[bus].is_none();
        let load = |&feeder: &usize| {
            let f = &grid.feeders[feeder];
            fresh(if dark(f.bus) { 0.0 } else { f.load_mw })
        };
        let freq_dev = area.meters.iter().map(|&bus| fresh(plant.bus_freq_dev_hz()[bus]));
        let output = area.units.iter().map(|&unit| fresh(plant.unit_output_mw()[unit]));
        let shed = area.feeders.iter().map(|&feeder| fresh(plant.feeder_shed_mw()[feeder]));
        let closed = plant.line_closed();
        let measurements = Measurements {
            tick,
            freq_dev_hz: pack_readings(freq_dev, freq).unwrap_or_default(),
            line_flow_mw: pack_readings(area.lines.iter().map(line_reading), lines)
                .unwrap_or_default(),
            tie_flow_mw: pack_readings(export, ties).unwrap_or_default(),
            output_mw: pack_readings(output, outputs).unwrap_or_default(),
            shed_mw: pack_readings(shed, sheds).unwrap_or_default(),
            feeder_load_mw: pack_readings(area.feeders.iter().map(load), loads).unwrap_or_default(),
            line_closed: pack_bits(area.lines.iter().map(|&l| closed[l]), line_bits)
                .unwrap_or_default(),
            tie_closed: pack_bits(area.ties.iter().map(|&l| closed[l]), tie_bits)
                .unwrap_or_default(),
            unit_in_service: pack_bits(
                area.units.iter().map(|&unit| plant.unit_in_service()[unit]),
                unit_bits,
            )
            .unwrap_or_default(),
        };
        self.seal(area, &Message::Measurements(measurements))
    }

    /// Read bytes from the steward: orders go to the plant, whole proofs are returned.
    pub fn read(
        &mut self,
        area: &Area,
        grid: &Grid,
        plant: &mut Plant,
        mut bytes: &[u8],
        proofs: &mut Vec<HeardProof>,
    ) {
        let Self { key, decoder, steward_boot, collector, last_orders, report, refused, .. } = self;
        while let Some(raw) = decoder.feed(&mut bytes) {
            let used = match frame::open(raw, key) {
                Ok((header, message)) if header.to == PLANT && header.from == area.address() => {
                    *steward_boot = header.boot_id;
                    match message {
                        Message::Orders(orders) => {
                            let newer = last_orders.is_none_or(|last| orders.tick > last);
                            let obeyed = newer && obey(area, grid, plant, &orders);
                            if obeyed {
                                *last_orders = Some(orders.tick);
                            }
                            obeyed || !newer
                        }
                        Message::Status(status) => note(area, report, &status),
                        Message::ProofPart(part) => {
                            proofs.extend(collector.take(area, &part));
                            true
                        }
                        _ => false,
                    }
                }
                Ok(_) | Err(_) => false,
            };
            *refused += u64::from(!used);
        }
    }
}

fn all_finite(values: Floats<'_>) -> bool {
    values.iter().all(f32::is_finite)
}

/// Hand the orders to the plant; false when they do not fit the area.
fn obey(area: &Area, grid: &Grid, plant: &mut Plant, orders: &Orders<'_>) -> bool {
    let fits = orders.setpoint_mw.len() == area.units.len()
        && orders.shed_mw.len() == area.feeders.len()
        && all_finite(orders.setpoint_mw)
        && all_finite(orders.shed_mw);
    if !fits {
        return false;
    }
    for (&unit, mw) in area.units.iter().zip(orders.setpoint_mw.iter()) {
        if grid.units[unit].status == crate::case::model::UnitStatus::Available {
            plant.set_unit_setpoint_mw(unit, f64::from(mw));
        }
    }
    for (&feeder, mw) in area.feeders.iter().zip(orders.shed_mw.iter()) {
        plant.set_feeder_shed_mw(feeder, f64::from(mw));
    }
    true
}

fn note(area: &Area, report: &mut Report, status: &Status<'_>) -> bool {
    let fits = status.tie_deviation_mw.len() == area.ties.len()
        && all_finite(status.tie_deviation_mw)
        && status.proven_mw.is_finite();
    if fits {
        report.rung = status.rung;
        report.verdict = status.verdict;
        report.proven_mw = f64::from(status.proven_mw);
        for (tie, open) in report.tie_open.iter_mut().enumerate() {
            *open = status.ties_open >> tie & 1 == 1;
        }
        for (own, mw) in report.tie_deviation_mw.iter_mut().zip(status.tie_deviation_mw.iter()) {
            *own = f64::from(mw);
        }
        for (feeder, locked) in report.feeder_locked.iter_mut().enumerate() {
            *locked = status.feeders_locked >> feeder & 1 == 1;
        }
    }
    fits
}
