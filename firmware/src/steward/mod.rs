//! The steward of one area: sans-IO, one call per tick.
//!
//! Contract: [`Steward::load`] takes a charter, [`Steward::hear`] a decoded
//! message, [`Steward::tick`] moves one tick on and says what must be said.
//! Every set-point said is inside the range of its rung, whatever was heard.
//!
//! Order of a tick: statuses; ramps of schedules and base points; who helps;
//! estimates; ranges, and a new scaling if rows or open columns changed; limits;
//! the law; feeders; verdict; shadow; ladder; messages.

mod feeders;
mod hear;
mod judgement;
mod ranges;
mod rows;
mod say;
mod shape;
mod write;

pub use say::Say;

use crate::ladder::{Finding, Ladder, Move};
use crate::law::kernel::{abs, at, max, put};
use crate::law::scale::Column;
use crate::law::{Iterate, Limits, Problem, Scaled};
use crate::measure::{AGE_MAX, Estimate, Measured, Sight};
use crate::neighbour::{self, NOBODY, TieEnd};
use crate::network::{Change, Network};
use crate::plan::Plan;
use feeders::Feeders;
use hear::Ramped;
use hedgerow_protocol::limits::TIES_MAX;
use hedgerow_protocol::message::{Refusal, Rung, Verdict};
use judgement::Judgement;
use ranges::Boxes;
use rows::Rows;

/// Frequency deviation below which an area counts as at rest, Hz.
const REST_HZ: f32 = 1e-3;

/// The controller of one area. At most B buses, X unknowns, R rows.
#[derive(Clone, Debug)]
pub struct Steward<const B: usize, const X: usize, const R: usize> {
    plan: Plan<B, X, R>,
    ready: bool,
    network: Network<B, R>,
    measured: Measured<B, X, R>,
    estimate: Estimate<R>,
    rows: Rows,
    tie_closed: [bool; TIES_MAX],
    /// Ties closed and controlled at the other end too; the others' flow is load.
    tie_counts: [bool; TIES_MAX],
    unit_on: [bool; X],
    schedule: [Ramped; TIES_MAX],
    base: [Ramped; X],
    ends: [TieEnd; TIES_MAX],
    open: [bool; TIES_MAX],
    distance: u8,
    boxes: Boxes<X>,
    kinds: [Column; X],
    scaled: Scaled<X, R>,
    problem: Problem<X, R>,
    limits: Limits<X, R>,
    main: Iterate<X, R>,
    shadow: Iterate<X, R>,
    feeders: Feeders<X>,
    setpoint: [f32; X],
    judgement: Judgement<X, R>,
    ladder: Ladder,
    proofs: u16,
    verdict: Verdict,
    rebuilt: bool,
}

impl<const B: usize, const X: usize, const R: usize> Steward<B, X, R> {
    /// A steward without a charter: all zero, so that a static one takes no flash.
    pub const fn new() -> Self {
        Self {
            plan: Plan::new(),
            ready: false,
            network: Network::new(),
            measured: Measured::new(),
            estimate: Estimate::new(),
            rows: Rows::new(),
            tie_closed: [false; TIES_MAX],
            tie_counts: [false; TIES_MAX],
            unit_on: [false; X],
            schedule: [Ramped::at(0.0); TIES_MAX],
            base: [Ramped::at(0.0); X],
            ends: [TieEnd::blank(); TIES_MAX],
            open: [false; TIES_MAX],
            distance: 0,
            boxes: Boxes::new(),
            kinds: [Column::Closed; X],
            scaled: Scaled::new(),
            problem: Problem::new(),
            limits: Limits::new(),
            main: Iterate::new(),
            shadow: Iterate::new(),
            feeders: Feeders::new(),
            setpoint: [0.0; X],
            judgement: Judgement::new(),
            ladder: Ladder::new(),
            proofs: 0,
            verdict: Verdict::Settled,
            rebuilt: false,
        }
    }

    /// Boot with a charter; what was known before is forgotten.
    ///
    /// Errors: why the charter is refused; the steward then has none.
    // Not inlined: its temporaries must not lie on the stack of everything else.
    #[inline(never)]
    pub fn load(&mut self, charter: &[u8]) -> Result<(), Refusal> {
        self.ready = false;
        self.plan.load(charter)?;
        self.forget();
        self.rows.choose(&self.plan, &self.network, &self.tie_counts);
        self.refresh_boxes();
        self.rebuild();
        self.ready = true;
        Ok(())
    }

    /// Start from the plan; nothing heard, nothing learnt.
    #[inline(never)]
    fn forget(&mut self) {
        self.network.start(&self.plan);
        self.measured.start(&self.plan);
        self.estimate = Estimate::new();
        self.tie_closed = self.measured.tie_closed;
        self.tie_counts = self.tie_closed;
        self.unit_on = self.measured.unit_in_service;
        for (schedule, tie) in self.schedule.iter_mut().zip(&self.plan.ties) {
            *schedule = Ramped::at(tie.schedule);
        }
        for (index, (base, unit)) in self.base.iter_mut().zip(&self.plan.units).enumerate() {
            *base = Ramped::at(unit.base);
            put(&mut self.setpoint, index, unit.base);
        }
        self.ends = [TieEnd::new(); TIES_MAX];
        self.open = [false; TIES_MAX];
        self.distance = NOBODY;
        self.kinds = [Column::Closed; X];
        self.problem = Problem::new();
        self.limits = Limits::new();
        self.main = Iterate::new();
        self.shadow = Iterate::new();
        self.feeders = Feeders::new();
        self.judgement = Judgement::new();
        self.ladder = Ladder::new();
        self.verdict = Verdict::Blind;
    }

    /// Whether a charter is loaded.
    pub fn is_ready(&self) -> bool {
        self.ready
    }

    /// Tick of the newest measurements taken in, if there are any.
    pub fn newest_tick(&self) -> Option<u32> {
        (self.ready && self.measured.any).then_some(self.measured.tick)
    }

    /// What the last tick found of its rung.
    pub fn verdict(&self) -> Verdict {
        if self.ready { self.verdict } else { Verdict::Blind }
    }

    /// Whether the last tick built the scaling again.
    pub fn has_rebuilt(&self) -> bool {
        self.rebuilt
    }

    /// The plan in force.
    pub fn plan(&self) -> &Plan<B, X, R> {
        &self.plan
    }

    /// Present rung.
    pub fn rung(&self) -> Rung {
        self.ladder.rung()
    }

    /// The network with its sensitivities.
    pub fn network(&self) -> &Network<B, R> {
        &self.network
    }

    /// The estimates in force.
    pub fn estimate(&self) -> &Estimate<R> {
        &self.estimate
    }

    /// Set-point of a unit now, pu.
    pub fn setpoint(&self, unit: usize) -> f32 {
        at(&self.setpoint, unit)
    }

    /// Move one tick on and say what must be said.
    // Not inlined: its temporaries must not lie on the stack of everything else.
    #[inline(never)]
    pub fn tick(&mut self, tick: u32, say: &mut dyn FnMut(Say<'_>)) {
        if !self.ready {
            return;
        }
        self.note_missing(tick);
        let moved = self.follow_statuses();
        self.pass_ramps();
        self.meet_neighbours();
        let sight = self.estimate.update(
            &self.plan,
            &self.network,
            &self.measured,
            &self.active(),
            &self.tie_counts,
        );
        let clear = sight == Sight::Clear && self.estimate.is_started();
        self.refresh_boxes();
        self.rebuilt = self.update_kinds() || moved;
        if self.rebuilt {
            self.rebuild();
        }
        self.fill_problem();
        self.limits.fill(&self.scaled, &self.problem);
        let settings = self.plan.settings;
        let (sigma, clamp) = (self.scaled.sigma, settings.dual_clamp);
        self.main.run(&self.scaled, &self.limits, sigma, clamp, settings.iterations);
        let violation = self.main.violation(&self.scaled, &self.limits);
        let wish = self.wishes();
        let still = self.write_units(&wish, sight);
        self.settle_ends(&wish);
        let (hard, conditional) = self.judge(clear);
        let witness = self.run_shadow();
        self.speak_verdict(clear, violation, still);
        let total = self.write_feeders(&wish, violation, sight);
        let found = Finding { clear, hard, conditional, witness, shedding: total > 0.01 };
        let step = self.ladder.tick(found, &settings);
        self.speak(tick, step, say);
    }

    /// Readings get old while no newer ones come; those of a delayed link stay usable
    /// as long as they are no older than any reading may be.
    fn note_missing(&mut self, tick: u32) {
        let age = tick.wrapping_sub(self.measured.tick) as i32;
        if !self.measured.any || age > i32::from(AGE_MAX) {
            self.measured.age_out();
        }
    }

    /// Bring network, ties and units to the statuses that are believed; true when rows may have changed.
    // Not inlined: its temporaries must not lie on the stack of everything else.
    #[inline(never)]
    fn follow_statuses(&mut self) -> bool {
        let strength = self.strength();
        let mut change = Change::None;
        for index in 0..self.plan.lines.len() {
            let closed = self.measured.line_closed.get(index).copied().unwrap_or(true);
            if closed == self.network.is_closed(index) {
                continue;
            }
            let part = &mut self.estimate.part;
            let now = if closed {
                self.network.close(&self.plan, index, part, &strength)
            } else {
                self.network.open(&self.plan, index, part, &strength)
            };
            change = if change == Change::Relearn || now == Change::None { change } else { now };
        }
        let ties_moved = self.follow_ties();
        let units_moved = self.unit_on != self.measured.unit_in_service;
        self.unit_on = self.measured.unit_in_service;
        match change {
            Change::Relearn => self.estimate.relearn(),
            Change::None if !ties_moved && !units_moved => return false,
            Change::None | Change::Exact | Change::Cut => {
                self.estimate.freeze(self.plan.settings.freeze_ticks);
            }
        }
        self.rows.choose(&self.plan, &self.network, &self.tie_counts);
        true
    }

    /// Which ties are closed, and which of them count as controlled; true when that has changed.
    ///
    /// A tie whose other end sits on a piece that its steward lost can hold no
    /// schedule: from then on its flow is part of the load.
    fn follow_ties(&mut self) -> bool {
        let (closed, counts) = (self.tie_closed, self.tie_counts);
        self.tie_closed = self.measured.tie_closed;
        let ticks = self.plan.settings.neighbour_ticks;
        for (index, tie) in self.plan.ties.iter().enumerate() {
            let closed = self.tie_closed.get(index).copied().unwrap_or(false);
            let lost =
                self.ends.get(index).and_then(|end| end.theirs(ticks)).map(|said| said.detached);
            let Some(slot) = self.tie_counts.get_mut(index) else { continue };
            let before = *slot;
            // A silent neighbour changes nothing: what it said last stands.
            *slot = closed && !lost.unwrap_or(!before && closed);
            let flow = self.measured.tie_flow.get(index).copied().flatten().unwrap_or(0.0);
            let bus = usize::from(tie.bus);
            if closed && before != *slot && self.network.is_kept(bus) {
                let relief = if *slot { flow } else { -flow };
                self.network.relieve(&self.plan, &mut self.estimate.part, bus, relief);
            }
        }
        closed != self.tie_closed || counts != self.tie_counts
    }

    /// Unit capacity at each bus, pu: which piece of a cut area is worth keeping.
    fn strength(&self) -> [f32; B] {
        let mut strength = [0.0; B];
        for (unit, &on) in self.plan.units.iter().zip(&self.unit_on) {
            if on {
                let bus = usize::from(unit.bus);
                let before = at(&strength, bus);
                put(&mut strength, bus, before + max(unit.emergency_high, 0.0));
            }
        }
        strength
    }

    fn pass_ramps(&mut self) {
        self.schedule.iter_mut().for_each(Ramped::pass);
        self.base.iter_mut().for_each(Ramped::pass);
    }

    /// Agreed exports now; a tie that is out carries nothing.
    fn schedules(&self) -> [f32; TIES_MAX] {
        let mut out = [0.0; TIES_MAX];
        for (index, (value, schedule)) in out.iter_mut().zip(&self.schedule).enumerate() {
            *value = if self.rows.is_attached(index) { schedule.now } else { 0.0 };
        }
        out
    }

    /// Who leans, how far away, and which ties are open for it.
    fn meet_neighbours(&mut self) {
        let settings = self.plan.settings;
        let heard = self.ends.iter().take(self.plan.ties.len());
        let heard = heard.map(|end| end.theirs(settings.neighbour_ticks));
        self.distance = neighbour::help_distance(self.ladder.rung(), heard);
        let asks = self.asks();
        for (index, end) in self.ends.iter_mut().enumerate().take(self.plan.ties.len()) {
            let attached = self.rows.is_attached(index);
            let kept =
                self.plan.ties.get(index).is_some_and(|tie| self.network.is_kept(tie.bus.into()));
            end.pass(asks && attached, kept);
            if let Some(open) = self.open.get_mut(index) {
                *open = attached && end.is_open(asks, &settings);
            }
        }
    }

    /// Whether this area opens its ties to help.
    fn asks(&self) -> bool {
        self.distance <= self.plan.settings.help_hops
    }

    /// Actuators whose output counts as controlled.
    fn active(&self) -> [bool; X] {
        let mut active = [true; X];
        for (slot, unit) in active.iter_mut().zip(&self.plan.units) {
            *slot = unit.available;
        }
        active
    }

    /// Solve the next tighter rung beside; true when it fits within tolerance.
    // Not inlined: its temporaries must not lie on the stack of everything else.
    #[inline(never)]
    fn run_shadow(&mut self) -> bool {
        let schedule = self.schedules();
        let mut boxes = Boxes::new();
        self.view(&schedule).shadow(self.ladder.rung(), &self.ends, &mut boxes);
        self.problem.low = boxes.low;
        self.problem.high = boxes.high;
        let margin = self.plan.settings.climb_margin;
        let (eqs, rows) = (self.plan.eqs(), self.plan.rows());
        let limits = self.problem.row_low.iter_mut().zip(&mut self.problem.row_high);
        for (low, high) in limits.take(rows).skip(eqs) {
            let by = margin * (*high - *low);
            *low += by;
            *high -= by;
        }
        self.limits.fill(&self.scaled, &self.problem);
        let settings = self.plan.settings;
        let sigma = match self.ladder.rung() {
            Rung::Keep | Rung::Lean => self.scaled.sigma_ties_fixed,
            Rung::Stretch | Rung::Shed => self.scaled.sigma_flows_fixed,
        };
        let clamp = settings.dual_clamp;
        self.drop_stale_shadow(&boxes);
        self.shadow.run(&self.scaled, &self.limits, sigma, clamp, settings.shadow_iterations);
        let violation = self.shadow.violation(&self.scaled, &self.limits);
        self.ladder.rung() != Rung::Keep && violation < settings.climb_tolerance
    }

    fn speak_verdict(&mut self, clear: bool, violation: f32, still: bool) {
        let freq = self.measured.freq_dev_hz.map_or(REST_HZ, abs);
        self.verdict = if !clear {
            Verdict::Blind
        } else if self.judgement.proven > self.plan.settings.proof_threshold {
            Verdict::Impossible
        } else if violation < self.plan.settings.climb_tolerance && still && freq < REST_HZ {
            Verdict::Settled
        } else {
            Verdict::Working
        };
    }

    // Not inlined: its temporaries must not lie on the stack of everything else.
    #[inline(never)]
    fn speak(&mut self, tick: u32, step: Option<Move>, say: &mut dyn FnMut(Say<'_>)) {
        if matches!(step, Some(Move::Down { .. } | Move::Exhausted)) {
            self.proofs = self.proofs.wrapping_add(1);
            self.say_proof(tick, say);
        }
        self.say_orders(tick, say);
        self.say_terms(tick, say);
        // Last, so that whoever waits for it has heard everything of this tick.
        self.say_status(tick, say);
    }
}

impl<const B: usize, const X: usize, const R: usize> Default for Steward<B, X, R> {
    fn default() -> Self {
        Self::new()
    }
}
