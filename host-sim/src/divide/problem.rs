//! The choice of ties as a problem of its own: small, and quick to evaluate.
//!
//! Contract: in a tree of areas every closed tie is a bridge, so its flow is the
//! surplus of the areas behind it, and the flows inside an area follow from its
//! own injections and its own tie flows alone. Each area is factorised once;
//! after that a choice costs one pass over the lines that answer to ties.
//!
//! Data flow: `Grid`, `BaseCase` -> per area: flows without ties and flows per MW
//! taken at each tie end -> worst loading of any tree.
//! Sign: tie flow positive from `from` to `to`; outflow positive out of the area.

use super::DivideError;
use super::base::{BaseCase, is_tie};
use crate::case::model::Grid;
use crate::grid::sensitivity::Sensitivity;

/// A tie that may be left open or kept.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Tie {
    /// Index of the line in the grid.
    pub line: usize,
    /// Area of its sending end.
    pub from_area: usize,
    /// Area of its receiving end.
    pub to_area: usize,
    /// Continuous rating in MW.
    pub rating_mw: f64,
    /// Row of the sending end among its area's tie ends.
    pub from_end: usize,
    /// Row of the receiving end among its area's tie ends.
    pub to_end: usize,
}

impl Tie {
    /// Row of the tie's end in an area, and the sign that turns its flow into outflow.
    pub fn seen_from(&self, area: usize) -> (usize, f64) {
        if area == self.from_area { (self.from_end, 1.0) } else { (self.to_end, -1.0) }
    }

    /// The area at the other end.
    pub fn across(&self, area: usize) -> usize {
        if area == self.from_area { self.to_area } else { self.from_area }
    }
}

/// How the loadings inside one area answer to its ties.
#[derive(Clone, Debug, PartialEq)]
pub struct AreaFlows {
    /// Lines whose flow depends on the choice of ties.
    pub lines: Vec<usize>,
    /// Their signed loading with the area's surplus taken at its first tie end.
    pub base: Vec<f64>,
    /// Change of signed loading per MW of outflow, by tie end and line.
    pub gain_per_mw: Vec<Vec<f64>>,
    /// Worst loading of the lines that do not answer, and which line.
    pub fixed: (f64, Option<usize>),
}

/// Areas, ties, and how loadings follow from a tree of ties.
#[derive(Clone, Debug, PartialEq)]
pub struct TieProblem {
    /// Ties in the order of the grid's lines.
    pub ties: Vec<Tie>,
    /// Surplus of each area in MW: generation less load.
    pub surplus_mw: Vec<f64>,
    /// Loadings inside each area.
    pub areas: Vec<AreaFlows>,
}

/// The worst loading of a choice and the line that has it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Worst {
    /// Flow over continuous rating.
    pub loading: f64,
    /// Index of the line in the grid; none if nothing is loaded.
    pub line: Option<usize>,
}

impl TieProblem {
    /// Prepare the problem of a grid with areas.
    ///
    /// Errors: a network without solution.
    pub fn new(grid: &Grid, base: &BaseCase) -> Result<Self, DivideError> {
        let mut surplus_mw = vec![0.0; grid.areas.len()];
        for (bus, injection) in grid.buses.iter().zip(&base.injection_mw) {
            surplus_mw[bus.area] += injection;
        }
        let mut ends: Vec<Vec<usize>> = vec![Vec::new(); grid.areas.len()];
        let mut row_of = |bus: usize| {
            let list = &mut ends[grid.buses[bus].area];
            list.iter().position(|&known| known == bus).unwrap_or_else(|| {
                list.push(bus);
                list.len() - 1
            })
        };
        let mut ties = Vec::new();
        for line in (0..grid.lines.len()).filter(|&line| base.closed[line] && is_tie(grid, line)) {
            let data = &grid.lines[line];
            ties.push(Tie {
                line,
                from_area: grid.buses[data.from].area,
                to_area: grid.buses[data.to].area,
                rating_mw: data.rating_mw,
                from_end: row_of(data.from),
                to_end: row_of(data.to),
            });
        }
        let areas = (0..grid.areas.len())
            .map(|area| area_flows(grid, base, area, &ends[area]))
            .collect::<Result<_, _>>()?;
        Ok(Self { ties, surplus_mw, areas })
    }

    /// End areas of every tie.
    pub fn tie_areas(&self) -> Vec<(usize, usize)> {
        self.ties.iter().map(|tie| (tie.from_area, tie.to_area)).collect()
    }

    /// Flow of each tie of a tree, in the tree's order.
    ///
    /// Units: MW.
    pub fn tree_flows_mw(&self, tree: &[usize]) -> Vec<f64> {
        let mut rest_mw = self.surplus_mw.clone();
        let mut degree = vec![0_usize; rest_mw.len()];
        // The exclusive or of the positions around an area names the last one left.
        let mut last = vec![0_usize; rest_mw.len()];
        for (position, &tie) in tree.iter().enumerate() {
            for area in [self.ties[tie].from_area, self.ties[tie].to_area] {
                degree[area] += 1;
                last[area] ^= position;
            }
        }
        let mut flow_mw = vec![0.0; tree.len()];
        let mut leaves: Vec<usize> = (0..degree.len()).filter(|&area| degree[area] == 1).collect();
        // Bounded: each step takes one area off the tree.
        while let Some(area) = leaves.pop() {
            if degree[area] != 1 {
                continue;
            }
            let position = last[area];
            let tie = &self.ties[tree[position]];
            let other = tie.across(area);
            flow_mw[position] = tie.seen_from(area).1 * rest_mw[area];
            rest_mw[other] += rest_mw[area];
            degree[area] = 0;
            degree[other] -= 1;
            last[other] ^= position;
            if degree[other] == 1 {
                leaves.push(other);
            }
        }
        flow_mw
    }

    /// Worst loading after switching to a tree of ties.
    ///
    /// Cost: lines that answer to ties, times closed ties of their area.
    pub fn worst(&self, tree: &[usize]) -> Worst {
        self.worst_and_pressure(tree).0
    }

    /// Worst loading, and the sum of the eighth powers of all loadings: which of
    /// two choices with the same worst line strains the others less.
    pub fn worst_and_pressure(&self, tree: &[usize]) -> (Worst, f64) {
        let flow_mw = self.tree_flows_mw(tree);
        let mut worst = Worst { loading: 0.0, line: None };
        let mut take = |loading: f64, line: Option<usize>| {
            // Of lines in series, equal but for rounding, the first is named.
            if loading > worst.loading * (1.0 + 1e-12) {
                worst.line = line;
            }
            worst.loading = worst.loading.max(loading);
        };
        for (&tie, flow) in tree.iter().zip(&flow_mw) {
            take(flow.abs() / self.ties[tie].rating_mw, Some(self.ties[tie].line));
        }
        let mut loading = Vec::new();
        let mut pressure = 0.0;
        for (area, flows) in self.areas.iter().enumerate() {
            take(flows.fixed.0, flows.fixed.1);
            loading.clear();
            loading.extend_from_slice(&flows.base);
            for (&tie, flow) in tree.iter().zip(&flow_mw) {
                let tie = &self.ties[tie];
                if tie.from_area == area || tie.to_area == area {
                    let (end, sign) = tie.seen_from(area);
                    let outflow_mw = sign * flow;
                    for (value, gain) in loading.iter_mut().zip(&flows.gain_per_mw[end]) {
                        *value += gain * outflow_mw;
                    }
                }
            }
            for (value, &line) in loading.iter().zip(&flows.lines) {
                take(value.abs(), Some(line));
            }
            pressure += loading.iter().map(|value| (value * value).powi(4)).sum::<f64>();
        }
        (worst, pressure)
    }

    /// Steps (a line times a tie) that one evaluation takes, about.
    pub fn evaluation_work(&self) -> u64 {
        let lines: usize = self.areas.iter().map(|area| area.lines.len()).sum();
        3 * lines as u64 + 10 * self.surplus_mw.len() as u64
    }

    /// No tie of any tree carries more than this, in MW.
    pub fn flow_mw_most(&self) -> f64 {
        self.surplus_mw.iter().filter(|&&surplus| surplus > 0.0).sum()
    }

    /// Worst loading of the lines that answer to no tie: a bound for every choice.
    pub fn fixed_loading(&self) -> f64 {
        self.areas.iter().fold(0.0, |most, area| area.fixed.0.max(most))
    }
}

/// The buses and internal lines in service of one area, as a grid, with the lines' indices.
pub(super) fn area_grid(
    grid: &Grid,
    closed: &[bool],
    area: usize,
) -> (Grid, Vec<usize>, Vec<usize>) {
    let mut local = vec![usize::MAX; grid.buses.len()];
    let mut buses = Vec::new();
    for bus in (0..grid.buses.len()).filter(|&bus| grid.buses[bus].area == area) {
        local[bus] = buses.len();
        buses.push(bus);
    }
    let inside = |line: &usize| {
        let line = &grid.lines[*line];
        local[line.from] != usize::MAX && local[line.to] != usize::MAX
    };
    let lines: Vec<usize> =
        (0..grid.lines.len()).filter(|&line| closed[line]).filter(inside).collect();
    let part = Grid {
        name: grid.name.clone(),
        base_mva: grid.base_mva,
        nominal_hz: grid.nominal_hz,
        areas: vec![grid.areas[area].clone()],
        buses: buses.iter().map(|&bus| grid.buses[bus].clone()).collect(),
        lines: lines
            .iter()
            .map(|&line| {
                let mut copy = grid.lines[line].clone();
                (copy.from, copy.to) = (local[copy.from], local[copy.to]);
                copy
            })
            .collect(),
        units: Vec::new(),
        feeders: Vec::new(),
    };
    (part, buses, lines)
}

fn area_flows(
    grid: &Grid,
    base: &BaseCase,
    area: usize,
    ends: &[usize],
) -> Result<AreaFlows, DivideError> {
    let (part, buses, lines) = area_grid(grid, &base.closed, area);
    let local = |bus: usize| buses.binary_search(&bus).unwrap_or(0);
    // The reference must be a tie end, so that a line that no tie end reaches is fixed.
    let reference = ends.first().map_or(0, |&bus| local(bus));
    let sensitivity = Sensitivity::new(&part, &vec![true; lines.len()])?;
    let mut injection_mw: Vec<f64> = buses.iter().map(|&bus| base.injection_mw[bus]).collect();
    injection_mw[reference] -= injection_mw.iter().sum::<f64>();
    let flow_mw = sensitivity.network().flows_mw(&injection_mw)?.flow_mw;
    let columns = ends
        .iter()
        .map(|&bus| match local(bus) {
            sink if sink == reference => Ok(vec![0.0; lines.len()]),
            sink => sensitivity.transfer_column(reference, sink),
        })
        .collect::<Result<Vec<_>, _>>()?;
    let mut flows = AreaFlows {
        lines: Vec::new(),
        base: Vec::new(),
        gain_per_mw: vec![Vec::new(); ends.len()],
        fixed: (0.0, None),
    };
    for (row, &line) in lines.iter().enumerate() {
        let rating_mw = grid.lines[line].rating_mw;
        let loading = flow_mw[row] / rating_mw;
        if rating_mw.is_infinite() || columns.iter().all(|column| column[row] == 0.0) {
            if loading.abs() > flows.fixed.0 {
                flows.fixed = (loading.abs(), Some(line));
            }
            continue;
        }
        flows.lines.push(line);
        flows.base.push(loading);
        for (gains, column) in flows.gain_per_mw.iter_mut().zip(&columns) {
            gains.push(column[row] / rating_mw);
        }
    }
    Ok(flows)
}
