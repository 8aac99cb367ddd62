//! The shape of this tick's problem: ranges, open columns, scaling, limits.
//!
//! Contract: the scaling is built again only when rows or open columns changed,
//! and then keeps the physical duals; ranges, targets, prices and row limits are
//! written every tick.

use super::Steward;
use super::ranges::{Boxes, View};
use crate::law::kernel::{clip, put};
use crate::law::scale::Column;
use hedgerow_protocol::limits::TIES_MAX;

impl<const B: usize, const X: usize, const R: usize> Steward<B, X, R> {
    pub(super) fn view<'a>(&'a self, schedule: &'a [f32; TIES_MAX]) -> View<'a, B, X, R> {
        View {
            plan: &self.plan,
            network: &self.network,
            measured: &self.measured,
            rows: &self.rows,
            feeders: &self.feeders,
            schedule,
        }
    }

    pub(super) fn refresh_boxes(&mut self) {
        let schedule = self.schedules();
        let mut boxes = Boxes::new();
        let view = self.view(&schedule);
        view.actuators(self.ladder.rung(), &mut boxes);
        view.ties(|index| self.open.get(index).copied().unwrap_or(false), &mut boxes);
        self.boxes = boxes;
    }

    /// Which columns are open; true when that has changed.
    pub(super) fn update_kinds(&mut self) -> bool {
        let schedule = self.schedules();
        let mut kinds = [Column::Closed; X];
        self.view(&schedule).columns(&self.boxes, &mut kinds);
        let changed = kinds != self.kinds;
        self.kinds = kinds;
        changed
    }

    /// New rows or open columns: fill and scale again, keeping the physical duals.
    // Not inlined: its temporaries must not lie on the stack of everything else.
    #[inline(never)]
    pub(super) fn rebuild(&mut self) {
        let (mut main, mut shadow) = ([0.0; R], [0.0; R]);
        self.scaled.physical_dual(&self.main.y, &mut main);
        self.scaled.physical_dual(&self.shadow.y, &mut shadow);
        self.fill_costs();
        self.rows.fill(&self.plan, &self.network, self.scaled.matrix_mut());
        let (cols, rows, eqs) = (self.plan.cols(), self.plan.rows(), self.plan.eqs());
        let kinds = self.kinds;
        let used = kinds.get(..cols).unwrap_or_default();
        let flows = self.plan.tie_col(0)..self.plan.angle_col(0);
        self.scaled.scale(&self.problem.curvature, used, rows, eqs, flows);
        let mut scaled = [0.0; R];
        self.scaled.scaled_dual(&main, &mut scaled);
        clamp_dual(&mut scaled, self.plan.settings.dual_clamp);
        self.main.set_dual(&scaled);
        self.scaled.scaled_dual(&shadow, &mut scaled);
        clamp_dual(&mut scaled, self.plan.settings.dual_clamp);
        self.shadow.set_dual(&scaled);
    }

    /// The part of the problem that does not change from tick to tick.
    pub(super) fn fill_costs(&mut self) {
        let settings = &self.plan.settings;
        let units = self.plan.units.len();
        for (index, unit) in self.plan.units.iter().enumerate() {
            put(&mut self.problem.curvature, index, unit.cost);
            put(&mut self.problem.weight, index, 0.0);
        }
        for (index, feeder) in self.plan.feeders.iter().enumerate() {
            put(&mut self.problem.curvature, units + index, feeder.curvature);
            put(&mut self.problem.weight, units + index, feeder.price);
        }
        for tie in 0..self.plan.ties.len() {
            let curvature = settings.tie_curvature + settings.agreement_penalty;
            let (flow, angle) = (self.plan.tie_col(tie), self.plan.angle_col(tie));
            put(&mut self.problem.curvature, flow, curvature);
            put(&mut self.problem.curvature, angle, curvature);
            put(&mut self.problem.weight, flow, settings.tie_price);
            put(&mut self.problem.weight, angle, 0.0);
        }
    }

    /// The part that does: ranges, targets, prices, row limits.
    pub(super) fn fill_problem(&mut self) {
        let schedule = self.schedules();
        self.problem.low = self.boxes.low;
        self.problem.high = self.boxes.high;
        for (index, base) in self.base.iter().enumerate().take(self.plan.units.len()) {
            put(&mut self.problem.target, index, base.now);
        }
        let prices = self.plan.ties.iter().zip(&self.ends).zip(&self.open).enumerate();
        for (index, ((tie, end), &open)) in prices {
            let [flow, angle] = if open { end.price() } else { [0.0; 2] };
            let flow = if tie.from_end { flow } else { -flow };
            put(&mut self.problem.price, self.plan.tie_col(index), flow);
            put(&mut self.problem.price, self.plan.angle_col(index), angle);
        }
        self.rows.limits(
            &self.plan,
            &self.network,
            &self.estimate.part,
            &schedule,
            &mut self.problem,
        );
    }
}

fn clamp_dual(y: &mut [f32], clamp: f32) {
    for value in y {
        *value = clip(*value, -clamp, clamp);
    }
}
