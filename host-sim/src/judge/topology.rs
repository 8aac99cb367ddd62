//! Who is there at the end: pieces of areas, live stewards, ties and their loops.
//!
//! Contract: built once per judgement from the grid and the end of the run.
//! An area may have been cut; its main piece (most generating capacity) is what
//! its steward keeps, the others are `Detached`, or `Alone` when no closed line
//! joins them to any main piece. Ties are meshed when they lay in a loop of
//! areas at the start, since that is what the charters were compiled for.

use nalgebra::{DMatrix, DVector};

use crate::case::model::{Grid, UnitStatus};
use crate::record::{FinalState, Recording, Scheme};

/// What a bus is to the reference.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum BusRole {
    /// In the piece its steward keeps.
    Main,
    /// Cut from its area, but joined to another one.
    Detached,
    /// In an island without any main piece, or black: left out.
    Outside,
}

/// The end of a run as the reference sees it.
#[derive(Clone, Debug)]
pub(super) struct Topology {
    /// Role of each bus.
    pub(super) role: Vec<BusRole>,
    /// First main bus of each area: where its balance is measured.
    pub(super) first_bus: Vec<Option<usize>>,
    /// Whether each area's steward was alive (always, for baselines).
    pub(super) alive: Vec<bool>,
    /// Whether a live piece of the area was cut off.
    pub(super) cut: Vec<bool>,
    /// Whether each line is a tie that lay in a loop of areas at the start.
    pub(super) meshed: Vec<bool>,
    /// Mid-tie angle in the base case, per line (0 for lines that are no ties), in rad.
    pub(super) base_mid_angle: Vec<f64>,
    /// Group of areas that share an angle reference, per area.
    pub(super) angle_group: Vec<usize>,
}

/// Areas at the two ends of a line.
pub(super) fn ends(grid: &Grid, line: usize) -> (usize, usize) {
    let l = &grid.lines[line];
    (grid.buses[l.from].area, grid.buses[l.to].area)
}

/// Whether a line joins two areas.
pub(super) fn is_tie(grid: &Grid, line: usize) -> bool {
    let (a, b) = ends(grid, line);
    a != b
}

impl Topology {
    /// Read it off the end of a run.
    pub(super) fn of(grid: &Grid, recording: &Recording) -> Topology {
        let end = &recording.end;
        let alive: Vec<bool> = (0..grid.areas.len())
            .map(|a| recording.scheme != Scheme::Steward || end.steward_alive[a])
            .collect();
        let piece = pieces(grid, end);
        let main = main_pieces(grid, end, &piece);
        let role = roles(grid, end, &piece, &main);
        let first_bus = (0..grid.areas.len())
            .map(|a| {
                (0..grid.buses.len()).find(|&b| grid.buses[b].area == a && role[b] == BusRole::Main)
            })
            .collect();
        let cut = (0..grid.areas.len())
            .map(|a| {
                (0..grid.buses.len()).any(|b| {
                    grid.buses[b].area == a
                        && end.bus_island[b].is_some()
                        && role[b] != BusRole::Main
                })
            })
            .collect();
        let meshed = meshed_ties(grid);
        let mut topology = Topology {
            role,
            first_bus,
            alive,
            cut,
            meshed,
            base_mid_angle: base_mid_angles(grid),
            angle_group: (0..grid.areas.len()).collect(),
        };
        topology.join_angle_groups(grid, end);
        topology
    }

    /// Whether the reference says nothing of an area.
    pub(super) fn without_reference(&self, area: usize) -> bool {
        self.cut[area] || !self.alive[area] || self.first_bus[area].is_none()
    }

    /// Whether it says nothing of at least one.
    pub(super) fn any_without_reference(&self) -> bool {
        (0..self.alive.len()).any(|a| self.without_reference(a))
    }

    /// Whether a line is a closed tie between two main pieces.
    pub(super) fn is_live_tie(&self, grid: &Grid, end: &FinalState, line: usize) -> bool {
        let l = &grid.lines[line];
        is_tie(grid, line)
            && end.line_closed[line]
            && self.role[l.from] == BusRole::Main
            && self.role[l.to] == BusRole::Main
    }

    /// Whether both ends of a live tie have a steward.
    pub(super) fn both_alive(&self, grid: &Grid, line: usize) -> bool {
        let (a, b) = ends(grid, line);
        self.alive[a] && self.alive[b]
    }

    /// Whether each tie is open to help at the given rungs.
    pub(super) fn open_ties(
        &self,
        grid: &Grid,
        end: &FinalState,
        rungs: &[u8],
        hops: u8,
    ) -> Vec<bool> {
        let carries: Vec<usize> = (0..grid.lines.len())
            .filter(|&l| self.is_live_tie(grid, end, l) && self.both_alive(grid, l))
            .collect();
        let mut distance: Vec<usize> = rungs
            .iter()
            .zip(&self.alive)
            .map(|(&r, &alive)| if r >= 1 && alive { 0 } else { usize::MAX })
            .collect();
        for _ in 0..grid.areas.len() {
            for &l in &carries {
                let (a, b) = ends(grid, l);
                distance[a] = distance[a].min(distance[b].saturating_add(1));
                distance[b] = distance[b].min(distance[a].saturating_add(1));
            }
        }
        let near = |a: usize| distance[a] <= usize::from(hops);
        (0..grid.lines.len())
            .map(|l| carries.contains(&l) && near(ends(grid, l).0) && near(ends(grid, l).1))
            .collect()
    }

    /// Sentences on what has no reference.
    pub(super) fn remarks(&self, grid: &Grid, recording: &Recording) -> Vec<String> {
        let mut out = Vec::new();
        for (a, area) in grid.areas.iter().enumerate() {
            if self.first_bus[a].is_none() {
                out.push(format!("No reference for {}: it has no live bus.", area.name));
            } else if self.cut[a] {
                out.push(format!("No reference for {}: it was cut in pieces.", area.name));
            }
            if !self.alive[a] && recording.scheme == Scheme::Steward {
                out.push(format!(
                    "No reference for {}: its steward is dead at the end.",
                    area.name
                ));
            }
        }
        out
    }

    fn join_angle_groups(&mut self, grid: &Grid, end: &FinalState) {
        for line in 0..grid.lines.len() {
            if self.meshed[line] && self.is_live_tie(grid, end, line) && self.both_alive(grid, line)
            {
                let (a, b) = ends(grid, line);
                let (keep, drop) = (self.angle_group[a], self.angle_group[b]);
                self.angle_group.iter_mut().filter(|g| **g == drop).for_each(|g| *g = keep);
            }
        }
    }
}

/// Label the buses by repeatedly merging over the given lines.
fn labels(bus_count: usize, joins: impl Iterator<Item = (usize, usize)>) -> Vec<usize> {
    let mut label: Vec<usize> = (0..bus_count).collect();
    for (from, to) in joins {
        let (keep, drop) = (label[from].min(label[to]), label[from].max(label[to]));
        label.iter_mut().filter(|l| **l == drop).for_each(|l| *l = keep);
    }
    label
}

/// Piece of each bus within its own area, over closed lines.
fn pieces(grid: &Grid, end: &FinalState) -> Vec<usize> {
    let inside = (0..grid.lines.len()).filter(|&l| !is_tie(grid, l) && end.line_closed[l]);
    labels(grid.buses.len(), inside.map(|l| (grid.lines[l].from, grid.lines[l].to)))
}

/// Piece each steward keeps: most generating capacity (emergency range, as the
/// steward counts it), then most buses, then file order.
fn main_pieces(grid: &Grid, end: &FinalState, piece: &[usize]) -> Vec<Option<usize>> {
    (0..grid.areas.len())
        .map(|a| {
            let mut best: Option<(f64, usize, usize)> = None;
            for b in 0..grid.buses.len() {
                if grid.buses[b].area != a || piece[b] != b || end.bus_island[b].is_none() {
                    continue;
                }
                let capacity_mw: f64 = grid
                    .units
                    .iter()
                    .enumerate()
                    .filter(|(u, unit)| piece[unit.bus] == b && end.unit_in_service[*u])
                    .map(|(_, unit)| unit.emergency_max_mw.max(0.0))
                    .sum();
                let size = piece.iter().filter(|p| **p == b).count();
                if best.is_none_or(|(c, s, _)| capacity_mw > c || (capacity_mw == c && size > s)) {
                    best = Some((capacity_mw, size, b));
                }
            }
            best.map(|(_, _, label)| label)
        })
        .collect()
}

fn roles(grid: &Grid, end: &FinalState, piece: &[usize], main: &[Option<usize>]) -> Vec<BusRole> {
    let is_main = |b: usize| main[grid.buses[b].area] == Some(piece[b]);
    let with_main: Vec<usize> =
        (0..grid.buses.len()).filter(|&b| is_main(b)).filter_map(|b| end.bus_island[b]).collect();
    (0..grid.buses.len())
        .map(|b| match end.bus_island[b] {
            Some(_) if is_main(b) => BusRole::Main,
            Some(island) if with_main.contains(&island) => BusRole::Detached,
            _ => BusRole::Outside,
        })
        .collect()
}

/// A tie is meshed when its two areas stay joined without it.
fn meshed_ties(grid: &Grid) -> Vec<bool> {
    let ties: Vec<usize> =
        (0..grid.lines.len()).filter(|&l| is_tie(grid, l) && grid.lines[l].closed).collect();
    let mut meshed = vec![false; grid.lines.len()];
    for &tie in &ties {
        let others = ties.iter().filter(|&&l| l != tie).map(|&l| ends(grid, l));
        let label = labels(grid.areas.len(), others);
        let (a, b) = ends(grid, tie);
        meshed[tie] = label[a] == label[b];
    }
    meshed
}

/// Mid-tie angles of the base case by one dense solve; the first bus of each
/// connected part is the angle reference and takes up any imbalance of the file.
fn base_mid_angles(grid: &Grid) -> Vec<f64> {
    let n = grid.buses.len();
    let closed = || grid.lines.iter().filter(|l| l.closed);
    let label = labels(n, closed().map(|l| (l.from, l.to)));
    let mut matrix = DMatrix::<f64>::zeros(n, n);
    let mut injection = DVector::<f64>::zeros(n);
    for l in closed() {
        let b = 1.0 / l.reactance_pu;
        matrix[(l.from, l.from)] += b;
        matrix[(l.to, l.to)] += b;
        matrix[(l.from, l.to)] -= b;
        matrix[(l.to, l.from)] -= b;
    }
    for (b, bus) in grid.buses.iter().enumerate() {
        injection[b] -= bus.load_mw / grid.base_mva;
    }
    for unit in grid.units.iter().filter(|u| u.status != UnitStatus::Off) {
        injection[unit.bus] += unit.base_mw / grid.base_mva;
    }
    for b in (0..n).filter(|&b| label[b] == b) {
        matrix.row_mut(b).fill(0.0);
        matrix[(b, b)] = 1.0;
        injection[b] = 0.0;
    }
    let angle = matrix.lu().solve(&injection).unwrap_or_else(|| DVector::zeros(n));
    (0..grid.lines.len())
        .map(|l| match is_tie(grid, l) {
            true => 0.5 * (angle[grid.lines[l].from] + angle[grid.lines[l].to]),
            false => 0.0,
        })
        .collect()
}
