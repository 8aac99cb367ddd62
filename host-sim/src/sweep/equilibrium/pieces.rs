//! Who is there after an outage: the piece each steward keeps, and the live ties.
//!
//! Contract: an area may have been cut; its main piece (most generating
//! capacity, then most buses, then the file's order) is its steward's. Pieces cut
//! off but joined to another area's main piece are `Detached`, the rest `Outside`.

use crate::grid::graph::components;
use crate::sweep::prepare::is_tie;
use crate::sweep::state::State;

/// What a bus is to the stewards.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Role {
    /// In the piece its steward keeps.
    Main,
    /// Cut from its area, but joined to another one.
    Detached,
    /// In an island without any main piece, or black.
    Outside,
}

/// Pieces of all areas.
#[derive(Clone, Debug)]
pub(super) struct Pieces {
    /// Role of each bus.
    pub(super) role: Vec<Role>,
    /// First main bus of each area.
    pub(super) first_bus: Vec<Option<usize>>,
    /// Closed ties between two main pieces.
    pub(super) live_tie: Vec<bool>,
    /// Group of areas that share an angle reference.
    pub(super) angle_group: Vec<usize>,
}

impl Pieces {
    /// Find them.
    pub(super) fn of(state: &State) -> Pieces {
        let grid = &state.case.grid;
        let ends = crate::grid::line_ends(grid);
        let inside: Vec<bool> =
            (0..ends.len()).map(|l| state.closed[l] && !is_tie(grid, l)).collect();
        let (piece, count) = components(grid.buses.len(), &ends, &inside);
        let main = main_pieces(state, &piece, count);
        let is_main =
            |b: usize| state.island[b].is_some() && main[grid.buses[b].area] == Some(piece[b]);
        let mut governed = vec![false; state.islands];
        for b in (0..piece.len()).filter(|&b| is_main(b)) {
            if let Some(island) = state.island[b] {
                governed[island] = true;
            }
        }
        let role: Vec<Role> = (0..piece.len())
            .map(|b| match state.island[b] {
                Some(_) if is_main(b) => Role::Main,
                Some(island) if governed[island] => Role::Detached,
                _ => Role::Outside,
            })
            .collect();
        let first_bus = (0..grid.areas.len())
            .map(|a| (0..role.len()).find(|&b| grid.buses[b].area == a && role[b] == Role::Main))
            .collect();
        let live_tie: Vec<bool> = (0..ends.len())
            .map(|l| {
                let main = |b: usize| role[b] == Role::Main;
                is_tie(grid, l) && state.closed[l] && main(ends[l].0) && main(ends[l].1)
            })
            .collect();
        let area_ends: Vec<(usize, usize)> =
            ends.iter().map(|&(a, b)| (grid.buses[a].area, grid.buses[b].area)).collect();
        let joins: Vec<bool> = live_tie
            .iter()
            .zip(&state.case.meshed)
            .map(|(&live, &meshed)| live && meshed)
            .collect();
        let (angle_group, _) = components(grid.areas.len(), &area_ends, &joins);
        Pieces { role, first_bus, live_tie, angle_group }
    }

    /// Ties open to help at these rungs: near enough to an area that leans.
    pub(super) fn open_ties(&self, state: &State, rungs: &[u8], hops: u8) -> Vec<bool> {
        let grid = &state.case.grid;
        let ends =
            |l: usize| (grid.buses[grid.lines[l].from].area, grid.buses[grid.lines[l].to].area);
        let ties: Vec<usize> = (0..self.live_tie.len()).filter(|&l| self.live_tie[l]).collect();
        let mut distance: Vec<usize> =
            rungs.iter().map(|&r| if r >= 1 { 0 } else { usize::MAX }).collect();
        for _ in 0..rungs.len() {
            for &l in &ties {
                let (a, b) = ends(l);
                distance[a] = distance[a].min(distance[b].saturating_add(1));
                distance[b] = distance[b].min(distance[a].saturating_add(1));
            }
        }
        let near = |a: usize| distance[a] <= usize::from(hops);
        (0..self.live_tie.len())
            .map(|l| self.live_tie[l] && near(ends(l).0) && near(ends(l).1))
            .collect()
    }
}

fn main_pieces(state: &State, piece: &[usize], count: usize) -> Vec<Option<usize>> {
    let grid = &state.case.grid;
    let mut capacity_mva = vec![0.0; count];
    let mut size = vec![0_usize; count];
    for (unit, u) in grid.units.iter().enumerate().filter(|(u, _)| state.unit_in[*u]) {
        let _ = unit;
        capacity_mva[piece[u.bus]] += u.rating_mva;
    }
    piece.iter().for_each(|&p| size[p] += 1);
    let mut main: Vec<Option<usize>> = vec![None; grid.areas.len()];
    for bus in (0..piece.len()).filter(|&b| state.island[b].is_some()) {
        let (area, own) = (grid.buses[bus].area, piece[bus]);
        let better = main[area]
            .is_none_or(|best| (capacity_mva[own], size[own]) > (capacity_mva[best], size[best]));
        if better {
            main[area] = Some(own);
        }
    }
    main
}
