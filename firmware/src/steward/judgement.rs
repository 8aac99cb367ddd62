//! The steward's own trial: candidate duals, ranges to try them on, and the proof that stands.
//!
//! Contract: `hard` speaks of this rung with all the help that could come,
//! `conditional` of what the neighbours deliver now. Both rest on
//! [`verdict::shortfall`](crate::verdict::shortfall) alone. The proof kept is the
//! one with the largest proven shortfall of this tick.

use super::Steward;
use super::ranges::{Boxes, between};
use crate::law::kernel::{abs, max, max_abs, min};
use crate::neighbour::TieEnd;
use crate::verdict::candidate::Candidates;
use crate::verdict::{Product, Ranges, Rows, shortfall};
use hedgerow_protocol::message::Rung;

/// Slack added to the range between two ends, pu: they never agree to the bit.
const BETWEEN_SLACK: f32 = 0.001;
/// A neighbour's value counts as steady within this of its own low-pass, pu.
const STEADY: f32 = 0.03;
/// Low-pass time of how far the ends of the open ties are apart, s.
const GAP_TREND_S: f32 = 5.0;
/// Below this share of its low-pass the gap is closing: an exponential approach of
/// up to 100 s, 1 - 5 s / 100 s.
const CLOSING: f32 = 0.95;
/// Without open ties a dual this large, as a share of the clamp, may be left from an old need.
const STALE_SHARE: f32 = 0.25;
/// The same share for the shadow, which often looks at a rung that is far from possible.
const SHADOW_STALE_SHARE: f32 = 0.05;
/// ... if the rows are this far from any proof, pu.
const STALE_SLACK: f32 = -0.05;
/// Seconds between two resets.
const STALE_PAUSE_S: f32 = 5.0;

/// The strongest proof of a tick.
#[derive(Clone, Debug)]
pub struct Proof<const X: usize, const R: usize> {
    /// Dual vector, physical rows.
    pub dual: [f32; R],
    /// Ranges it speaks of.
    pub boxes: Boxes<X>,
    /// Proven shortfall, pu.
    pub shortfall: f32,
}

/// What the trial carries from tick to tick.
#[derive(Clone, Debug)]
pub struct Judgement<const X: usize, const R: usize> {
    candidates: Candidates<R>,
    pause_ticks: u16,
    gap_trend: f32,
    shadow_pause_ticks: u16,
    /// Shortfall proven in this tick with all the help that could come, pu.
    pub proven: f32,
    /// Estimation errors allowed for in this tick.
    pub error: [f32; R],
    /// Row limits of this tick, pu (the shadow narrows the problem's own afterwards).
    pub row_low: [f32; R],
    /// Upper row limits of this tick, pu.
    pub row_high: [f32; R],
    /// Rung the trial speaks of.
    pub rung: Rung,
    /// The strongest proof of this tick.
    pub proof: Proof<X, R>,
}

impl<const X: usize, const R: usize> Judgement<X, R> {
    /// Nothing tried yet.
    pub const fn new() -> Self {
        Self {
            candidates: Candidates::new(),
            pause_ticks: 0,
            gap_trend: 0.0,
            shadow_pause_ticks: 0,
            proven: 0.0,
            error: [0.0; R],
            row_low: [0.0; R],
            row_high: [0.0; R],
            rung: Rung::Keep,
            proof: Proof { dual: [0.0; R], boxes: Boxes::new(), shortfall: 0.0 },
        }
    }
}

impl<const X: usize, const R: usize> Default for Judgement<X, R> {
    fn default() -> Self {
        Self::new()
    }
}

impl<const B: usize, const X: usize, const R: usize> Steward<B, X, R> {
    /// Try this tick's duals: (proven with all help, proven with what is delivered).
    // Not inlined: its temporaries must not lie on the stack of everything else.
    #[inline(never)]
    pub(super) fn judge(&mut self, clear: bool) -> (bool, bool) {
        let mut dual = [0.0; R];
        self.scaled.physical_dual(&self.main.y, &mut dual);
        let candidates = self.judgement.candidates.next(&dual);
        self.judgement.proven = -1.0;
        self.judgement.proof.shortfall = -1.0;
        self.judgement.error = [0.0; R];
        self.judgement.row_low = self.problem.row_low;
        self.judgement.row_high = self.problem.row_high;
        self.judgement.rung = self.ladder.rung();
        if !clear {
            return (false, false);
        }
        self.rows.errors(&self.plan, &self.estimate, &mut self.judgement.error);
        let threshold = self.plan.settings.proof_threshold;
        self.judge_with_all_help(&candidates);
        let hard = self.judgement.proven > threshold;
        let stalled = self.is_agreement_stalled();
        let leaning = self.ladder.rung() != Rung::Keep && stalled;
        // A proof that holds whatever comes is worth more; only without one is this kept.
        let conditional = leaning && !hard && self.judge_help_delivered(&candidates, threshold);
        (hard, conditional)
    }

    #[inline(never)]
    fn judge_with_all_help(&mut self, candidates: &[[f32; R]]) {
        let most = self.with_all_help();
        for candidate in candidates {
            let proven = self.try_on(candidate, &most);
            self.judgement.proven = max(proven, self.judgement.proven);
        }
        self.drop_stale_dual(&most);
    }

    #[inline(never)]
    fn judge_help_delivered(&mut self, candidates: &[[f32; R]], threshold: f32) -> bool {
        let (mut between, mut theirs) = (self.boxes.clone(), self.boxes.clone());
        let steady = self.pin_to_help(&mut between, &mut theirs);
        let mut proven = false;
        for candidate in candidates {
            proven |= self.try_on(candidate, &between) > threshold;
            proven |= steady && self.try_on(candidate, &theirs) > threshold;
        }
        proven
    }

    /// Whether the two ends of the open ties have stopped coming closer.
    ///
    /// While they still do, what is delivered now says nothing of what will be.
    fn is_agreement_stalled(&mut self) -> bool {
        let settings = &self.plan.settings;
        let ends = self.ends.iter().zip(&self.open).filter(|(_, open)| **open);
        let gap = ends.fold(0.0, |sum, (end, _)| {
            let theirs = end.theirs(settings.neighbour_ticks);
            sum + theirs.map_or(0.0, |theirs| apart(end.deviation(), theirs.deviation))
        });
        let trend = &mut self.judgement.gap_trend;
        *trend += min(settings.tick_s / GAP_TREND_S, 1.0) * (gap - *trend);
        gap > CLOSING * *trend
    }

    /// Shortfall that a dual vector proves on some ranges; the strongest is kept as the proof.
    fn try_on(&mut self, dual: &[f32; R], boxes: &Boxes<X>) -> f32 {
        let proven = self.proven(dual, boxes, &self.judgement.error);
        let proof = &mut self.judgement.proof;
        if proven > proof.shortfall {
            // Field by field: no second proof on the stack.
            proof.dual.copy_from_slice(dual);
            proof.boxes.low.copy_from_slice(&boxes.low);
            proof.boxes.high.copy_from_slice(&boxes.high);
            proof.shortfall = proven;
        }
        proven
    }

    /// Shortfall that a dual vector proves on some ranges, the estimates being off by `error`.
    // Not inlined: its temporaries must not lie on the stack of everything else.
    #[inline(never)]
    fn proven(&self, dual: &[f32; R], boxes: &Boxes<X>, error: &[f32; R]) -> f32 {
        let (mut column, mut magnitude) = ([0.0; X], [0.0; X]);
        self.rows.product(&self.plan, &self.network, dual, &mut column, &mut magnitude);
        // Only what is in use: the rounding bound must not depend on the build's capacity.
        let (rows, cols) = (self.plan.rows(), self.plan.cols());
        let product = Product { column: head(&column, cols), magnitude: head(&magnitude, cols) };
        let limits = Rows {
            low: head(&self.judgement.row_low, rows),
            high: head(&self.judgement.row_high, rows),
            error: head(error, rows),
        };
        let ranges = Ranges { low: head(&boxes.low, cols), high: head(&boxes.high, cols) };
        shortfall(head(dual, rows), product, limits, ranges)
    }

    /// Ranges of this rung with every tie that could be open counted as open.
    fn with_all_help(&self) -> Boxes<X> {
        let schedule = self.schedules();
        let asks = self.asks();
        let mut boxes = self.boxes.clone();
        let could = |index: usize| {
            let open = self.open.get(index).copied().unwrap_or(false);
            let pending = |end: &TieEnd| end.is_pending(asks, &self.plan.settings);
            open || self.ends.get(index).is_some_and(pending)
        };
        self.view(&schedule).ties(could, &mut boxes);
        boxes
    }

    /// Ranges narrowed to what the neighbours deliver: between the two ends'
    /// values, and close to the neighbour's own value; true when that is steady.
    fn pin_to_help(&self, middle: &mut Boxes<X>, theirs: &mut Boxes<X>) -> bool {
        let schedule = self.schedules();
        let view = self.view(&schedule);
        let settings = &self.plan.settings;
        let mut steady = true;
        for (index, end) in self.ends.iter().enumerate().take(self.plan.ties.len()) {
            if !self.open.get(index).copied().unwrap_or(false) {
                continue;
            }
            let Some(said) = end.theirs(settings.neighbour_ticks) else {
                continue;
            };
            let (mean, half) = between(end.deviation(), said.deviation);
            let slack = half.map(|half| half + BETWEEN_SLACK);
            view.pin_tie(index, mean, slack, middle);
            let exact = [settings.proof_threshold; 2];
            view.pin_tie(index, said.deviation, exact, theirs);
            let [flow, _] = said.deviation;
            steady &= abs(flow - end.trend()) < STEADY;
        }
        steady
    }

    /// The same for the shadow, whose ties stand still: no price drives its duals.
    // Not inlined: its temporaries must not lie on the stack of everything else.
    #[inline(never)]
    pub(super) fn drop_stale_shadow(&mut self, boxes: &Boxes<X>) {
        let mut dual = [0.0; R];
        self.scaled.physical_dual(&self.shadow.y, &mut dual);
        let plain = self.proven(&dual, boxes, &[0.0; R]);
        self.judgement.shadow_pause_ticks = self.judgement.shadow_pause_ticks.saturating_sub(1);
        let settings = &self.plan.settings;
        let large = max_abs(&self.shadow.y) > SHADOW_STALE_SHARE * settings.dual_clamp;
        if large && plain < STALE_SLACK && self.judgement.shadow_pause_ticks == 0 {
            self.judgement.shadow_pause_ticks = (STALE_PAUSE_S / settings.tick_s) as u16;
            self.shadow.reset();
        }
    }

    /// After a long impossible spell the duals may be far out; without open ties
    /// (whose price may be what drives them) they are dropped once the rows are
    /// far from any proof.
    // Not inlined: its temporaries must not lie on the stack of everything else.
    #[inline(never)]
    fn drop_stale_dual(&mut self, most: &Boxes<X>) {
        self.judgement.pause_ticks = self.judgement.pause_ticks.saturating_sub(1);
        let settings = self.plan.settings;
        let large = max_abs(&self.main.y) > STALE_SHARE * settings.dual_clamp;
        if !large || self.open.contains(&true) || self.judgement.pause_ticks > 0 {
            return;
        }
        let mut dual = [0.0; R];
        self.scaled.physical_dual(&self.main.y, &mut dual);
        let plain = self.proven(&dual, most, &[0.0; R]);
        if plain < STALE_SLACK {
            self.main.reset();
            self.judgement.pause_ticks = (STALE_PAUSE_S / settings.tick_s) as u16;
        }
    }
}

/// How far two ends are apart in flow.
fn apart([ours, _]: [f32; 2], [theirs, _]: [f32; 2]) -> f32 {
    abs(ours - theirs)
}

/// The first `count` values, or as many as there are.
fn head(values: &[f32], count: usize) -> &[f32] {
    values.get(..count).unwrap_or(values)
}
