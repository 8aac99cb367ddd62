//! The physical rows of the area's problem: what they are, and their product with a dual vector.
//!
//! Contract: the rows are a function of plan, network and tie statuses only; the
//! rung changes ranges, never rows. A row whose tie is out is dead: all zero.
//!
//! | row | left side, in the unknowns | right side |
//! |---|---|---|
//! | balance | sum u - sum dt | load + sum of schedules |
//! | angle of tie j | k (G_j - G_ref - (x_j mu_j - x_ref mu_ref)) | k (agreed - measured load part) |
//! | line e | R_u u + R_t dt | within rating of the load part and the schedules' part |
//!
//! `G_j(u, dt) = X[k_j, :] (u - dt) - (x_j / 2) dt_j`; `k = 1 / mean(x)` puts
//! angle rows into pu power. The mid-tie angle relative to the first meshed tie
//! replaces a common angle reference, so only local data are needed.

use crate::law::kernel::{abs, at, put};
use crate::law::limits::Problem;
use crate::network::{LoadPart, Network};
use crate::plan::Plan;
use heapless::Vec;
use hedgerow_protocol::limits::TIES_MAX;
use nalgebra::SMatrix;

/// Which ties take part, and how the angle rows pair them.
#[derive(Clone, Debug)]
pub struct Rows {
    /// Whether each tie is closed and sits on the kept piece.
    pub attached: [bool; TIES_MAX],
    /// Meshed ties with an angle row, in row order.
    pub angles: Vec<usize, TIES_MAX>,
    /// Meshed tie to which the others' angles are relative.
    pub reference: Option<usize>,
    /// Factor that puts angle rows into pu power.
    pub angle_scale: f32,
}

/// Half-done product: what one tie's own reactance adds.
struct TieShare {
    deviation: f32,
    angle: f32,
}

impl Rows {
    /// No ties.
    pub const fn new() -> Self {
        Self { attached: [false; TIES_MAX], angles: Vec::new(), reference: None, angle_scale: 0.0 }
    }

    /// Choose the rows for the present topology.
    pub fn choose<const B: usize, const X: usize, const R: usize>(
        &mut self,
        plan: &Plan<B, X, R>,
        network: &Network<B, R>,
        tie_closed: &[bool; TIES_MAX],
    ) {
        *self = Self::new();
        let (mut sum, mut count) = (0.0, 0.0);
        for (index, (tie, &closed)) in plan.ties.iter().zip(tie_closed).enumerate() {
            let attached = closed && network.is_kept(tie.bus.into());
            if let Some(slot) = self.attached.get_mut(index) {
                *slot = attached;
            }
            if !(attached && tie.meshed) {
                continue;
            }
            sum += tie.reactance;
            count += 1.0;
            if self.reference.is_none() {
                self.reference = Some(index);
            } else if self.angles.push(index).is_err() {
                break;
            }
        }
        self.angle_scale = if sum > 0.0 { count / sum } else { 1.0 };
    }

    /// Whether a tie takes part.
    pub fn is_attached(&self, tie: usize) -> bool {
        self.attached.get(tie).copied().unwrap_or(false)
    }

    /// Whether a tie's mid-angle is an unknown.
    pub fn has_angle(&self, tie: usize) -> bool {
        !self.angles.is_empty() && (self.reference == Some(tie) || self.angles.contains(&tie))
    }

    /// Weight of an injection at each bus in a row: the row's product with any injection.
    fn weights<const B: usize, const X: usize, const R: usize>(
        &self,
        plan: &Plan<B, X, R>,
        network: &Network<B, R>,
        row: usize,
        out: &mut [f32; B],
    ) {
        *out = [0.0; B];
        let columns = &network.x().data.0;
        if row == 0 {
            for (bus, value) in out.iter_mut().enumerate() {
                *value = if network.is_kept(bus) { 1.0 } else { 0.0 };
            }
        } else if let Some((tie, reference)) = self.pair(plan, row) {
            let (Some(a), Some(b)) = (columns.get(tie.0), columns.get(reference.0)) else {
                return;
            };
            for (value, (x, y)) in out.iter_mut().zip(a.iter().zip(b)) {
                *value = self.angle_scale * (x - y);
            }
        } else if let Some((index, line)) = row
            .checked_sub(plan.eqs())
            .and_then(|index| plan.lines.get(index).map(|line| (index, line)))
        {
            let ends = (columns.get(usize::from(line.from)), columns.get(usize::from(line.to)));
            if let (true, (Some(a), Some(b))) = (network.is_live(index, line), ends) {
                for (value, (x, y)) in out.iter_mut().zip(a.iter().zip(b)) {
                    *value = line.susceptance * (x - y);
                }
            }
        }
    }

    /// Bus and half reactance of an angle row's tie and of the reference.
    fn pair<const B: usize, const X: usize, const R: usize>(
        &self,
        plan: &Plan<B, X, R>,
        row: usize,
    ) -> Option<((usize, f32), (usize, f32))> {
        let tie = plan.ties.get(*self.angles.get(row.checked_sub(1)?)?)?;
        let reference = plan.ties.get(self.reference?)?;
        let bus_and_half =
            |tie: &hedgerow_protocol::charter::Tie| (usize::from(tie.bus), 0.5 * tie.reactance);
        Some((bus_and_half(tie), bus_and_half(reference)))
    }

    /// What a tie's own reactance adds to the columns of its deviations in a row.
    fn own_share<const B: usize, const X: usize, const R: usize>(
        &self,
        plan: &Plan<B, X, R>,
        row: usize,
        tie: usize,
    ) -> TieShare {
        let none = TieShare { deviation: 0.0, angle: 0.0 };
        let Some(angle_tie) = row.checked_sub(1).and_then(|index| self.angles.get(index)) else {
            return none;
        };
        let reactance = plan.ties.get(tie).map_or(0.0, |tie| tie.reactance);
        let full = self.angle_scale * reactance;
        if *angle_tie == tie {
            TieShare { deviation: -0.5 * full, angle: -full }
        } else if self.reference == Some(tie) {
            TieShare { deviation: 0.5 * full, angle: full }
        } else {
            none
        }
    }

    /// Fill the physical matrix.
    ///
    /// Cost: rows x (buses + cols) flops; only when the topology has changed.
    pub fn fill<const B: usize, const X: usize, const R: usize>(
        &self,
        plan: &Plan<B, X, R>,
        network: &Network<B, R>,
        matrix: &mut SMatrix<f32, R, X>,
    ) {
        let mut weights = [0.0; B];
        for row in 0..plan.rows().min(R) {
            self.weights(plan, network, row, &mut weights);
            let mut set = |col: usize, value: f32| {
                if let Some(column) = matrix.data.0.get_mut(col) {
                    put(column, row, value);
                }
            };
            for actuator in 0..plan.actuators() {
                let bus = plan.actuator_bus(actuator).unwrap_or(B);
                set(actuator, at(&weights, bus));
            }
            for (index, tie) in plan.ties.iter().enumerate() {
                let share = self.own_share(plan, row, index);
                let (deviation, angle) = if self.is_attached(index) {
                    (share.deviation - at(&weights, tie.bus.into()), share.angle)
                } else {
                    (0.0, 0.0)
                };
                set(plan.tie_col(index), deviation);
                set(plan.angle_col(index), angle);
            }
        }
    }

    /// Product of a dual vector with the physical columns, closed ones included, and with their magnitudes.
    ///
    /// Cost: 4 rows x buses flops.
    pub fn product<const B: usize, const X: usize, const R: usize>(
        &self,
        plan: &Plan<B, X, R>,
        network: &Network<B, R>,
        y: &[f32; R],
        column: &mut [f32; X],
        magnitude: &mut [f32; X],
    ) {
        let (mut sum, mut size, mut weights) = ([0.0; B], [0.0; B], [0.0; B]);
        let (mut own, mut own_size) = ([0.0; X], [0.0; X]);
        for (row, &y) in y.iter().enumerate().take(plan.rows()) {
            self.weights(plan, network, row, &mut weights);
            for ((sum, size), &weight) in sum.iter_mut().zip(&mut size).zip(&weights) {
                let term = y * weight;
                *sum += term;
                *size += abs(term);
            }
            for index in 0..plan.ties.len() {
                let share = self.own_share(plan, row, index);
                for (col, part) in
                    [(plan.tie_col(index), share.deviation), (plan.angle_col(index), share.angle)]
                {
                    let term = y * part;
                    let (total, total_size) =
                        (at(&own, col) + term, at(&own_size, col) + abs(term));
                    put(&mut own, col, total);
                    put(&mut own_size, col, total_size);
                }
            }
        }
        for actuator in 0..plan.actuators() {
            let bus = plan.actuator_bus(actuator).unwrap_or(B);
            put(column, actuator, at(&sum, bus));
            put(magnitude, actuator, at(&size, bus));
        }
        for (index, tie) in plan.ties.iter().enumerate() {
            let (col, angle, bus) =
                (plan.tie_col(index), plan.angle_col(index), usize::from(tie.bus));
            let on = if self.is_attached(index) { 1.0 } else { 0.0 };
            put(column, col, on * (at(&own, col) - at(&sum, bus)));
            put(magnitude, col, on * (at(&own_size, col) + at(&size, bus)));
            put(column, angle, on * at(&own, angle));
            put(magnitude, angle, on * at(&own_size, angle));
        }
    }

    /// Write the row limits of this tick.
    ///
    /// Units: pu. `schedule` is the agreed export of each tie now.
    pub fn limits<const B: usize, const X: usize, const R: usize>(
        &self,
        plan: &Plan<B, X, R>,
        network: &Network<B, R>,
        part: &LoadPart<R>,
        schedule: &[f32; TIES_MAX],
        problem: &mut Problem<X, R>,
    ) {
        // The schedules' part of every flow and angle follows from one set of angles.
        let mut injection = [0.0; B];
        let mut exports = 0.0;
        for (index, (tie, &export)) in plan.ties.iter().zip(schedule).enumerate() {
            if self.is_attached(index) {
                let before = at(&injection, tie.bus.into());
                put(&mut injection, tie.bus.into(), before - export);
                exports += export;
            }
        }
        let mut angle = [0.0; B];
        network.angles(&injection, plan.buses, &mut angle);
        set_both(problem, 0, part.load + exports, part.load + exports);
        for row in 1..plan.eqs() {
            let target = self.angle_target(plan, row, part, schedule, &angle);
            set_both(problem, row, target, target);
        }
        for (index, line) in plan.lines.iter().enumerate() {
            let row = plan.eqs() + index;
            if network.is_live(index, line) {
                let across = at(&angle, line.from.into()) - at(&angle, line.to.into());
                let fixed = at(&part.flow, index) + line.susceptance * across;
                set_both(problem, row, -line.rating - fixed, line.rating - fixed);
            } else {
                set_both(problem, row, 0.0, 0.0);
            }
        }
    }

    fn angle_target<const B: usize, const X: usize, const R: usize>(
        &self,
        plan: &Plan<B, X, R>,
        row: usize,
        part: &LoadPart<R>,
        schedule: &[f32; TIES_MAX],
        angle: &[f32; B],
    ) -> f32 {
        let (Some(&index), Some(reference)) = (self.angles.get(row - 1), self.reference) else {
            return 0.0;
        };
        let fixed = |tie: usize| {
            plan.ties.get(tie).map_or(0.0, |t| {
                t.angle - at(&part.angle, tie) - at(angle, t.bus.into())
                    + 0.5 * t.reactance * at(schedule, tie)
            })
        };
        self.angle_scale * (fixed(index) - fixed(reference))
    }

    /// How far the estimates in each row may be off, pu.
    pub fn errors<const B: usize, const X: usize, const R: usize>(
        &self,
        plan: &Plan<B, X, R>,
        estimate: &crate::measure::Estimate<R>,
        out: &mut [f32; R],
    ) {
        put(out, 0, estimate.load_error);
        let reference = self.reference.map_or(0.0, |tie| at(&estimate.angle_error, tie));
        for row in 1..plan.eqs() {
            let own = self.angles.get(row - 1).map_or(0.0, |&tie| at(&estimate.angle_error, tie));
            put(out, row, self.angle_scale * (own + reference));
        }
        for (slot, &error) in out.iter_mut().skip(plan.eqs()).zip(&estimate.flow_error) {
            *slot = error;
        }
    }
}

impl Default for Rows {
    fn default() -> Self {
        Self::new()
    }
}

fn set_both<const X: usize, const R: usize>(
    problem: &mut Problem<X, R>,
    row: usize,
    low: f32,
    high: f32,
) {
    put(&mut problem.row_low, row, low);
    put(&mut problem.row_high, row, high);
}
