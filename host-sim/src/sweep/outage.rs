//! What can go: lines and units, one at a time or two lines together.
//!
//! Contract: only what is in service in the grid counts; the order is the file's,
//! lines before units. The name is what `--only` takes.

use crate::case::model::{Grid, UnitStatus};

/// An outage.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Outage {
    /// A line opens.
    Line(usize),
    /// A unit trips.
    Unit(usize),
    /// Two lines open together.
    Lines(usize, usize),
}

impl Outage {
    /// Its name: `line A1-A2`, `unit G3`, `lines A1-A2 + A2-A3`.
    pub fn name(self, grid: &Grid) -> String {
        match self {
            Outage::Line(l) => format!("line {}", grid.lines[l].name),
            Outage::Unit(u) => format!("unit {}", grid.units[u].name),
            Outage::Lines(a, b) => {
                format!("lines {} + {}", grid.lines[a].name, grid.lines[b].name)
            }
        }
    }

    /// Lines that open.
    pub fn lines(self) -> Vec<usize> {
        match self {
            Outage::Line(l) => vec![l],
            Outage::Unit(_) => Vec::new(),
            Outage::Lines(a, b) => vec![a, b],
        }
    }

    /// Unit that trips.
    pub fn unit(self) -> Option<usize> {
        match self {
            Outage::Unit(u) => Some(u),
            Outage::Line(_) | Outage::Lines(..) => None,
        }
    }

    /// Area the outage happens in; none for a tie or for lines of two areas.
    pub fn area(self, grid: &Grid) -> Option<usize> {
        let of = |l: usize| {
            let (a, b) = (grid.buses[grid.lines[l].from].area, grid.buses[grid.lines[l].to].area);
            (a == b).then_some(a)
        };
        match self {
            Outage::Line(l) => of(l),
            Outage::Unit(u) => Some(grid.buses[grid.units[u].bus].area),
            Outage::Lines(a, b) => of(a).filter(|area| of(b) == Some(*area)),
        }
    }
}

/// All single line outages.
pub fn lines(grid: &Grid) -> Vec<Outage> {
    (0..grid.lines.len()).filter(|&l| grid.lines[l].closed).map(Outage::Line).collect()
}

/// All single unit outages.
pub fn units(grid: &Grid) -> Vec<Outage> {
    (0..grid.units.len())
        .filter(|&u| grid.units[u].status != UnitStatus::Off)
        .map(Outage::Unit)
        .collect()
}

/// All single outages, lines first.
pub fn singles(grid: &Grid) -> Vec<Outage> {
    let mut out = lines(grid);
    out.extend(units(grid));
    out
}
