//! The static programme at given rungs, over injections instead of angles.
//!
//! Contract: variables are units, feeders, and for each tie that is open what it
//! leaves its schedule by (up and down apart, so that the price is linear) and
//! its mid-angle. Line limits are added when a solution breaks them, so most
//! outages never see one. `Whole` keeps every tie a line of the network; `Area`
//! looks at one area alone with its ties as injections at schedule.
//!
//! | code | symbol | meaning | unit | source |
//! |---|---|---|---|---|
//! | `Unit` | u | set-point | pu | - |
//! | `Shed` | s | load taken off | pu | - |
//! | `TieUp`, `TieDown` | dt | flow of a tie less its schedule | pu | - |
//! | `Mid` | mu | deviation of the mid-tie angle over the reactance | pu | - |
//!
//! Sign: injection into a bus positive, flow positive from `from` to `to`.

use std::rc::Rc;

use super::pieces::{Pieces, Role};
use crate::case::model::{StewardSettings, UnitKind, UnitStatus};
use crate::charter::FEEDER_CURVATURE;
use crate::grid::dc::DcError;
use crate::sweep::prepare::is_tie;
use crate::sweep::quadratic::Quadratic;
use crate::sweep::state::{Network, State, flows_mw};

/// Curvature of tie and mid-angle deviations at each end (the stewards' own).
const TIE_CURVATURE: f64 = 0.05;
/// Price per pu at which the law misses a limit: its duals are clamped there.
const MISS_PRICE: f64 = 2000.0;
/// Price per pu of missing the balance of an island: above every other.
const BALANCE_PRICE: f64 = 2e4;
/// Curvature of a miss, so that the programme stays strictly convex.
const MISS_CURVATURE: f64 = 1.0;
/// Lines added per round, worst first.
const LINES_PER_ROUND: usize = 6;
/// A line breaks its limit when it does so by more than this, in pu.
const LIMIT_TOL: f64 = 1e-7;

/// What part of the grid is looked at.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Scope {
    /// All of it.
    Whole,
    /// One area, its ties at schedule.
    Area(usize),
}

/// How far rows may be missed.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Strictness {
    /// By at most this, in pu.
    By(f64),
    /// By any amount, at a price.
    Priced,
}

/// Everything the programme is made from.
#[derive(Clone, Copy)]
pub(super) struct Setting<'a> {
    pub(super) state: &'a State<'a>,
    pub(super) pieces: &'a Pieces,
    pub(super) rungs: &'a [u8],
    pub(super) settings: &'a StewardSettings,
}

/// Set-points and sheds that were chosen, in MW.
#[derive(Clone, Debug, Default, PartialEq)]
pub(super) struct Found {
    pub(super) unit_mw: Vec<(usize, f64)>,
    pub(super) shed_mw: Vec<(usize, f64)>,
}

#[derive(Clone, Copy, Debug, PartialEq)]
enum Variable {
    Unit(usize),
    Shed(usize),
    TieUp(usize),
    TieDown(usize),
    Mid(usize),
    Miss,
}

struct Builder<'a> {
    setting: Setting<'a>,
    scope: Scope,
    strictness: Strictness,
    network: Rc<Network>,
    closed: Vec<bool>,
    open: Vec<bool>,
    program: Quadratic,
    variables: Vec<Variable>,
    /// Bus of each unit or feeder variable.
    place: Vec<Option<usize>>,
    /// Injection that is given, per bus, in pu.
    given: Vec<f64>,
    added: Vec<bool>,
    /// Units whose output is given, in MW.
    given_units: Vec<(usize, f64)>,
}

/// Solve exactly, or else missing rows by at most `by`; none if that is not enough.
///
/// Errors: a failed solve of the network.
pub(super) fn solve_within(
    setting: &Setting,
    scope: Scope,
    by: f64,
) -> Result<Option<Found>, DcError> {
    match solve(setting, scope, Strictness::By(0.0))? {
        Some(found) => Ok(Some(found)),
        None => solve(setting, scope, Strictness::By(by)),
    }
}

/// Solve; none where ranges and rows contradict.
///
/// Errors: a failed solve of the network.
pub(super) fn solve(
    setting: &Setting,
    scope: Scope,
    strictness: Strictness,
) -> Result<Option<Found>, DcError> {
    let mut builder = Builder::new(setting, scope, strictness)?;
    builder.add_units();
    builder.add_feeders();
    builder.add_balances();
    builder.add_ties()?;
    builder.add_mid_angles()?;
    loop {
        if builder.program.settle().is_err() {
            return Ok(None);
        }
        if !builder.add_broken_lines()? {
            return Ok(Some(builder.found()));
        }
    }
}

impl<'a> Builder<'a> {
    fn new(setting: &Setting<'a>, scope: Scope, strictness: Strictness) -> Result<Self, DcError> {
        let state = setting.state;
        let grid = &state.case.grid;
        let (network, closed) = match scope {
            Scope::Whole => (Rc::clone(&state.network), state.closed.clone()),
            Scope::Area(area) => {
                let inside = |l: usize| {
                    !is_tie(grid, l)
                        && grid.buses[grid.lines[l].from].area == area
                        && state.closed[l]
                };
                let closed: Vec<bool> = (0..grid.lines.len()).map(inside).collect();
                (Rc::new(Network::new(grid, &closed)?), closed)
            }
        };
        let open = match scope {
            Scope::Whole => {
                setting.pieces.open_ties(state, setting.rungs, setting.settings.help_hops)
            }
            Scope::Area(_) => vec![false; grid.lines.len()],
        };
        let mut builder = Self {
            setting: *setting,
            scope,
            strictness,
            network,
            closed,
            open,
            program: Quadratic::default(),
            variables: Vec::new(),
            place: Vec::new(),
            given: vec![0.0; grid.buses.len()],
            added: vec![false; grid.lines.len()],
            given_units: Vec::new(),
        };
        for bus in 0..grid.buses.len() {
            if builder.holds(bus) {
                builder.given[bus] = -builder.pu(state.load_mw(bus));
            }
        }
        Ok(builder)
    }

    fn pu(&self, mw: f64) -> f64 {
        mw / self.setting.state.case.grid.base_mva
    }

    /// Whether the programme looks at a bus.
    fn holds(&self, bus: usize) -> bool {
        let role = self.setting.pieces.role[bus];
        let area = self.setting.state.case.grid.buses[bus].area;
        role == Role::Main && (self.scope == Scope::Whole || self.scope == Scope::Area(area))
    }

    fn variable(
        &mut self,
        what: Variable,
        place: Option<usize>,
        cost: (f64, f64),
        range: (f64, f64),
    ) -> usize {
        self.variables.push(what);
        self.place.push(place);
        self.program.add_variable(cost.0, cost.1, range.0, range.1)
    }

    fn add_units(&mut self) {
        let state = self.setting.state;
        for (unit, u) in state.case.grid.units.iter().enumerate() {
            if !self.holds(u.bus) || !state.unit_in[unit] {
                continue;
            }
            let rung = self.setting.rungs[state.case.grid.buses[u.bus].area];
            let (low, high) = if u.status == UnitStatus::Fixed {
                (u.base_mw, u.base_mw)
            } else if rung <= 1 {
                (u.min_mw + u.reserve_down_mw, u.max_mw - u.reserve_up_mw)
            } else {
                (u.emergency_min_mw, u.emergency_max_mw)
            };
            if low >= high {
                self.given[u.bus] += self.pu(high);
                self.given_units.push((unit, high));
                continue;
            }
            let origin = if u.kind == UnitKind::Battery { 0.0 } else { self.pu(u.base_mw) };
            let curve = u.cost_per_pu2;
            let range = (self.pu(low), self.pu(high));
            self.variable(Variable::Unit(unit), Some(u.bus), (curve, -curve * origin), range);
        }
    }

    fn add_feeders(&mut self) {
        let state = self.setting.state;
        for (feeder, f) in state.case.grid.feeders.iter().enumerate() {
            if !self.holds(f.bus) {
                continue;
            }
            let rung = self.setting.rungs[state.case.grid.buses[f.bus].area];
            // What was shed in an earlier stage waits for the operator.
            let least = state.shed_mw[feeder];
            let most = f.load_mw.min(state.load_mw(f.bus)).max(least);
            if rung < 3 || most <= least {
                self.given[f.bus] += self.pu(least);
                continue;
            }
            let range = (self.pu(least), self.pu(most));
            let cost = (FEEDER_CURVATURE, f.price_per_pu);
            self.variable(Variable::Shed(feeder), Some(f.bus), cost, range);
        }
    }

    /// `low <= row x <= high` with the given injection's part on the other side.
    fn add_row(&mut self, mut row: Vec<f64>, (low, high): (f64, f64), price: f64) {
        match self.strictness {
            Strictness::By(by) => self.program.add_row(row, low - by, high + by),
            Strictness::Priced => {
                let cost = (MISS_CURVATURE, price);
                let range = (0.0, f64::INFINITY);
                for sign in [1.0, -1.0] {
                    let miss = self.variable(Variable::Miss, None, cost, range);
                    row.resize(miss + 1, 0.0);
                    row[miss] = sign;
                }
                self.program.add_row(row, low, high);
            }
        }
    }

    /// A row over buses as a row over variables, and the given injection's part of it.
    fn over_variables(&self, by_bus: &[f64]) -> (Vec<f64>, f64) {
        let row = self.place.iter().map(|p| p.map_or(0.0, |bus| by_bus[bus])).collect();
        (row, by_bus.iter().zip(&self.given).map(|(r, g)| r * g).sum())
    }

    fn add_balances(&mut self) {
        self.add_exports();
        if self.scope != Scope::Whole {
            return self.add_balance(|_| true);
        }
        let state = self.setting.state;
        for island in 0..state.islands {
            let here: Vec<bool> = (0..state.island.len())
                .map(|b| state.island[b] == Some(island) && self.holds(b))
                .collect();
            if here.contains(&true) {
                self.add_balance(|bus| here[bus]);
            }
        }
    }

    fn add_balance(&mut self, here: impl Fn(usize) -> bool) {
        let by_bus: Vec<f64> =
            (0..self.given.len()).map(|b| f64::from(u8::from(here(b) && self.holds(b)))).collect();
        let (row, given) = self.over_variables(&by_bus);
        self.add_row(row, (-given, -given), BALANCE_PRICE);
    }

    /// Ties that are not lines of the programme, as loads at the ends it looks at.
    ///
    /// In an area's own view that is every tie; in the whole, one behind which a
    /// cut-off piece hangs: the steward at this end holds its schedule, and what the
    /// piece takes beside that is nobody's but the governors'.
    fn add_exports(&mut self) {
        let state = self.setting.state;
        let grid = &state.case.grid;
        for (line, l) in grid.lines.iter().enumerate() {
            let is_line = self.scope == Scope::Whole && self.setting.pieces.live_tie[line];
            if !is_tie(grid, line) || !state.closed[line] || is_line {
                continue;
            }
            let flow = self.pu(state.case.schedule_mw[line]);
            if self.holds(l.from) {
                self.given[l.from] -= flow;
            }
            if self.holds(l.to) {
                self.given[l.to] += flow;
            }
        }
    }

    fn add_ties(&mut self) -> Result<(), DcError> {
        if self.scope != Scope::Whole {
            return Ok(());
        }
        let state = self.setting.state;
        let grid = &state.case.grid;
        let price = 2.0 * self.setting.settings.tie_price_per_pu;
        let band = self.pu(self.setting.settings.tie_band_mw);
        for line in (0..grid.lines.len()).filter(|&l| self.setting.pieces.live_tie[l]) {
            let mut parts = Vec::new();
            if self.open[line] {
                let cost = (2.0 * TIE_CURVATURE, price);
                let up = self.variable(Variable::TieUp(line), None, cost, (0.0, band));
                let down = self.variable(Variable::TieDown(line), None, cost, (0.0, band));
                parts = vec![(up, -1.0), (down, 1.0)];
            }
            let by_bus = self.network.flow_row(grid, line)?;
            let (mut row, given) = self.over_variables(&by_bus);
            parts.into_iter().for_each(|(at, factor)| row[at] = factor);
            let rest = self.pu(state.case.schedule_mw[line]) - given;
            // The equation of an open tie defines its deviation: never missed.
            match self.open[line] {
                true => self.program.add_row(row, rest, rest),
                false => self.add_row(row, (rest, rest), MISS_PRICE),
            }
        }
        Ok(())
    }

    /// Mid-angles of meshed ties against those of a first one of their group.
    fn add_mid_angles(&mut self) -> Result<(), DcError> {
        let pieces = self.setting.pieces;
        let meshed = &self.setting.state.case.meshed;
        let held: Vec<usize> = (0..meshed.len())
            .filter(|&l| meshed[l] && pieces.live_tie[l] && self.end_of(l).is_some())
            .collect();
        let mut groups: Vec<usize> = held.iter().map(|&l| self.group(l)).collect();
        groups.sort_unstable();
        groups.dedup();
        for group in groups {
            let peers: Vec<usize> =
                held.iter().copied().filter(|&l| self.group(l) == group).collect();
            let closed = peers.iter().copied().find(|&l| !self.open[l]);
            let Some(first) = closed.or(peers.first().copied()) else { continue };
            let mu = self.open[first].then(|| self.mid_variable(first));
            for &line in peers.iter().filter(|&&l| l != first) {
                self.add_mid_angle(line, first, mu)?;
            }
        }
        Ok(())
    }

    /// Bus whose angle stands for the tie in the scope: none for the tie itself, or the own end.
    fn end_of(&self, line: usize) -> Option<Option<usize>> {
        let l = &self.setting.state.case.grid.lines[line];
        match self.scope {
            Scope::Whole => Some(None),
            Scope::Area(_) => [l.from, l.to].into_iter().find(|&b| self.holds(b)).map(Some),
        }
    }

    fn group(&self, line: usize) -> usize {
        let grid = &self.setting.state.case.grid;
        match self.scope {
            Scope::Whole => self.setting.pieces.angle_group[grid.buses[grid.lines[line].from].area],
            Scope::Area(_) => 0,
        }
    }

    fn mid_variable(&mut self, line: usize) -> usize {
        let range = (f64::NEG_INFINITY, f64::INFINITY);
        self.variable(Variable::Mid(line), None, (2.0 * TIE_CURVATURE, 0.0), range)
    }

    /// `b (mid - base - mid' + base') + (b / b') mu' - mu = 0`, primes for the first tie.
    fn add_mid_angle(
        &mut self,
        line: usize,
        first: usize,
        mu: Option<usize>,
    ) -> Result<(), DcError> {
        let mut parts = Vec::new();
        let lines = &self.setting.state.case.grid.lines;
        let ratio = lines[first].reactance_pu / lines[line].reactance_pu;
        if let Some(mu) = mu {
            parts.push((mu, ratio));
        }
        if self.open[line] {
            parts.push((self.mid_variable(line), -1.0));
        }
        let (own_row, own_base) = self.mid_angle(line)?;
        let (first_row, first_base) = self.mid_angle(first)?;
        let by_bus: Vec<f64> = own_row.iter().zip(&first_row).map(|(a, b)| a - ratio * b).collect();
        let (mut row, given) = self.over_variables(&by_bus);
        parts.into_iter().for_each(|(at, factor)| row[at] = factor);
        let rest = own_base - ratio * first_base - given;
        self.add_row(row, (rest, rest), MISS_PRICE);
        Ok(())
    }

    /// Mid-angle over the reactance: row over buses, and what it was in the base case.
    fn mid_angle(&self, line: usize) -> Result<(Vec<f64>, f64), DcError> {
        let case = self.setting.state.case;
        let l = &case.grid.lines[line];
        let base = 0.5 * (case.base_angle_rad[l.from] + case.base_angle_rad[l.to]) / l.reactance_pu;
        match self.end_of(line).flatten() {
            None => Ok((self.network.mid_row(&case.grid, line)?.to_vec(), base)),
            Some(bus) => {
                // At the own end the mid-angle is the bus angle less half the tie's drop.
                let out = if bus == l.from { 1.0 } else { -1.0 };
                let half_drop = 0.5 * out * self.pu(case.schedule_mw[line]);
                Ok((self.network.angle_row(&case.grid, line, bus)?, base + half_drop))
            }
        }
    }

    /// Add the limits that the present solution breaks most; false if it breaks none.
    fn add_broken_lines(&mut self) -> Result<bool, DcError> {
        let grid = &self.setting.state.case.grid;
        let mut injection = self.given.clone();
        for (place, &x) in self.place.iter().zip(self.program.values()) {
            if let Some(bus) = *place {
                injection[bus] += x;
            }
        }
        injection.iter_mut().for_each(|p| *p *= grid.base_mva);
        let angle = self.network.dc.angles_rad(&injection)?;
        let flow = flows_mw(grid, &self.closed, &angle);
        let by = if let Strictness::By(by) = self.strictness { by } else { 0.0 };
        let mut broken: Vec<(f64, usize)> = (0..grid.lines.len())
            .filter(|&l| !self.added[l] && self.limited(l))
            .map(|l| (self.pu(flow[l].abs() - grid.lines[l].rating_mw) - by, l))
            .filter(|(over, _)| *over > LIMIT_TOL)
            .collect();
        broken.sort_by(|a, b| b.0.total_cmp(&a.0).then(a.1.cmp(&b.1)));
        broken.truncate(LINES_PER_ROUND);
        for &(_, line) in &broken {
            self.added[line] = true;
            let by_bus = self.network.flow_row(grid, line)?;
            let (row, given) = self.over_variables(&by_bus);
            let rating = self.pu(grid.lines[line].rating_mw);
            self.add_row(row, (-rating - given, rating - given), MISS_PRICE);
        }
        Ok(!broken.is_empty())
    }

    /// Whether somebody keeps a line's rating.
    fn limited(&self, line: usize) -> bool {
        let grid = &self.setting.state.case.grid;
        self.closed[line]
            && match is_tie(grid, line) {
                true => self.open[line],
                false => {
                    let from = grid.lines[line].from;
                    self.setting.pieces.role[from] == Role::Main && self.holds(from)
                }
            }
    }

    fn found(&self) -> Found {
        let base = self.setting.state.case.grid.base_mva;
        let mut found = Found { unit_mw: self.given_units.clone(), shed_mw: Vec::new() };
        for (what, x) in self.variables.iter().zip(self.program.values()) {
            match *what {
                Variable::Unit(unit) => found.unit_mw.push((unit, x * base)),
                Variable::Shed(feeder) => found.shed_mw.push((feeder, x * base)),
                Variable::TieUp(_) | Variable::TieDown(_) | Variable::Mid(_) | Variable::Miss => {}
            }
        }
        found
    }
}
