//! What arrived, whether it may be used, and what it says of the loads.
//!
//! Contract: a value that is missing, older than [`AGE_MAX`] ticks, not finite
//! or absurdly large is never used. The estimates `load`, `flow` and `angle` of
//! [`LoadPart`] do not depend on the steward's own set-points, so the law is not
//! inside a feedback loop; only the swing pollutes them, which the low-pass and
//! the envelope ([`Estimate::error`]) answer for.
//!
//! Data flow: [`Measured`] holds the last reading of everything in pu;
//! [`Estimate::update`] turns it into load parts once a tick, or freezes them
//! after a known event or while data are missing.

use crate::law::kernel::{abs, at, max, put};
use crate::network::{LoadPart, Network};
use crate::plan::Plan;
use hedgerow_protocol::limits::TIES_MAX;
use hedgerow_protocol::message::{Measurements, Reading};

/// Oldest reading that is used, in ticks.
pub const AGE_MAX: u8 = 3;
/// A flow of more than this many ratings is not believed.
const FLOW_FACTOR: f32 = 10.0;
/// A frequency deviation of more than this is not believed, Hz.
const FREQ_DEV_MAX_HZ: f32 = 5.0;
/// A power of more than this is not believed, pu.
const POWER_MAX: f32 = 1e4;
/// Flow above which a breaker reported open is not believed, as a share of the rating.
const OPEN_FLOW_SHARE: f32 = 0.02;

/// The last usable readings, in pu and Hz.
#[derive(Clone, Debug)]
pub struct Measured<const B: usize, const X: usize, const R: usize> {
    /// Tick of the last message.
    pub tick: u32,
    /// Whether a message has arrived at all.
    pub any: bool,
    /// Area frequency deviation in Hz, if a meter in the kept piece is alive.
    pub freq_dev_hz: Option<f32>,
    /// Flow per line; none = not usable.
    pub line_flow: [Option<f32>; R],
    /// Export per tie; none = not usable.
    pub tie_flow: [Option<f32>; TIES_MAX],
    /// Output per unit, then load taken off per feeder; none = not usable.
    pub output: [Option<f32>; X],
    /// What opening each feeder would take off.
    pub feeder_load: [Option<f32>; X],
    /// Breaker status per line, as reported and not contradicted by the flow.
    pub line_closed: [bool; R],
    /// Breaker status per tie.
    pub tie_closed: [bool; TIES_MAX],
    /// Breaker status per unit.
    pub unit_in_service: [bool; X],
}

impl<const B: usize, const X: usize, const R: usize> Measured<B, X, R> {
    /// Nothing seen yet.
    pub const fn new() -> Self {
        Self {
            tick: 0,
            any: false,
            freq_dev_hz: None,
            line_flow: [None; R],
            tie_flow: [None; TIES_MAX],
            output: [None; X],
            feeder_load: [None; X],
            line_closed: [false; R],
            tie_closed: [false; TIES_MAX],
            unit_in_service: [false; X],
        }
    }

    /// Statuses as the charter has them, until the plant has spoken.
    pub fn start(&mut self, plan: &Plan<B, X, R>) {
        *self = Self::new();
        for (closed, line) in self.line_closed.iter_mut().zip(&plan.lines) {
            *closed = line.closed;
        }
        for (closed, tie) in self.tie_closed.iter_mut().zip(&plan.ties) {
            *closed = tie.closed;
        }
        for (on, _) in self.unit_in_service.iter_mut().zip(&plan.units) {
            *on = true;
        }
    }

    /// Whether a message has exactly the lists that the plan expects.
    pub fn fits(plan: &Plan<B, X, R>, m: &Measurements<'_>) -> bool {
        m.freq_dev_hz.len() == plan.meters.len()
            && m.line_flow_mw.len() == plan.lines.len()
            && m.tie_flow_mw.len() == plan.ties.len()
            && m.output_mw.len() == plan.units.len()
            && m.shed_mw.len() == plan.feeders.len()
            && m.feeder_load_mw.len() == plan.feeders.len()
            && m.line_closed.holds(plan.lines.len())
            && m.tie_closed.holds(plan.ties.len())
            && m.unit_in_service.holds(plan.units.len())
    }

    /// Take in a message that [`Self::fits`].
    pub fn take(&mut self, plan: &Plan<B, X, R>, network: &Network<B, R>, m: &Measurements<'_>) {
        let per_mw = 1.0 / plan.base_mva;
        let power = |reading: Reading, limit: f32| {
            reading.usable(AGE_MAX, limit * plan.base_mva).map(|mw| mw * per_mw)
        };
        self.tick = m.tick;
        self.any = true;
        self.freq_dev_hz = area_frequency(plan, network, m);
        let lines = plan.lines.iter().zip(m.line_flow_mw.iter());
        let slots = self.line_flow.iter_mut().zip(&mut self.line_closed);
        for (index, ((slot, closed), (line, reading))) in slots.zip(lines).enumerate() {
            let flow = power(reading, FLOW_FACTOR * line.rating);
            *slot = flow.filter(|_| line.metered);
            *closed = believed(m.line_closed.get(index), flow, line.rating);
        }
        let ties = plan.ties.iter().zip(m.tie_flow_mw.iter());
        let slots = self.tie_flow.iter_mut().zip(&mut self.tie_closed);
        for (index, ((slot, closed), (tie, reading))) in slots.zip(ties).enumerate() {
            *slot = power(reading, FLOW_FACTOR * tie.rating);
            *closed = believed(m.tie_closed.get(index), *slot, tie.rating);
        }
        let outputs = m.output_mw.iter().chain(m.shed_mw.iter());
        for (slot, reading) in self.output.iter_mut().zip(outputs) {
            *slot = power(reading, POWER_MAX);
        }
        for (slot, reading) in self.feeder_load.iter_mut().zip(m.feeder_load_mw.iter()) {
            *slot = power(reading, POWER_MAX);
        }
        for (index, on) in self.unit_in_service.iter_mut().enumerate().take(plan.units.len()) {
            *on = m.unit_in_service.get(index).unwrap_or(false);
        }
    }

    /// Nothing arrived in this tick: no reading is usable any more once it is too old.
    pub fn age_out(&mut self) {
        self.freq_dev_hz = None;
        self.line_flow = [None; R];
        self.tie_flow = [None; TIES_MAX];
        self.output = [None; X];
    }
}

impl<const B: usize, const X: usize, const R: usize> Default for Measured<B, X, R> {
    fn default() -> Self {
        Self::new()
    }
}

/// A breaker reported open while its line carries flow, or without any flow to confirm it, counts as closed.
fn believed(reported_closed: Option<bool>, flow: Option<f32>, rating: f32) -> bool {
    match (reported_closed, flow) {
        (Some(false), Some(flow)) => abs(flow) > OPEN_FLOW_SHARE * rating,
        (Some(_) | None, _) => true,
    }
}

fn area_frequency<const B: usize, const X: usize, const R: usize>(
    plan: &Plan<B, X, R>,
    network: &Network<B, R>,
    m: &Measurements<'_>,
) -> Option<f32> {
    let (mut sum, mut weight) = (0.0, 0.0);
    for (meter, reading) in plan.meters.iter().zip(m.freq_dev_hz.iter()) {
        let value = reading.usable(AGE_MAX, FREQ_DEV_MAX_HZ);
        if let (Some(value), true) = (value, network.is_kept(meter.bus.into())) {
            sum += meter.weight * value;
            weight += meter.weight;
        }
    }
    (weight > 0.0).then(|| sum / weight)
}

/// What a tick's update found.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Sight {
    /// Everything needed was there.
    Clear,
    /// Something was missing: load estimates kept as they are.
    Partial,
    /// No frequency at all.
    None,
}

/// Estimates of the load part, with how far the last innovations were off.
#[derive(Clone, Debug)]
pub struct Estimate<const R: usize> {
    /// The load part.
    pub part: LoadPart<R>,
    /// Envelope of the load's innovation, pu.
    pub load_error: f32,
    /// Envelope of each line's innovation, pu.
    pub flow_error: [f32; R],
    /// Envelope of each boundary angle's innovation, rad.
    pub angle_error: [f32; TIES_MAX],
    /// Ticks for which the estimates stay frozen.
    pub frozen_ticks: u16,
    started: bool,
}

impl<const R: usize> Estimate<R> {
    /// Nothing known.
    pub const fn new() -> Self {
        Self {
            part: LoadPart::new(),
            load_error: 0.0,
            flow_error: [0.0; R],
            angle_error: [0.0; TIES_MAX],
            frozen_ticks: 0,
            started: false,
        }
    }

    /// Freeze after a known event: the loads did not change, only the swing pollutes the raw values.
    pub fn freeze(&mut self, ticks: u16) {
        self.frozen_ticks = ticks;
        self.load_error = 0.0;
        self.flow_error = [0.0; R];
        self.angle_error = [0.0; TIES_MAX];
    }

    /// Learn anew from the next measurements.
    pub fn relearn(&mut self) {
        self.started = false;
        self.frozen_ticks = 0;
    }

    /// Whether anything has been learnt.
    pub fn is_started(&self) -> bool {
        self.started
    }

    /// One tick's update.
    ///
    /// Units: pu. `active` says for each actuator whether its output counts as
    /// controlled, `ties` the same for each tie's flow; what does not count is part
    /// of the load.
    /// Cost: n^2 + lines flops.
    #[inline(never)]
    pub fn update<const B: usize, const X: usize>(
        &mut self,
        plan: &Plan<B, X, R>,
        network: &Network<B, R>,
        measured: &Measured<B, X, R>,
        active: &[bool; X],
        ties: &[bool; TIES_MAX],
    ) -> Sight {
        let Some(freq_dev_hz) = measured.freq_dev_hz else {
            return Sight::None;
        };
        let Some((injection, balance)) = injections(plan, network, measured, active, ties) else {
            return Sight::Partial;
        };
        if self.frozen_ticks > 0 && self.started {
            self.frozen_ticks -= 1;
            return Sight::Clear;
        }
        let settings = &plan.settings;
        let gain = if self.started { settings.filter_gain } else { 1.0 };
        let keep = if self.started { settings.envelope_keep } else { 0.0 };
        let raw_load = balance - settings.damping_pu_per_hz * freq_dev_hz;
        low_pass(&mut self.part.load, &mut self.load_error, raw_load, gain, keep);
        let mut angle = [0.0; B];
        network.angles(&injection, plan.buses, &mut angle);
        let sight = self.update_flows(plan, network, measured, &angle, gain, keep);
        self.started = true;
        sight
    }

    fn update_flows<const B: usize, const X: usize>(
        &mut self,
        plan: &Plan<B, X, R>,
        network: &Network<B, R>,
        measured: &Measured<B, X, R>,
        angle: &[f32; B],
        gain: f32,
        keep: f32,
    ) -> Sight {
        let mut flow = [0.0; R];
        let mut tree_is_whole = true;
        let slots = self.part.flow.iter_mut().zip(&mut self.flow_error).zip(&mut flow);
        for (index, (line, ((estimate, error), full))) in plan.lines.iter().zip(slots).enumerate() {
            if !network.is_live(index, line) {
                (*estimate, *error) = (0.0, 0.0);
                continue;
            }
            let across = at(angle, line.from.into()) - at(angle, line.to.into());
            let controlled = line.susceptance * across;
            match measured.line_flow.get(index).copied().flatten() {
                Some(measured) => {
                    *full = measured;
                    low_pass(estimate, error, measured - controlled, gain, keep);
                }
                None => {
                    // Unseen: the row stays with its old load part, but can prove nothing.
                    *full = *estimate + controlled;
                    *error = line.rating;
                    tree_is_whole &= !network.in_tree(index);
                }
            }
        }
        if tree_is_whole {
            let mut path = [0.0; B];
            network.tree_angles(&plan.lines, &flow, &mut path);
            let slots = self.part.angle.iter_mut().zip(&mut self.angle_error);
            for (tie, (estimate, error)) in plan.ties.iter().zip(slots) {
                let bus = usize::from(tie.bus);
                low_pass(estimate, error, at(&path, bus) - at(angle, bus), gain, keep);
            }
        }
        Sight::Clear
    }
}

impl<const R: usize> Default for Estimate<R> {
    fn default() -> Self {
        Self::new()
    }
}

/// Controlled injection per bus (units + feeders - exports) and its sum; none when one is not seen.
fn injections<const B: usize, const X: usize, const R: usize>(
    plan: &Plan<B, X, R>,
    network: &Network<B, R>,
    measured: &Measured<B, X, R>,
    active: &[bool; X],
    ties: &[bool; TIES_MAX],
) -> Option<([f32; B], f32)> {
    let mut injection = [0.0; B];
    let mut balance = 0.0;
    for (index, (&output, &counts)) in
        measured.output.iter().zip(active).enumerate().take(plan.actuators())
    {
        if !counts {
            continue;
        }
        let bus = plan.actuator_bus(index)?;
        if network.is_kept(bus) {
            let (output, before) = (output?, at(&injection, bus));
            put(&mut injection, bus, before + output);
            balance += output;
        }
    }
    let ties = plan.ties.iter().zip(&measured.tie_flow).zip(ties);
    for ((tie, flow), &counts) in ties {
        let bus = usize::from(tie.bus);
        if counts && network.is_kept(bus) {
            let (flow, before) = ((*flow)?, at(&injection, bus));
            put(&mut injection, bus, before - flow);
            balance -= flow;
        }
    }
    Some((injection, balance))
}

fn low_pass(estimate: &mut f32, error: &mut f32, raw: f32, gain: f32, keep: f32) {
    let innovation = raw - *estimate;
    *error = max(if keep > 0.0 { abs(innovation) } else { 0.0 }, *error * keep);
    *estimate = if gain >= 1.0 { raw } else { *estimate + gain * innovation };
}
