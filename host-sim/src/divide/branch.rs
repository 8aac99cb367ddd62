//! Splitting the set of trees until the best one is proven.
//!
//! Contract: either the search ends and its best is the optimum, or the budget of
//! work is spent (or the caller stops) and `finished` is false. Work is counted, never timed, so the
//! answer is the same on every machine.
//!
//! Data flow: corridors (all ties between the same two areas) are kept or left
//! out one by one; a corridor that nothing else can replace has a known flow; an
//! area whose corridors are all known has a bound by intervals over its parallel
//! ties; when all are known, the tie of each corridor is chosen the same way.
//! Source: branch and bound after Land and Doig, Econometrica 28(3), 1960.

use super::local::Found;
use super::problem::{TieProblem, Worst};
use crate::grid::graph::blocks;

/// All ties between two areas.
struct Corridor {
    areas: (usize, usize),
    ties: Vec<usize>,
}

/// Whether a corridor is in the tree.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Mark {
    Undecided,
    Kept,
    Out,
}

/// What a search found.
pub struct Outcome {
    /// Best tree known, the starting one included.
    pub best: Found,
    /// Whether it is proven to be the optimum.
    pub finished: bool,
}

/// Search below a known tree, with a bound that lets it end early.
///
/// Cost: at most `work_max` steps of a line times a tie.
pub fn search(
    problem: &TieProblem,
    start: Found,
    base_mw: &[f64],
    bound: f64,
    work_max: u64,
    go_on: &mut dyn FnMut(f64) -> bool,
) -> Outcome {
    let corridors = corridors(problem, base_mw);
    let ends: Vec<(usize, usize)> = corridors.iter().map(|corridor| corridor.areas).collect();
    let mut search = Search {
        problem,
        corridors,
        ends,
        best: start,
        bound,
        work_max,
        work: 0,
        go_on,
        ended: false,
    };
    let mut marks = vec![Mark::Undecided; search.corridors.len()];
    search.split(&mut marks);
    Outcome { best: search.best, finished: !search.ended }
}

/// Corridors, the one with the largest base flow first.
fn corridors(problem: &TieProblem, base_mw: &[f64]) -> Vec<Corridor> {
    let mut out: Vec<Corridor> = Vec::new();
    for (index, tie) in problem.ties.iter().enumerate() {
        let areas = (tie.from_area.min(tie.to_area), tie.from_area.max(tie.to_area));
        match out.iter_mut().find(|corridor| corridor.areas == areas) {
            Some(known) => known.ties.push(index),
            None => out.push(Corridor { areas, ties: vec![index] }),
        }
    }
    let total = |corridor: &Corridor| corridor.ties.iter().map(|&t| base_mw[t].abs()).sum::<f64>();
    out.sort_by(|a, b| total(b).total_cmp(&total(a)));
    out
}

struct Search<'a> {
    problem: &'a TieProblem,
    corridors: Vec<Corridor>,
    ends: Vec<(usize, usize)>,
    best: Found,
    bound: f64,
    work_max: u64,
    work: u64,
    go_on: &'a mut dyn FnMut(f64) -> bool,
    ended: bool,
}

/// A corridor of the tree (or sure to be in it): its flow out of its lower area, and the ties left.
#[derive(Clone)]
struct Sure {
    areas: (usize, usize),
    flow_mw: f64,
    ties: Vec<usize>,
}

impl Search<'_> {
    /// Whether nothing better can come, or no more may be spent.
    fn over(&mut self) -> bool {
        self.ended |= self.work > self.work_max;
        self.ended || self.best.worst.loading <= self.bound * (1.0 + 1e-9)
    }

    /// Split the trees that the marks allow.
    fn split(&mut self, marks: &mut [Mark]) {
        self.work += 100;
        if !(self.go_on)(self.work as f64 / self.work_max as f64) {
            self.ended = true;
        }
        if self.over() {
            return;
        }
        let alive: Vec<bool> = marks.iter().map(|&mark| mark != Mark::Out).collect();
        let areas = self.problem.surplus_mw.len();
        let found = blocks(areas, &self.ends, &alive);
        let sure: Vec<Option<Sure>> = (0..alive.len())
            .map(|corridor| found.is_bridge[corridor].then(|| self.sure(corridor, &alive)))
            .collect();
        let settled = |area: usize| {
            (0..alive.len())
                .filter(|&c| alive[c] && touches(self.ends[c], area))
                .all(|c| sure[c].is_some())
        };
        let settled: Vec<usize> = (0..areas).filter(|&area| settled(area)).collect();
        let known: Vec<Sure> = sure.iter().flatten().cloned().collect();
        let mut bound = known.iter().fold(0.0, |most, s| self.tie_loading(s).max(most));
        for area in settled {
            bound = self.area_bound(area, &known).max(bound);
            if bound >= self.best.worst.loading {
                return;
            }
        }
        if bound >= self.best.worst.loading {
            return;
        }
        match self.next(marks, &sure) {
            Some(corridor) => self.decide(marks, corridor),
            // What is alive and unsure but decided would be a ring of kept corridors.
            None if known.len() + 1 == areas => self.choose(known),
            None => {}
        }
    }

    /// The corridor to decide next: of the area that needs fewest more to have its flows known.
    fn next(&self, marks: &[Mark], sure: &[Option<Sure>]) -> Option<usize> {
        let open = |c: &usize| marks[*c] == Mark::Undecided && sure[*c].is_none();
        let mut around = vec![0_usize; self.problem.surplus_mw.len()];
        for corridor in (0..marks.len()).filter(open) {
            around[self.ends[corridor].0] += 1;
            around[self.ends[corridor].1] += 1;
        }
        let (a, b) = (|c: usize| self.ends[c].0, |c: usize| self.ends[c].1);
        (0..marks.len()).filter(open).min_by_key(|&c| around[a(c)].min(around[b(c)]))
    }

    fn decide(&mut self, marks: &mut [Mark], corridor: usize) {
        if !self.closes_ring(marks, corridor) {
            marks[corridor] = Mark::Kept;
            self.split(marks);
        }
        marks[corridor] = Mark::Out;
        self.split(marks);
        marks[corridor] = Mark::Undecided;
    }

    /// Whether the kept corridors already join the ends of this one.
    fn closes_ring(&self, marks: &[Mark], corridor: usize) -> bool {
        let kept: Vec<bool> = marks.iter().map(|&mark| mark == Mark::Kept).collect();
        let group =
            crate::grid::graph::components(self.problem.surplus_mw.len(), &self.ends, &kept).0;
        let (a, b) = self.ends[corridor];
        group[a] == group[b]
    }

    /// Flow of a corridor that is a bridge: the surplus behind it.
    fn sure(&self, corridor: usize, alive: &[bool]) -> Sure {
        let mut rest = alive.to_vec();
        rest[corridor] = false;
        let areas = self.ends[corridor];
        let group =
            crate::grid::graph::components(self.problem.surplus_mw.len(), &self.ends, &rest).0;
        let behind = group.iter().zip(&self.problem.surplus_mw);
        let flow_mw = behind.filter(|(g, _)| **g == group[areas.0]).map(|(_, s)| s).sum();
        Sure { areas, flow_mw, ties: self.corridors[corridor].ties.clone() }
    }

    /// Least loading among the ties that the corridor may use.
    fn tie_loading(&self, sure: &Sure) -> f64 {
        let best =
            sure.ties.iter().map(|&tie| sure.flow_mw.abs() / self.problem.ties[tie].rating_mw);
        best.fold(f64::INFINITY, f64::min)
    }

    /// A bound below the worst loading inside an area whose corridors are all known.
    ///
    /// Exact where one tie is left per corridor.
    fn area_bound(&mut self, area: usize, known: &[Sure]) -> f64 {
        let flows = &self.problem.areas[area];
        let mut low = flows.base.clone();
        let mut high = flows.base.clone();
        for sure in known.iter().filter(|sure| touches(sure.areas, area)) {
            let outflow_mw = if sure.areas.0 == area { sure.flow_mw } else { -sure.flow_mw };
            let gains: Vec<&[f64]> = sure
                .ties
                .iter()
                .map(|&tie| flows.gain_per_mw[self.problem.ties[tie].seen_from(area).0].as_slice())
                .collect();
            self.work += (gains.len() * low.len()) as u64;
            for line in 0..low.len() {
                let (mut least, mut most) = (f64::INFINITY, f64::NEG_INFINITY);
                for gain in &gains {
                    let part = gain[line] * outflow_mw;
                    least = least.min(part);
                    most = most.max(part);
                }
                low[line] += least;
                high[line] += most;
            }
        }
        low.iter().zip(&high).fold(flows.fixed.0, |bound, (&low, &high)| {
            let nearest = if low > 0.0 { low } else { (-high).max(0.0) };
            nearest.max(bound)
        })
    }

    /// Choose the tie of each corridor of one tree of corridors.
    fn choose(&mut self, known: Vec<Sure>) {
        if self.over() {
            return;
        }
        let Some(place) = known.iter().position(|sure| sure.ties.len() > 1) else {
            self.take(&known);
            return;
        };
        let mut options: Vec<(f64, Vec<Sure>)> = Vec::new();
        for &tie in &known[place].ties {
            let mut next = known.clone();
            next[place].ties = vec![tie];
            let (a, b) = next[place].areas;
            let mut bound = self.tie_loading(&next[place]);
            bound = self.area_bound(a, &next).max(bound);
            bound = self.area_bound(b, &next).max(bound);
            options.push((bound, next));
        }
        options.sort_by(|x, y| x.0.total_cmp(&y.0));
        for (bound, next) in options {
            if bound < self.best.worst.loading {
                self.choose(next);
            }
        }
    }

    fn take(&mut self, known: &[Sure]) {
        let mut tree: Vec<usize> = known.iter().flat_map(|sure| sure.ties.clone()).collect();
        tree.sort_unstable();
        let worst: Worst = self.problem.worst(&tree);
        if worst.loading < self.best.worst.loading {
            self.best = Found { tree, worst };
        }
    }
}

fn touches(areas: (usize, usize), area: usize) -> bool {
    areas.0 == area || areas.1 == area
}
