//! The stewards' programme of all live areas at the end of a run, solved by clarabel.
//!
//! Contract: written from the law's equations, not from the judge, which keeps
//! bus angles as unknowns; here each area has only its own rows (balance,
//! mid-tie angles, lines) and ties are shared unknowns. What does not depend on
//! the set-points is taken from flows and angles at the end of the run.
//!
//! Units: pu on the grid's base. Sign: tie deviations along the line.

use clarabel::algebra::CscMatrix;
use clarabel::solver::SupportedConeT::{NonnegativeConeT, ZeroConeT};
use clarabel::solver::{DefaultSettings, DefaultSolver, IPSolver, SolverStatus};
use hedgerow::case::model::{FeederKind, Grid, Play, UnitKind, UnitStatus};
use hedgerow::charter::proof::{cols, matrix, rows};
use hedgerow::charter::{Area, compile};
use hedgerow::record::{FinalState, Recording};

/// Curvature of tie and angle deviations at each end.
const TIE_CURVATURE: f64 = 0.05;
/// Rows count as met up to half of what stewards must prove: 0.1 MW.
const MET_MW: f64 = 0.1;

/// Which feeders the programme may choose.
#[derive(Clone, Copy, PartialEq)]
pub enum Breakers {
    /// All, and any part of them.
    Free,
    /// Switched ones stay as they stand.
    Standing,
}

/// What the programme finds.
pub struct Optimum {
    /// Its cost.
    pub cost: f64,
    /// Load shed, MW.
    pub shed_mw: f64,
}

/// The end of a run with everything the programme needs.
pub struct Reference<'a> {
    grid: &'a Grid,
    play: &'a Play,
    end: &'a FinalState,
    areas: Vec<Area>,
    /// Mid-tie angle at the end less that of the base case, rad, per line.
    angle_off: Vec<f64>,
}

/// Linear rows `low <= terms <= high`.
type Row = (Vec<(usize, f64)>, f64, f64);

/// Unknowns with ranges and cost, and the rows.
#[derive(Default)]
struct Programme {
    low: Vec<f64>,
    high: Vec<f64>,
    curve: Vec<f64>,
    slope: Vec<f64>,
    rows: Vec<Row>,
    /// Terms that must stay below zero whatever the slack.
    hard: Vec<Vec<(usize, f64)>>,
}

impl Programme {
    fn add(&mut self, (low, high): (f64, f64), curve: f64, slope: f64) -> usize {
        self.low.push(low);
        self.high.push(high);
        self.curve.push(curve);
        self.slope.push(slope);
        self.low.len() - 1
    }

    /// Smallest violation of the rows (`None`), or the cheapest point with this one.
    fn solve(&self, slack: Option<f64>) -> Option<Vec<f64>> {
        let (n, z) = (self.low.len() + 1, self.low.len());
        let mut at_most: Vec<(Vec<(usize, f64)>, f64)> = vec![(vec![(z, -1.0)], 0.0)];
        let mut equal = Vec::new();
        if let Some(slack) = slack {
            at_most.push((vec![(z, 1.0)], slack));
        }
        for (j, (&low, &high)) in self.low.iter().zip(&self.high).enumerate() {
            if low == high {
                equal.push((vec![(j, 1.0)], low));
            } else {
                at_most.push((vec![(j, 1.0)], high));
                at_most.push((vec![(j, -1.0)], -low));
            }
        }
        for (terms, low, high) in self.rows.iter().filter(|row| row.1.is_finite()) {
            let with = |sign: f64| {
                let signed = terms.iter().map(|&(j, f)| (j, sign * f));
                signed.chain([(z, -1.0)]).collect::<Vec<_>>()
            };
            at_most.push((with(1.0), *high));
            at_most.push((with(-1.0), -low));
        }
        at_most.extend(self.hard.iter().map(|terms| (terms.clone(), 0.0)));
        let cost = slack.is_some();
        let mut curve = if cost { self.curve.clone() } else { vec![0.0; z] };
        let mut slope = if cost { self.slope.clone() } else { vec![0.0; z] };
        curve.push(0.0);
        slope.push(if cost { 0.0 } else { 1.0 });
        interior_point(n, &curve, &slope, &equal, &at_most)
    }
}

/// Clarabel at 1e-9 on `equal` and `at_most` rows.
fn interior_point(
    n: usize,
    curve: &[f64],
    slope: &[f64],
    equal: &[(Vec<(usize, f64)>, f64)],
    at_most: &[(Vec<(usize, f64)>, f64)],
) -> Option<Vec<f64>> {
    let (mut i, mut j, mut v, mut rhs) = (vec![], vec![], vec![], vec![]);
    for (row, (terms, right)) in equal.iter().chain(at_most).enumerate() {
        for &(col, value) in terms.iter().filter(|term| term.1 != 0.0) {
            i.push(row);
            j.push(col);
            v.push(value);
        }
        rhs.push(*right);
    }
    let rows = CscMatrix::new_from_triplets(rhs.len(), n, i, j, v);
    let all: Vec<usize> = (0..n).collect();
    let p = CscMatrix::new_from_triplets(n, n, all.clone(), all, curve.to_vec());
    let settings = DefaultSettings {
        verbose: false,
        tol_gap_abs: 1e-9,
        tol_gap_rel: 1e-9,
        tol_feas: 1e-9,
        max_threads: 1,
        ..DefaultSettings::default()
    };
    let cones = [ZeroConeT(equal.len()), NonnegativeConeT(at_most.len())];
    let mut solver = DefaultSolver::new(&p, slope, &rows, &rhs, &cones, settings).ok()?;
    solver.solve();
    let solved =
        matches!(solver.solution.status, SolverStatus::Solved | SolverStatus::AlmostSolved);
    solved.then_some(solver.solution.x)
}

impl<'a> Reference<'a> {
    /// Gather it from a run.
    pub fn of(grid: &'a Grid, play: &'a Play, recording: &'a Recording) -> Self {
        let areas = compile(grid, play).expect("charters");
        let end = &recording.end;
        let closed: Vec<bool> = grid.lines.iter().map(|line| line.closed).collect();
        let first: Vec<f64> = recording.series.line_flow_mw.iter().map(|flow| flow[0]).collect();
        let now = angles(grid, &end.line_closed, &end.line_flow_mw);
        let then = angles(grid, &closed, &first);
        let middle = |angle: &[f64], line: usize| {
            0.5 * (angle[grid.lines[line].from] + angle[grid.lines[line].to])
        };
        let angle_off =
            (0..grid.lines.len()).map(|line| middle(&now, line) - middle(&then, line)).collect();
        Self { grid, play, end, areas, angle_off }
    }

    fn pu(&self, mw: f64) -> f64 {
        mw / self.grid.base_mva
    }

    fn alive(&self, area: usize) -> bool {
        self.end.steward_alive[area]
    }

    /// Ties that may leave their schedule at these rungs.
    pub fn open(&self, rungs: &[u8]) -> Vec<bool> {
        // Everybody is within the help radius of everybody in so small a grid.
        assert!(usize::from(self.play.steward.help_hops) >= self.grid.areas.len());
        let helping = rungs.iter().zip(0..).any(|(&rung, area)| rung > 0 && self.alive(area));
        let of = |bus: usize| self.grid.buses[bus].area;
        let lines = self.grid.lines.iter().zip(&self.end.line_closed);
        lines
            .map(|(line, &closed)| {
                let (a, b) = (of(line.from), of(line.to));
                helping && closed && a != b && self.alive(a) && self.alive(b)
            })
            .collect()
    }

    /// Least violation in MW of some areas' rows at these rungs.
    pub fn violation_mw(&self, rungs: &[u8], only: Option<usize>) -> f64 {
        let (programme, _) = self.build(rungs, only, Breakers::Free);
        let x = programme.solve(None).expect("the least violation always has a solution");
        x.last().copied().unwrap_or(0.0).max(0.0) * self.grid.base_mva
    }

    /// Whether the rows can be met.
    pub fn feasible(&self, rungs: &[u8], only: Option<usize>) -> bool {
        self.violation_mw(rungs, only) < MET_MW
    }

    /// Least rungs: areas that are short alone at `keep` go down, the fewest rungs that do.
    pub fn least_rungs(&self) -> Vec<u8> {
        let count = self.grid.areas.len();
        let keep = vec![0; count];
        let short: Vec<usize> = (0..count)
            .filter(|&area| self.alive(area) && !self.feasible(&keep, Some(area)))
            .collect();
        let mut all: Vec<Vec<u8>> = vec![keep];
        for &area in &short {
            let deeper = |rungs: &Vec<u8>| {
                let mut rungs = rungs.clone();
                (1..=3)
                    .map(move |rung| {
                        rungs[area] = rung;
                        rungs.clone()
                    })
                    .collect::<Vec<_>>()
            };
            all = all.iter().flat_map(deeper).collect();
        }
        all.sort_by_key(|rungs| (rungs.iter().max().copied(), rungs.iter().sum::<u8>()));
        let found = all.into_iter().find(|rungs| self.feasible(rungs, None));
        found.expect("the deepest rungs meet the rows")
    }

    /// The cheapest point at these rungs.
    pub fn optimum(&self, rungs: &[u8], breakers: Breakers) -> Optimum {
        let (programme, sheds) = self.build(rungs, None, breakers);
        let missing = self.pu(self.violation_mw(rungs, None));
        let x = programme.solve(Some(missing + 1e-6)).expect("a feasible programme");
        let cost = (0..programme.low.len())
            .map(|j| programme.slope[j] * x[j] + 0.5 * programme.curve[j] * x[j] * x[j])
            .sum::<f64>();
        let shed: f64 = sheds.iter().map(|&j| x[j]).sum();
        Optimum { cost: cost + self.constant(rungs), shed_mw: shed * self.grid.base_mva }
    }

    /// Cost of the set-points at the end of the run, in the same objective.
    pub fn cost_at_end(&self, rungs: &[u8]) -> f64 {
        let (grid, end) = (self.grid, self.end);
        let mut cost = 0.0;
        for unit in 0..grid.units.len() {
            let (low, high) = self.range(unit, rungs);
            if low < high {
                let off = self.pu(end.unit_setpoint_mw[unit]) - self.origin(unit);
                cost += 0.5 * grid.units[unit].cost_per_pu2 * off * off;
            }
        }
        for (feeder, mw) in grid.feeders.iter().zip(&end.feeder_shed_mw) {
            let shed = self.pu(*mw);
            cost += feeder.price_per_pu * shed + 0.5 * shed * shed;
        }
        let open = self.open(rungs);
        for line in (0..grid.lines.len()).filter(|&line| open[line]) {
            let off = self.pu(end.line_flow_mw[line] - end.schedule_mw[line]);
            cost +=
                2.0 * self.play.steward.tie_price_per_pu * off.abs() + TIE_CURVATURE * off * off;
        }
        cost + self.angle_cost(&open)
    }

    /// Cost of the mid-tie angles, whose common reference is free unless a closed tie holds it.
    fn angle_cost(&self, open: &[bool]) -> f64 {
        let area_of = |bus: usize| self.grid.buses[bus].area;
        let ties: Vec<usize> = (0..self.grid.lines.len())
            .filter(|&line| {
                let data = &self.grid.lines[line];
                area_of(data.from) != area_of(data.to) && self.end.line_closed[line]
            })
            .collect();
        let held: Vec<usize> = ties.iter().copied().filter(|&line| !open[line]).collect();
        let by = if held.is_empty() { &ties } else { &held };
        let weight = |line: usize| self.grid.lines[line].reactance_pu.powi(-2);
        let total: f64 = by.iter().map(|&line| weight(line)).sum();
        let mean = by.iter().map(|&line| weight(line) * self.angle_off[line]).sum::<f64>() / total;
        let square =
            |&line: &usize| weight(line) * (self.angle_off[line] - mean).powi(2) * TIE_CURVATURE;
        ties.iter().filter(|&&line| open[line]).map(square).sum()
    }

    /// Point from which a unit's cost is measured, pu.
    fn origin(&self, unit: usize) -> f64 {
        match self.grid.units[unit].kind {
            UnitKind::Battery => 0.0,
            _ => self.pu(self.end.unit_base_mw[unit]),
        }
    }

    /// The part of the cost that no unknown changes.
    fn constant(&self, rungs: &[u8]) -> f64 {
        let units = (0..self.grid.units.len()).filter(|&unit| {
            let (low, high) = self.range(unit, rungs);
            low < high
        });
        units.map(|u| 0.5 * self.grid.units[u].cost_per_pu2 * self.origin(u).powi(2)).sum()
    }

    /// Range of a unit, pu; both ends alike when it can not be moved.
    fn range(&self, unit: usize, rungs: &[u8]) -> (f64, f64) {
        let u = &self.grid.units[unit];
        let area = self.grid.buses[u.bus].area;
        let still = self.pu(self.end.unit_output_mw[unit]);
        if !self.end.unit_in_service[unit] {
            (0.0, 0.0)
        } else if u.status == UnitStatus::Fixed || !self.alive(area) {
            (still, still)
        } else if rungs[area] < 2 {
            (self.pu(u.min_mw + u.reserve_down_mw), self.pu(u.max_mw - u.reserve_up_mw))
        } else {
            (self.pu(u.emergency_min_mw), self.pu(u.emergency_max_mw))
        }
    }

    fn build(
        &self,
        rungs: &[u8],
        only: Option<usize>,
        breakers: Breakers,
    ) -> (Programme, Vec<usize>) {
        let open = match only {
            Some(_) => vec![false; self.grid.lines.len()],
            None => self.open(rungs),
        };
        let mut programme = Programme::default();
        let ties: Vec<[usize; 2]> =
            (0..open.len()).map(|line| self.add_tie(&mut programme, line, open[line])).collect();
        let mut sheds = Vec::new();
        for area in &self.areas {
            if self.alive(area.index) && only.is_none_or(|only| only == area.index) {
                self.add_area(&mut programme, area, rungs, breakers, &ties, &mut sheds);
            }
        }
        (programme, sheds)
    }

    /// Deviation of flow and angle of a line; both stand still unless it is an open tie.
    fn add_tie(&self, programme: &mut Programme, line: usize, open: bool) -> [usize; 2] {
        if !open {
            return [programme.add((0.0, 0.0), 0.0, 0.0), programme.add((0.0, 0.0), 0.0, 0.0)];
        }
        let settings = &self.play.steward;
        let (band, rating) =
            (self.pu(settings.tie_band_mw), self.pu(self.grid.lines[line].rating_mw));
        let agreed = self.pu(self.end.schedule_mw[line]);
        let range = ((-band).max(-rating - agreed), band.min(rating - agreed));
        let flow = programme.add(range, 2.0 * TIE_CURVATURE, 0.0);
        let angle = programme.add((-2.0 * band, 2.0 * band), 2.0 * TIE_CURVATURE, 0.0);
        let size = programme.add((0.0, 2.0 * band), 0.0, 2.0 * settings.tie_price_per_pu);
        programme.hard.push(vec![(flow, 1.0), (size, -1.0)]);
        programme.hard.push(vec![(flow, -1.0), (size, -1.0)]);
        [flow, angle]
    }

    /// Unknowns and rows of an area.
    fn add_area(
        &self,
        programme: &mut Programme,
        area: &Area,
        rungs: &[u8],
        breakers: Breakers,
        ties: &[[usize; 2]],
        sheds: &mut Vec<usize>,
    ) {
        let (grid, end) = (self.grid, self.end);
        // Column of the area's matrix: unknown, sign, value at the end of the run.
        let mut places: Vec<(usize, f64, f64)> = Vec::with_capacity(cols(area));
        for &unit in &area.units {
            let q = grid.units[unit].cost_per_pu2;
            let at = programme.add(self.range(unit, rungs), q, -q * self.origin(unit));
            places.push((at, 1.0, self.pu(end.unit_output_mw[unit])));
        }
        for &feeder in &area.feeders {
            let (f, stands) = (&grid.feeders[feeder], self.pu(end.feeder_shed_mw[feeder]));
            let pinned = breakers == Breakers::Standing && f.kind == FeederKind::Switched;
            let most = self.pu(f.load_mw.min(end.bus_load_mw[f.bus]));
            let range = match (pinned, rungs[area.index]) {
                (true, _) => (stands, stands),
                (false, 3) => (0.0, most),
                (false, _) => (0.0, 0.0),
            };
            let at = programme.add(range, 1.0, f.price_per_pu);
            sheds.push(at);
            places.push((at, 1.0, stands));
        }
        let sign = |place: usize| if area.from_end[place] { 1.0 } else { -1.0 };
        for (place, &tie) in area.ties.iter().enumerate() {
            let off = self.pu(end.line_flow_mw[tie] - end.schedule_mw[tie]);
            places.push((ties[tie][0], sign(place), sign(place) * off));
        }
        places.extend(area.ties.iter().map(|&tie| (ties[tie][1], 1.0, 0.0)));
        self.add_rows(programme, area, &places);
    }

    fn add_rows(&self, programme: &mut Programme, area: &Area, places: &[(usize, f64, f64)]) {
        let status = |lines: &[usize]| -> Vec<bool> {
            lines.iter().map(|&line| self.end.line_closed[line]).collect()
        };
        let tie_closed = status(&area.ties);
        let a = matrix(self.grid, area, &status(&area.lines), &tie_closed, 0).expect("a matrix");
        let first_line = rows(area) - area.lines.len();
        let meshed: Vec<usize> = (0..area.ties.len())
            .filter(|&tie| area.meshed[tie] && tie_closed[tie])
            .map(|tie| area.ties[tie])
            .collect();
        let x = |line: usize| self.grid.lines[line].reactance_pu;
        let scale = meshed.len() as f64 / meshed.iter().map(|&line| x(line)).sum::<f64>();
        for i in 0..rows(area) {
            let row = a.row(i);
            if row.iter().all(|&value| value == 0.0) {
                continue;
            }
            let terms = row.iter().zip(places).map(|(&v, &(at, sign, _))| (at, v * sign)).collect();
            let now: f64 = row.iter().zip(places).map(|(&v, &(_, _, end))| v * end).sum();
            let (low, high) = if i == 0 {
                (self.demand(area), self.demand(area))
            } else if i < first_line {
                let off = self.angle_off[meshed[i]] - self.angle_off[meshed[0]];
                (now - scale * off, now - scale * off)
            } else {
                let line = area.lines[i - first_line];
                let rest = self.pu(self.end.line_flow_mw[line]) - now;
                let rating = self.pu(self.grid.lines[line].rating_mw);
                (-rating - rest, rating - rest)
            };
            programme.rows.push((terms, low, high));
        }
    }

    /// What an area's units and feeders must bring: its load and its agreed exports, pu.
    fn demand(&self, area: &Area) -> f64 {
        let load: f64 = area.buses.iter().map(|&bus| self.end.bus_load_mw[bus]).sum();
        let ties = area.ties.iter().zip(&area.from_end);
        let closed = ties.filter(|&(&tie, _)| self.end.line_closed[tie]);
        let agreed: f64 = closed
            .map(|(&tie, &from)| if from { 1.0 } else { -1.0 } * self.end.schedule_mw[tie])
            .sum();
        self.pu(load + agreed)
    }
}

/// Bus angles in rad that the flows imply, walked from bus to bus; 0 where nothing leads.
fn angles(grid: &Grid, closed: &[bool], flow_mw: &[f64]) -> Vec<f64> {
    let mut angle = vec![None; grid.buses.len()];
    angle[0] = Some(0.0);
    // Every pass reaches a further bus or none is left.
    for _ in 0..grid.buses.len() {
        for (line, data) in grid.lines.iter().enumerate().filter(|&(line, _)| closed[line]) {
            let drop = data.reactance_pu * flow_mw[line] / grid.base_mva;
            match (angle[data.from], angle[data.to]) {
                (Some(from), None) => angle[data.to] = Some(from - drop),
                (None, Some(to)) => angle[data.from] = Some(to + drop),
                _ => {}
            }
        }
    }
    angle.into_iter().map(|angle: Option<f64>| angle.unwrap_or(0.0)).collect()
}
