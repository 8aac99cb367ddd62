//! What a division costs: standing angles, points of separation, redundancy.
//!
//! Contract: facts of the divided grid at its base case; a side of a closed tie is
//! everything that its trip would cut off there. Room is what available units may
//! still rise or fall within their normal range.
//! Sign: surplus positive where a side generates more than it uses.

use super::base::{BaseCase, is_tie};
use crate::case::model::{Grid, UnitStatus};
use crate::grid::graph::{blocks, components};
use crate::grid::line_ends;

/// An opened tie.
#[derive(Clone, Debug, PartialEq)]
pub struct OpenedTie {
    /// The line.
    pub line: usize,
    /// Its flow before, in MW.
    pub flow_before_mw: f64,
    /// Angle between its ends before, in degrees.
    pub angle_before_deg: f64,
    /// Angle standing across it when open, in degrees.
    pub angle_after_deg: f64,
}

/// One side of a closed tie, should it trip.
#[derive(Clone, Debug, PartialEq)]
pub struct SideOfTie {
    /// Areas on this side.
    pub areas: Vec<usize>,
    /// Load in MW.
    pub load_mw: f64,
    /// Generation less load in MW.
    pub surplus_mw: f64,
    /// Stored kinetic energy of its units in MW s.
    pub inertia_mws: f64,
    /// Reserve that its available units keep free above, in MW.
    pub reserve_up_mw: f64,
    /// What its available units may rise within their normal range, in MW.
    pub room_up_mw: f64,
    /// What they may fall, in MW.
    pub room_down_mw: f64,
    /// Largest unit in service by base point.
    pub largest_unit: Option<usize>,
}

impl SideOfTie {
    /// Whether its units can make up for the surplus within their normal range.
    pub fn can_balance(&self) -> bool {
        self.surplus_mw <= self.room_down_mw + 1e-6 && -self.surplus_mw <= self.room_up_mw + 1e-6
    }
}

/// A closed tie: a single point of separation.
#[derive(Clone, Debug, PartialEq)]
pub struct ClosedTie {
    /// The line.
    pub line: usize,
    /// Its flow before, in MW.
    pub flow_before_mw: f64,
    /// Its flow after, in MW.
    pub flow_after_mw: f64,
    /// Its loading after.
    pub loading: f64,
    /// The sides its trip would leave: that of `from`, that of `to`.
    pub sides: [SideOfTie; 2],
}

/// What the division costs.
#[derive(Clone, Debug, PartialEq)]
pub struct Price {
    /// Opened ties in file order.
    pub opened: Vec<OpenedTie>,
    /// Closed ties in file order.
    pub closed: Vec<ClosedTie>,
    /// Lines whose outage did not split the network before and does now.
    pub lost_to_n1: Vec<usize>,
}

/// Gather it.
pub fn price(grid: &Grid, before: &BaseCase, after: &BaseCase) -> Price {
    let ends = line_ends(grid);
    let angle_deg = |base: &BaseCase, line: usize| {
        (base.angle_rad[ends[line].0] - base.angle_rad[ends[line].1]).to_degrees()
    };
    let ties = || (0..ends.len()).filter(|&line| before.closed[line] && is_tie(grid, line));
    let bridge_before = blocks(grid.buses.len(), &ends, &before.closed).is_bridge;
    let bridge_after = blocks(grid.buses.len(), &ends, &after.closed).is_bridge;
    Price {
        opened: ties()
            .filter(|&line| !after.closed[line])
            .map(|line| OpenedTie {
                line,
                flow_before_mw: before.flow_mw[line],
                angle_before_deg: angle_deg(before, line),
                angle_after_deg: angle_deg(after, line),
            })
            .collect(),
        closed: ties()
            .filter(|&line| after.closed[line])
            .map(|line| ClosedTie {
                line,
                flow_before_mw: before.flow_mw[line],
                flow_after_mw: after.flow_mw[line],
                loading: after.loading(grid, line),
                sides: sides(grid, after, line),
            })
            .collect(),
        lost_to_n1: (0..ends.len())
            .filter(|&line| bridge_after[line] && !bridge_before[line])
            .collect(),
    }
}

fn sides(grid: &Grid, after: &BaseCase, line: usize) -> [SideOfTie; 2] {
    let mut closed = after.closed.clone();
    closed[line] = false;
    let group = components(grid.buses.len(), &line_ends(grid), &closed).0;
    let data = &grid.lines[line];
    [data.from, data.to].map(|end| side(grid, after, &|bus| group[bus] == group[end]))
}

fn side(grid: &Grid, after: &BaseCase, here: &dyn Fn(usize) -> bool) -> SideOfTie {
    let mut side = SideOfTie {
        areas: Vec::new(),
        load_mw: 0.0,
        surplus_mw: 0.0,
        inertia_mws: 0.0,
        reserve_up_mw: 0.0,
        room_up_mw: 0.0,
        room_down_mw: 0.0,
        largest_unit: None,
    };
    for bus in (0..grid.buses.len()).filter(|&bus| here(bus)) {
        let area = grid.buses[bus].area;
        if !side.areas.contains(&area) {
            side.areas.push(area);
        }
        side.load_mw += grid.buses[bus].load_mw;
        side.surplus_mw += after.injection_mw[bus];
    }
    side.areas.sort_unstable();
    for (index, unit) in grid.units.iter().enumerate().filter(|(_, unit)| here(unit.bus)) {
        if unit.status == UnitStatus::Off {
            continue;
        }
        side.inertia_mws += unit.inertia_s * unit.rating_mva;
        if side.largest_unit.is_none_or(|known| unit.base_mw > grid.units[known].base_mw) {
            side.largest_unit = Some(index);
        }
        if unit.status == UnitStatus::Available {
            side.reserve_up_mw += unit.reserve_up_mw;
            side.room_up_mw += unit.max_mw - unit.base_mw;
            side.room_down_mw += unit.base_mw - unit.min_mw;
        }
    }
    side
}
