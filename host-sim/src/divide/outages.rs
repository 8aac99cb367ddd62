//! What the outage of an internal line does elsewhere, before and after.
//!
//! Contract: before, flow changes come from outage factors of the whole network;
//! after, a line and whatever its outage moves lie in one block, and every block
//! lies inside one area, because closed ties are bridges: outside, the factor is
//! zero by structure. The outages with the largest effect before are solved again
//! from scratch on the divided grid, and the largest change outside is reported
//! as found, rounding included.
//!
//! Data flow: lines inside areas, largest base flow first -> factors -> rows.

use std::collections::BTreeSet;

use super::DivideError;
use super::base::{BaseCase, is_tie};
use super::problem::area_grid;
use crate::case::model::Grid;
use crate::grid::dc::DcNetwork;
use crate::grid::graph::{Blocks, blocks};
use crate::grid::line_ends;
use crate::grid::sensitivity::{Outage, Sensitivity};

/// Outages of the divided grid that are solved again from scratch.
const SOLVED_AGAIN: usize = 20;

/// Effects of one outage on one network.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Effect {
    /// Largest change of flow on a line that is not inside the outage's area, in MW.
    pub outside_mw: f64,
    /// The line that has it.
    pub outside_line: Option<usize>,
    /// Worst loading of any line in reach of the outage.
    pub worst_loading: f64,
    /// The line that has it.
    pub worst_line: Option<usize>,
}

/// One outage, before and after; none = it splits the network.
#[derive(Clone, Debug, PartialEq)]
pub struct OutageRow {
    /// The line that goes out.
    pub line: usize,
    /// Its area.
    pub area: usize,
    /// What it does before the division.
    pub before: Option<Effect>,
    /// What it does after.
    pub after: Option<Effect>,
}

/// A pocket of the divided grid: a block of more than one line, joined to the rest by bridges only.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Pocket {
    /// The area it lies in (of its first line).
    pub area: usize,
    /// Lines in it.
    pub lines: usize,
    /// Buses in it.
    pub buses: usize,
}

/// The pockets of a divided grid and the outages inside them.
#[derive(Clone, Debug, PartialEq)]
pub struct Outages {
    /// Rows, largest effect outside before the division first.
    pub rows: Vec<OutageRow>,
    /// Internal lines that were left out of the table.
    pub left_out: usize,
    /// Lines whose outage splits the network before the division.
    pub bridges_before: Vec<usize>,
    /// The same after it.
    pub bridges_after: Vec<usize>,
    /// Pockets of the divided grid, in the order of their first lines.
    pub pockets: Vec<Pocket>,
    /// Pocket of each line; none for open lines and bridges.
    pub pocket_of_line: Vec<Option<usize>>,
    /// Blocks of the divided grid that reach over an area's border; closed ties apart.
    pub leaks: usize,
    /// Outages that were solved again from scratch on the divided grid.
    pub solved_again: usize,
    /// Largest change outside that the fresh solutions show, in MW.
    pub outside_again_mw: f64,
}

/// Compare outages before and after.
///
/// Cost: one solve of the whole network and one of an area per outage.
/// Errors: a network without solution.
pub fn compare(
    grid: &Grid,
    before: &BaseCase,
    after: &BaseCase,
    most: usize,
    go_on: &mut dyn FnMut(f64) -> bool,
) -> Result<Outages, DivideError> {
    let ends = line_ends(grid);
    let blocks_before = blocks(grid.buses.len(), &ends, &before.closed);
    let blocks_after = blocks(grid.buses.len(), &ends, &after.closed);
    let bridges = |bridge: &[bool]| (0..bridge.len()).filter(|&line| bridge[line]).collect();
    let mut inside: Vec<usize> =
        (0..ends.len()).filter(|&line| after.closed[line] && !is_tie(grid, line)).collect();
    inside.sort_by(|&a, &b| {
        before.flow_mw[b].abs().total_cmp(&before.flow_mw[a].abs()).then(a.cmp(&b))
    });
    let all = inside.len();
    inside.truncate(most);
    let whole = Sensitivity::new(grid, &before.closed)?;
    let mut areas = Vec::new();
    for area in 0..grid.areas.len() {
        areas.push(AreaOutages::new(grid, after, area)?);
    }
    let mut rows = Vec::with_capacity(inside.len());
    for (done, &line) in inside.iter().enumerate() {
        if !go_on(0.9 * done as f64 / inside.len() as f64) {
            break;
        }
        let area = grid.buses[grid.lines[line].from].area;
        rows.push(OutageRow {
            line,
            area,
            before: effect_before(grid, before, &whole, line, area)?,
            after: areas[area].effect(grid, after, line)?,
        });
    }
    let outside = |row: &OutageRow| row.before.map_or(-1.0, |effect| effect.outside_mw);
    rows.sort_by(|a, b| outside(b).total_cmp(&outside(a)).then(a.line.cmp(&b.line)));
    let (solved_again, outside_again_mw) = solve_again(grid, after, &rows)?;
    let (pockets, pocket_of_line) = pockets(grid, &blocks_after);
    Ok(Outages {
        pockets,
        pocket_of_line,
        left_out: all - rows.len(),
        rows,
        bridges_before: bridges(&blocks_before.is_bridge),
        bridges_after: bridges(&blocks_after.is_bridge),
        leaks: leaks(grid, &blocks_after.block_of_edge, blocks_after.count),
        solved_again,
        outside_again_mw,
    })
}

/// Number the blocks of more than one line by their first line.
fn pockets(grid: &Grid, blocks: &Blocks) -> (Vec<Pocket>, Vec<Option<usize>>) {
    let mut number: Vec<Option<usize>> = vec![None; blocks.count];
    let mut members: Vec<BTreeSet<usize>> = Vec::new();
    let mut pockets: Vec<Pocket> = Vec::new();
    let mut of_line = vec![None; grid.lines.len()];
    for (line, block) in blocks.block_of_edge.iter().enumerate() {
        let Some(block) = block.filter(|_| !blocks.is_bridge[line]) else { continue };
        let data = &grid.lines[line];
        let pocket = *number[block].get_or_insert(pockets.len());
        if pocket == pockets.len() {
            pockets.push(Pocket { area: grid.buses[data.from].area, lines: 0, buses: 0 });
            members.push(BTreeSet::new());
        }
        pockets[pocket].lines += 1;
        members[pocket].extend([data.from, data.to]);
        of_line[line] = Some(pocket);
    }
    for (pocket, members) in pockets.iter_mut().zip(members) {
        pocket.buses = members.len();
    }
    (pockets, of_line)
}

/// Blocks with lines in more than one area, or a tie beside other lines.
fn leaks(grid: &Grid, block_of_edge: &[Option<usize>], count: usize) -> usize {
    let mut owner: Vec<Option<Option<usize>>> = vec![None; count];
    let mut leaks = vec![false; count];
    for (line, block) in block_of_edge.iter().enumerate() {
        let Some(block) = *block else { continue };
        let own = (!is_tie(grid, line)).then(|| grid.buses[grid.lines[line].from].area);
        match owner[block] {
            None => owner[block] = Some(own),
            Some(known) => leaks[block] |= known != own || own.is_none(),
        }
    }
    leaks.into_iter().filter(|&leak| leak).count()
}

fn effect_before(
    grid: &Grid,
    base: &BaseCase,
    whole: &Sensitivity,
    line: usize,
    area: usize,
) -> Result<Option<Effect>, DivideError> {
    let Outage::Factors(factors) = whole.outage(line)? else {
        return Ok(None);
    };
    let mut effect =
        Effect { outside_mw: 0.0, outside_line: None, worst_loading: 0.0, worst_line: None };
    for (other, factor) in factors.iter().enumerate() {
        let change_mw = factor * base.flow_mw[line];
        let data = &grid.lines[other];
        let inside = grid.buses[data.from].area == area && grid.buses[data.to].area == area;
        if !inside && change_mw.abs() > effect.outside_mw {
            (effect.outside_mw, effect.outside_line) = (change_mw.abs(), Some(other));
        }
        effect.load(other, (base.flow_mw[other] + change_mw).abs() / data.rating_mw);
    }
    Ok(Some(effect))
}

impl Effect {
    fn load(&mut self, line: usize, loading: f64) {
        if loading > self.worst_loading {
            (self.worst_loading, self.worst_line) = (loading, Some(line));
        }
    }
}

/// Outage factors inside one area of the divided grid.
struct AreaOutages {
    lines: Vec<usize>,
    sensitivity: Sensitivity,
}

impl AreaOutages {
    fn new(grid: &Grid, after: &BaseCase, area: usize) -> Result<Self, DivideError> {
        let (part, _, lines) = area_grid(grid, &after.closed, area);
        let sensitivity = Sensitivity::new(&part, &vec![true; lines.len()])?;
        Ok(Self { lines, sensitivity })
    }

    fn effect(
        &self,
        grid: &Grid,
        base: &BaseCase,
        line: usize,
    ) -> Result<Option<Effect>, DivideError> {
        let Ok(local) = self.lines.binary_search(&line) else {
            return Ok(None);
        };
        let Outage::Factors(factors) = self.sensitivity.outage(local)? else {
            return Ok(None);
        };
        let mut effect =
            Effect { outside_mw: 0.0, outside_line: None, worst_loading: 0.0, worst_line: None };
        for (&other, factor) in self.lines.iter().zip(&factors) {
            let flow_mw = base.flow_mw[other] + factor * base.flow_mw[line];
            effect.load(other, flow_mw.abs() / grid.lines[other].rating_mw);
        }
        Ok(Some(effect))
    }
}

/// Solve the first outages afresh; returns how many and the largest change outside in MW.
fn solve_again(
    grid: &Grid,
    after: &BaseCase,
    rows: &[OutageRow],
) -> Result<(usize, f64), DivideError> {
    let mut largest_mw = 0.0_f64;
    let mut count = 0;
    for row in rows.iter().filter(|row| row.after.is_some()).take(SOLVED_AGAIN) {
        largest_mw = largest_mw.max(change_outside_mw(grid, after, row.line)?);
        count += 1;
    }
    Ok((count, largest_mw))
}

/// Largest change of flow outside a line's area when it goes out, solved from scratch.
///
/// Units: MW.
/// Errors: the outage splits the network, or the network has no solution.
pub fn change_outside_mw(grid: &Grid, base: &BaseCase, line: usize) -> Result<f64, DivideError> {
    let mut closed = base.closed.clone();
    closed[line] = false;
    let flow_mw = DcNetwork::new(grid, &closed)?.flows_mw(&base.injection_mw)?.flow_mw;
    let area = grid.buses[grid.lines[line].from].area;
    let outside = (0..grid.lines.len()).filter(|&other| {
        let data = &grid.lines[other];
        grid.buses[data.from].area != area || grid.buses[data.to].area != area
    });
    Ok(outside.map(|other| (flow_mw[other] - base.flow_mw[other]).abs()).fold(0.0, f64::max))
}
