//! One tick's readings, told to a steward, and what a steward says back.

use hedgerow_firmware::steward::{Say, Steward};
use hedgerow_protocol::limits::PAYLOAD_MAX;
use hedgerow_protocol::message::packed::{pack_bits, pack_readings};
use hedgerow_protocol::message::{Measurements, Message, Reading, Rung, TieTerms, Verdict};

/// Readings of one tick, in MW and Hz.
#[derive(Clone, Debug)]
pub struct Snapshot {
    /// Frequency deviation per meter.
    pub freq_dev_hz: Vec<Reading>,
    /// Flow per line.
    pub line_flow_mw: Vec<Reading>,
    /// Export per tie.
    pub tie_flow_mw: Vec<Reading>,
    /// Output per unit.
    pub output_mw: Vec<Reading>,
    /// Load taken off per feeder.
    pub shed_mw: Vec<Reading>,
    /// Load that opening the feeder would take off, or took off.
    pub feeder_load_mw: Vec<Reading>,
    /// Breaker status per line.
    pub line_closed: Vec<bool>,
    /// Breaker status per tie.
    pub tie_closed: Vec<bool>,
    /// Breaker status per unit.
    pub unit_in_service: Vec<bool>,
}

impl Snapshot {
    /// All lists of readings.
    pub fn lists_mut(&mut self) -> [&mut Vec<Reading>; 6] {
        [
            &mut self.freq_dev_hz,
            &mut self.line_flow_mw,
            &mut self.tie_flow_mw,
            &mut self.output_mw,
            &mut self.shed_mw,
            &mut self.feeder_load_mw,
        ]
    }

    /// Tell it as a message.
    pub fn tell<T>(&self, tick: u32, hear: impl FnOnce(&Message<'_>) -> T) -> T {
        let mut rooms = [[0; 512]; 6];
        let mut bits = [[0; 16]; 3];
        let [a, b, c, d, e, f] = &mut rooms;
        let [g, h, i] = &mut bits;
        let pack = |list: &[Reading], room| pack_readings(list.iter().copied(), room).unwrap();
        let flags = |list: &[bool], room| pack_bits(list.iter().copied(), room).unwrap();
        hear(&Message::Measurements(Measurements {
            tick,
            freq_dev_hz: pack(&self.freq_dev_hz, &mut a[..]),
            line_flow_mw: pack(&self.line_flow_mw, &mut b[..]),
            tie_flow_mw: pack(&self.tie_flow_mw, &mut c[..]),
            output_mw: pack(&self.output_mw, &mut d[..]),
            shed_mw: pack(&self.shed_mw, &mut e[..]),
            feeder_load_mw: pack(&self.feeder_load_mw, &mut f[..]),
            line_closed: flags(&self.line_closed, &mut g[..]),
            tie_closed: flags(&self.tie_closed, &mut h[..]),
            unit_in_service: flags(&self.unit_in_service, &mut i[..]),
        }))
    }
}

/// What a steward said in one tick.
#[derive(Clone, Debug, PartialEq)]
pub struct Said {
    /// Set-points in MW.
    pub setpoint_mw: Vec<f32>,
    /// Sheds in MW.
    pub shed_mw: Vec<f32>,
    /// Rung at the end of the tick.
    pub rung: Rung,
    /// Verdict.
    pub verdict: Verdict,
    /// Ties open, one bit each.
    pub ties_open: u16,
    /// Feeders held for the operator, one bit each.
    pub feeders_locked: u64,
    /// Load estimated, MW.
    pub load_mw: f32,
    /// Shortfall proven, MW.
    pub proven_mw: f32,
    /// Terms per tie.
    pub terms: Vec<TieTerms>,
    /// Parts of proofs.
    pub proof_parts: usize,
    /// Every number said.
    pub numbers: Vec<f32>,
    /// Every payload, with its id before it.
    pub bytes: Vec<u8>,
}

impl Said {
    fn nothing() -> Self {
        Self {
            setpoint_mw: Vec::new(),
            shed_mw: Vec::new(),
            rung: Rung::Keep,
            verdict: Verdict::Blind,
            ties_open: 0,
            feeders_locked: 0,
            load_mw: 0.0,
            proven_mw: 0.0,
            terms: Vec::new(),
            proof_parts: 0,
            numbers: Vec::new(),
            bytes: Vec::new(),
        }
    }

    fn note(&mut self, message: &Message<'_>) {
        match message {
            Message::Orders(orders) => {
                self.setpoint_mw = orders.setpoint_mw.iter().collect();
                self.shed_mw = orders.shed_mw.iter().collect();
                self.numbers.extend(orders.setpoint_mw.iter().chain(orders.shed_mw.iter()));
            }
            Message::Status(status) => {
                (self.rung, self.verdict) = (status.rung, status.verdict);
                self.ties_open = status.ties_open;
                self.feeders_locked = status.feeders_locked;
                (self.load_mw, self.proven_mw) = (status.load_mw, status.proven_mw);
                self.numbers.extend([status.proven_mw, status.load_mw, status.shed_mw]);
                self.numbers.extend(status.tie_deviation_mw.iter());
            }
            Message::TieTerms(terms) => {
                self.terms.push(*terms);
                let pairs = [terms.bid, terms.bid_before, terms.deviation];
                self.numbers.extend(pairs.iter().flatten());
            }
            Message::ProofPart(part) => {
                self.proof_parts += 1;
                self.numbers.push(part.claimed_mw);
                self.numbers.extend(part.values.iter());
            }
            other => panic!("a steward never says {other:?}"),
        }
        let mut room = [0; PAYLOAD_MAX];
        self.bytes.push(message.id());
        self.bytes.extend_from_slice(message.encode(&mut room).unwrap());
    }
}

/// Run one tick and catch what is said.
pub fn listen<const B: usize, const X: usize, const R: usize>(
    steward: &mut Steward<B, X, R>,
    tick: u32,
) -> Said {
    let mut said = Said::nothing();
    steward.tick(tick, &mut |say| match say {
        Say::Plant(message) | Say::Neighbour(_, message) => said.note(&message),
    });
    said
}
