//! What the static programme is made from, and what it may choose at which rung.
//!
//! Contract: ranges come from the grid file and the area's rung alone; a range
//! whose ends are equal is a value that is given, not chosen.
//! Units: pu on the grid's base, unless the name says MW.

use crate::case::model::{FeederKind, Grid, Play, UnitKind, UnitStatus};
use crate::record::FinalState;

use super::topology::{BusRole, Topology};

pub(super) use crate::charter::TIE_CURVATURE;

/// Which sheds the programme may choose.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Sheds {
    /// All of an area at `shed`, those held for the operator too: what is needed is
    /// asked of the grid, not of what happens to be off.
    Free,
    /// As `Free`, but switched and locked feeders stay as they are.
    SwitchedAsTheyStand,
    /// None: everything as recorded.
    AsTheyStand,
}

/// Everything the programme is made from.
#[derive(Clone, Copy, Debug)]
pub(super) struct Setting<'a> {
    /// The grid.
    pub(super) grid: &'a Grid,
    /// The play, for the stewards' settings.
    pub(super) play: &'a Play,
    /// End of the run.
    pub(super) end: &'a FinalState,
    /// What is there.
    pub(super) topology: &'a Topology,
    /// Rung of each area.
    pub(super) rungs: &'a [u8],
    /// Which sheds may be chosen.
    pub(super) sheds: Sheds,
}

impl Setting<'_> {
    /// MW to pu.
    pub(super) fn pu(&self, mw: f64) -> f64 {
        mw / self.grid.base_mva
    }

    /// Point the cost of a unit is measured from, in pu: its base point, 0 for a battery.
    pub(super) fn unit_origin_pu(&self, unit: usize) -> f64 {
        match self.grid.units[unit].kind {
            UnitKind::Battery => 0.0,
            _ => self.pu(self.end.unit_base_mw[unit]),
        }
    }

    /// Ties open to help at these rungs.
    pub(super) fn open_ties(&self) -> Vec<bool> {
        self.topology.open_ties(self.grid, self.end, self.rungs, self.play.steward.help_hops)
    }

    /// Lowest and highest set-point of a unit at its area's rung, in pu; equal when given.
    pub(super) fn unit_range_pu(&self, unit: usize) -> (f64, f64) {
        let u = &self.grid.units[unit];
        let area = self.grid.buses[u.bus].area;
        let given = |mw: f64| (self.pu(mw), self.pu(mw));
        if !self.end.unit_in_service[unit] {
            return (0.0, 0.0);
        }
        if !self.topology.alive[area] || self.topology.role[u.bus] == BusRole::Detached {
            return given(self.end.unit_setpoint_mw[unit]);
        }
        if u.status == UnitStatus::Fixed {
            return given(self.end.unit_base_mw[unit]);
        }
        if self.rungs[area] <= 1 {
            (self.pu(u.min_mw + u.reserve_down_mw), self.pu(u.max_mw - u.reserve_up_mw))
        } else {
            (self.pu(u.emergency_min_mw), self.pu(u.emergency_max_mw))
        }
    }

    /// Least and most load a feeder may take off, in pu; equal when given.
    pub(super) fn shed_range_pu(&self, feeder: usize) -> (f64, f64) {
        let f = &self.grid.feeders[feeder];
        let area = self.grid.buses[f.bus].area;
        let stands = self.pu(self.end.feeder_shed_mw[feeder]);
        let pinned = (self.end.feeder_locked[feeder] && self.sheds != Sheds::Free)
            || self.sheds == Sheds::AsTheyStand
            || (self.sheds == Sheds::SwitchedAsTheyStand && f.kind == FeederKind::Switched)
            || !self.topology.alive[area]
            || self.topology.role[f.bus] == BusRole::Detached;
        if pinned {
            (stands, stands)
        } else if self.rungs[area] >= 3 {
            let most_mw = f.load_mw.min(self.end.bus_load_mw[f.bus]).max(0.0);
            (0.0, self.pu(most_mw))
        } else {
            (0.0, 0.0)
        }
    }

    /// Shed of a feeder that the programme may not choose, in pu.
    ///
    /// Outside the reference it stays as it stands.
    pub(super) fn given_shed_pu(&self, feeder: usize, stands_mw: f64) -> f64 {
        match self.topology.role[self.grid.feeders[feeder].bus] {
            BusRole::Outside => self.pu(stands_mw),
            BusRole::Main | BusRole::Detached => self.shed_range_pu(feeder).0,
        }
    }
}
