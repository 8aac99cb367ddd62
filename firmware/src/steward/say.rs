//! What the steward says at the end of a tick.
//!
//! Contract: values leave in physical units, finite, with -0 written as +0. The
//! packing buffers are large enough for the largest area of any build; a list
//! that would not fit is not sent rather than cut.

use super::Steward;
use crate::law::kernel::at;
use hedgerow_protocol::limits::{PART_MAX, UNITS_MAX};
use hedgerow_protocol::message::packed::{pack_bits, pack_floats};
use hedgerow_protocol::message::{Message, Orders, ProofPart, ProofVector, Status};

/// Values per part of a proof: what is left of a part after at most 48 bytes of
/// numbers and breaker bits (33 of fields at their longest, 15 of bits).
const PART_VALUES: usize = (PART_MAX - 48) / 4;

/// Something to be said, and to whom.
#[derive(Clone, Copy, Debug)]
pub enum Say<'a> {
    /// To the plant, or the host that plays it.
    Plant(Message<'a>),
    /// To the steward with this address.
    Neighbour(u8, Message<'a>),
}

impl<const B: usize, const X: usize, const R: usize> Steward<B, X, R> {
    pub(super) fn say_orders(&self, tick: u32, say: &mut dyn FnMut(Say<'_>)) {
        let mva = self.plan.base_mva;
        let (units, feeders) = (self.plan.units.len(), self.plan.feeders.len());
        let mut unit_bytes = [0; 4 * UNITS_MAX];
        let mut feeder_bytes = [0; 4 * hedgerow_protocol::limits::FEEDERS_MAX];
        let mut bits = [0; UNITS_MAX.div_ceil(8)];
        let setpoints = self.setpoint.iter().take(units).map(|pu| pu * mva);
        let sheds = (0..feeders).map(|index| self.feeders.written(index) * mva);
        let packed = (
            pack_floats(setpoints, &mut unit_bytes),
            pack_floats(sheds, &mut feeder_bytes),
            pack_bits((0..units).map(|_| false), &mut bits),
        );
        if let (Some(setpoint_mw), Some(shed_mw), Some(take_off)) = packed {
            say(Say::Plant(Message::Orders(Orders { tick, setpoint_mw, shed_mw, take_off })));
        }
    }

    pub(super) fn say_status(&self, tick: u32, say: &mut dyn FnMut(Say<'_>)) {
        let mva = self.plan.base_mva;
        let mut bytes = [0; 4 * hedgerow_protocol::limits::TIES_MAX];
        let deviations = self.ends.iter().take(self.plan.ties.len()).map(|end| {
            let [flow, _] = end.deviation();
            flow * mva
        });
        let Some(tie_deviation_mw) = pack_floats(deviations, &mut bytes) else {
            return;
        };
        let ties_open = self
            .open
            .iter()
            .enumerate()
            .fold(0, |bits, (index, &open)| bits | (u16::from(open) << index));
        say(Say::Plant(Message::Status(Status {
            tick,
            rung: self.ladder.rung(),
            verdict: self.verdict,
            proven_mw: self.judgement.proven * mva,
            load_mw: self.estimate.part.load * mva,
            shed_mw: self.feeders.total(self.plan.feeders.len()) * mva,
            topology: self.network.topology(),
            ties_open,
            feeders_locked: self.feeders.locked_bits(),
            tie_deviation_mw,
            accepted: 0,
            refused: 0,
        })));
    }

    pub(super) fn say_terms(&self, tick: u32, say: &mut dyn FnMut(Say<'_>)) {
        let asks = self.asks();
        for (index, (tie, end)) in self.plan.ties.iter().zip(&self.ends).enumerate() {
            if self.tie_closed.get(index).copied().unwrap_or(false) {
                let asks = asks && self.rows.is_attached(index);
                let terms = end.say(tie, tick, asks, self.distance, self.ladder.rung());
                say(Say::Neighbour(tie.neighbour, Message::TieTerms(terms)));
            }
        }
    }

    /// All vectors of the proof that stands, in parts.
    pub(super) fn say_proof(&self, tick: u32, say: &mut dyn FnMut(Say<'_>)) {
        let proof = &self.judgement.proof;
        let (rows, cols) = (self.plan.rows(), self.plan.cols());
        for vector in ProofVector::ALL {
            let (values, total): (&[f32], usize) = match vector {
                ProofVector::Dual => (&proof.dual, rows),
                ProofVector::RowLow => (&self.judgement.row_low, rows),
                ProofVector::RowHigh => (&self.judgement.row_high, rows),
                ProofVector::RowError => (&self.judgement.error, rows),
                ProofVector::BoxLow => (&proof.boxes.low, cols),
                ProofVector::BoxHigh => (&proof.boxes.high, cols),
            };
            let values = values.get(..total).unwrap_or_default();
            for (part, chunk) in values.chunks(PART_VALUES).enumerate() {
                self.say_part(tick, vector, part * PART_VALUES, total, chunk, say);
            }
        }
    }

    fn say_part(
        &self,
        tick: u32,
        vector: ProofVector,
        first: usize,
        total: usize,
        chunk: &[f32],
        say: &mut dyn FnMut(Say<'_>),
    ) {
        let (mut values, mut lines, mut ties) = ([0; PART_MAX], [0; 16], [0; 2]);
        let line_count = self.plan.lines.len();
        let closed = (0..line_count).map(|line| self.network.is_closed(line));
        let attached = self.tie_counts.iter().copied().take(self.plan.ties.len());
        let packed = (
            pack_floats(chunk.iter().copied(), &mut values),
            pack_bits(closed, &mut lines),
            pack_bits(attached, &mut ties),
        );
        let (Some(values), Some(line_closed), Some(tie_closed)) = packed else {
            return;
        };
        let part = ProofPart {
            proof: self.proofs,
            tick,
            rung: self.judgement.rung,
            topology: self.network.topology(),
            root: self.network.root() as u8,
            line_closed,
            tie_closed,
            claimed_mw: self.judgement.proof.shortfall * self.plan.base_mva,
            vector,
            first: first as u16,
            total: total as u16,
            values,
        };
        say(Say::Plant(Message::ProofPart(part)));
    }

    /// Whether each tie is open to help.
    pub fn ties_open(&self) -> impl Iterator<Item = bool> + '_ {
        self.open.iter().copied().take(self.plan.ties.len())
    }

    /// Load taken off by order at a feeder, pu.
    pub fn shed(&self, feeder: usize) -> f32 {
        self.feeders.written(feeder)
    }

    /// Deviation of a tie along the line, pu.
    pub fn tie_deviation(&self, tie: usize) -> f32 {
        self.ends.get(tie).map_or(0.0, |end| at(&end.deviation(), 0))
    }
}
