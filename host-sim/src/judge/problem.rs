//! The static programme at given rungs: what set-points meet every limit at rest.
//!
//! Contract: DC flows, nominal frequency, the final loads and line status.
//! [`Scope::Whole`] keeps every tie a line between two bus angles;
//! [`Scope::Area`] looks at one area alone with its ties as injections at schedule.
//! With [`Slack::Elastic`] a variable, the largest violation, relaxes balance at
//! each area's first bus, tie schedules, angle rows and ratings.
//!
//! | code | symbol | meaning | unit | source |
//! |---|---|---|---|---|
//! | `unit` | u | set-point | pu | - |
//! | `shed` | s | load taken off | pu | - |
//! | `dt` | dt | flow of a tie less its schedule | pu | - |
//! | `mid` | mu | deviation of the mid-tie angle over the reactance | pu | - |
//! | `angle` | theta | bus angle | rad | - |
//! | `kappa` | kappa | free angle reference of a group of areas | rad | - |
//!
//! Sign: injection into a bus positive, flow positive from `from` to `to`.

use super::program::{Program, Terms};
use super::setting::{Setting, TIE_CURVATURE};
use super::topology::{BusRole, ends, is_tie};

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
pub(super) enum Slack {
    /// As far as needed; the largest miss is what is minimised.
    Elastic,
    /// By at most this, in pu.
    By(f64),
}

/// Indices of the programme's variables; none where the value is given.
#[derive(Clone, Debug, Default)]
pub(super) struct Unknowns {
    pub(super) unit: Vec<Option<usize>>,
    pub(super) shed: Vec<Option<usize>>,
    pub(super) dt: Vec<Option<usize>>,
    pub(super) mid: Vec<Option<usize>>,
    pub(super) violation: Option<usize>,
    angle: Vec<Option<usize>>,
    kappa: Vec<Option<usize>>,
}

/// A programme half built.
struct Builder<'a> {
    setting: Setting<'a>,
    scope: Scope,
    slack: Slack,
    program: Program,
    unknowns: Unknowns,
    /// Per bus: terms of what is injected, less what flows off.
    balance: Vec<Terms>,
    /// Per bus: what is taken off by things that are given.
    load_pu: Vec<f64>,
}

/// Build the programme.
pub(super) fn build(setting: &Setting, scope: Scope, slack: Slack) -> (Program, Unknowns) {
    let grid = setting.grid;
    let mut builder = Builder {
        setting: *setting,
        scope,
        slack,
        program: Program::default(),
        unknowns: Unknowns::default(),
        balance: vec![Vec::new(); grid.buses.len()],
        load_pu: setting.end.bus_load_mw.iter().map(|mw| setting.pu(*mw)).collect(),
    };
    if slack == Slack::Elastic {
        let z = builder.program.add(0.0, 1.0);
        builder.program.at_most(vec![(z, -1.0)], 0.0);
        builder.unknowns.violation = Some(z);
    }
    builder.add_units();
    builder.add_feeders();
    builder.add_angles();
    builder.add_inner_lines();
    builder.add_ties();
    builder.close_balances();
    (builder.program, builder.unknowns)
}

impl Builder<'_> {
    fn holds(&self, bus: usize) -> bool {
        let role = self.setting.topology.role[bus];
        match self.scope {
            Scope::Whole => role != BusRole::Outside,
            Scope::Area(a) => role == BusRole::Main && self.setting.grid.buses[bus].area == a,
        }
    }

    fn cost_counts(&self) -> bool {
        self.slack != Slack::Elastic
    }

    /// `low <= terms <= high`, missed by the slack at most.
    fn soft(&mut self, terms: Terms, low: f64, high: f64) {
        let negated: Terms = terms.iter().map(|&(i, f)| (i, -f)).collect();
        match (self.slack, self.unknowns.violation) {
            (Slack::Elastic, Some(z)) => {
                let with = |mut t: Terms| {
                    t.push((z, -1.0));
                    t
                };
                self.program.at_most(with(terms), high);
                self.program.at_most(with(negated), -low);
            }
            (Slack::By(slack), _) if low == high && slack == 0.0 => self.program.equal(terms, low),
            (slack, _) => {
                let by = if let Slack::By(by) = slack { by } else { 0.0 };
                self.program.at_most(terms, high + by);
                self.program.at_most(negated, by - low);
            }
        }
    }

    fn add_units(&mut self) {
        for unit in 0..self.setting.grid.units.len() {
            let bus = self.setting.grid.units[unit].bus;
            let (low, high) = self.setting.unit_range_pu(unit);
            let variable = if !self.holds(bus) {
                None
            } else if low >= high {
                self.load_pu[bus] -= low;
                None
            } else {
                let curve = self.setting.grid.units[unit].cost_per_pu2;
                let (curve, slope) = match self.cost_counts() {
                    true => (curve, -curve * self.setting.unit_origin_pu(unit)),
                    false => (0.0, 0.0),
                };
                let u = self.program.add(curve, slope);
                self.program.bound(u, low, high);
                self.balance[bus].push((u, 1.0));
                Some(u)
            };
            self.unknowns.unit.push(variable);
        }
    }

    fn add_feeders(&mut self) {
        for feeder in 0..self.setting.grid.feeders.len() {
            let bus = self.setting.grid.feeders[feeder].bus;
            let (low, high) = self.setting.shed_range_pu(feeder);
            let variable = if !self.holds(bus) {
                None
            } else if low >= high {
                self.load_pu[bus] -= low;
                None
            } else {
                let price = self.setting.grid.feeders[feeder].price_per_pu;
                let (curve, slope) = if self.cost_counts() { (1.0, price) } else { (0.0, 0.0) };
                let s = self.program.add(curve, slope);
                self.program.bound(s, low, high);
                self.balance[bus].push((s, 1.0));
                Some(s)
            };
            self.unknowns.shed.push(variable);
        }
    }

    /// One angle per bus, zero at the first bus of each island (or of the area).
    fn add_angles(&mut self) {
        let mut grounded = Vec::new();
        for bus in 0..self.setting.grid.buses.len() {
            if !self.holds(bus) {
                self.unknowns.angle.push(None);
                continue;
            }
            let angle = self.program.add(0.0, 0.0);
            let island = self.setting.end.bus_island[bus];
            if !grounded.contains(&island) {
                grounded.push(island);
                self.program.equal(vec![(angle, 1.0)], 0.0);
            }
            self.unknowns.angle.push(Some(angle));
        }
        self.unknowns.kappa = vec![None; self.setting.grid.areas.len()];
    }

    /// Flow of a line in pu as terms, if both ends are looked at.
    fn flow(&self, line: usize) -> Option<Terms> {
        let l = &self.setting.grid.lines[line];
        let b = 1.0 / l.reactance_pu;
        let (from, to) = (self.unknowns.angle[l.from]?, self.unknowns.angle[l.to]?);
        Some(vec![(from, b), (to, -b)])
    }

    fn put_flow_on_buses(&mut self, line: usize, flow: &Terms) {
        let (from, to) = (self.setting.grid.lines[line].from, self.setting.grid.lines[line].to);
        self.balance[from].extend(flow.iter().map(|&(i, f)| (i, -f)));
        self.balance[to].extend(flow);
    }

    fn add_inner_lines(&mut self) {
        for line in 0..self.setting.grid.lines.len() {
            if is_tie(self.setting.grid, line) || !self.setting.end.line_closed[line] {
                continue;
            }
            let Some(flow) = self.flow(line) else {
                continue;
            };
            self.put_flow_on_buses(line, &flow);
            let l = &self.setting.grid.lines[line];
            let rating = self.setting.pu(l.rating_mw);
            let in_charge = self.setting.topology.role[l.from] == BusRole::Main
                && self.setting.topology.alive[ends(self.setting.grid, line).0];
            // Nobody can keep a rating in a piece whose steward is gone.
            if in_charge {
                self.soft(flow, -rating, rating);
            }
        }
    }

    fn add_ties(&mut self) {
        let count = self.setting.grid.lines.len();
        self.unknowns.dt = vec![None; count];
        self.unknowns.mid = vec![None; count];
        let open = match self.scope {
            Scope::Whole => self.setting.open_ties(),
            Scope::Area(_) => vec![false; count],
        };
        let mut net_of_dead: Vec<(Terms, f64)> =
            vec![Default::default(); self.setting.grid.areas.len()];
        for (line, &open) in open.iter().enumerate() {
            if !is_tie(self.setting.grid, line) || !self.setting.end.line_closed[line] {
                continue;
            }
            match self.scope {
                Scope::Area(area) => self.add_tie_as_injection(line, area),
                Scope::Whole => self.add_tie_as_line(line, open, &mut net_of_dead),
            }
        }
        for (terms, schedule) in net_of_dead {
            if !terms.is_empty() {
                self.soft(terms, schedule, schedule);
            }
        }
    }

    fn add_tie_as_line(&mut self, line: usize, open: bool, net_of_dead: &mut [(Terms, f64)]) {
        let Some(flow) = self.flow(line) else { return };
        self.put_flow_on_buses(line, &flow);
        let grid = self.setting.grid;
        let topology = self.setting.topology;
        if !topology.is_live_tie(grid, self.setting.end, line) {
            return; // it feeds a detached piece: whatever that piece needs
        }
        let schedule = self.setting.pu(self.setting.end.schedule_mw[line]);
        let (a, b) = ends(grid, line);
        if !topology.both_alive(grid, line) {
            // A dead steward holds nothing: its neighbours keep their net exchange with it.
            for (area, sign) in [(a, 1.0), (b, -1.0)] {
                if topology.alive[area] {
                    net_of_dead[area].0.extend(flow.iter().map(|&(i, f)| (i, sign * f)));
                    net_of_dead[area].1 += sign * schedule;
                }
            }
        } else if open {
            self.open_tie(line, flow, schedule);
        } else {
            self.soft(flow, schedule, schedule);
        }
        if topology.meshed[line] && (topology.alive[a] || topology.alive[b]) {
            let angle = &self.unknowns.angle;
            let ends = [angle[grid.lines[line].from], angle[grid.lines[line].to]];
            let mid: Terms = ends.iter().flatten().map(|&i| (i, 0.5)).collect();
            let in_charge = if topology.alive[a] { a } else { b };
            self.hold_mid_angle(line, mid, 0.0, in_charge, open);
        }
    }

    fn open_tie(&mut self, line: usize, flow: Terms, schedule: f64) {
        let settings = &self.setting.play.steward;
        let band = self.setting.pu(settings.tie_band_mw);
        let rating = self.setting.pu(self.setting.grid.lines[line].rating_mw);
        let price = settings.tie_price_per_pu;
        let (curve, slope) = match self.cost_counts() {
            true => (2.0 * TIE_CURVATURE, 2.0 * price),
            false => (0.0, 0.0),
        };
        let dt = self.program.add(curve, 0.0);
        let size = self.program.add(0.0, slope);
        self.program.at_most(vec![(dt, 1.0), (size, -1.0)], 0.0);
        self.program.at_most(vec![(dt, -1.0), (size, -1.0)], 0.0);
        self.program.at_most(vec![(size, 1.0)], band);
        let mut row = flow.clone();
        row.push((dt, -1.0));
        self.program.equal(row, schedule);
        self.soft(flow, -rating, rating);
        self.unknowns.dt[line] = Some(dt);
    }

    /// `(mid - base + kappa) / x = mu`; mu is zero unless the tie is open.
    fn hold_mid_angle(&mut self, line: usize, mid: Terms, given: f64, area: usize, open: bool) {
        let group = match self.scope {
            Scope::Whole => self.setting.topology.angle_group[area],
            Scope::Area(a) => a,
        };
        let kappa = match self.unknowns.kappa[group] {
            Some(kappa) => kappa,
            None => self.program.add(0.0, 0.0),
        };
        self.unknowns.kappa[group] = Some(kappa);
        let b = 1.0 / self.setting.grid.lines[line].reactance_pu;
        let mut row: Terms = mid.iter().map(|&(i, f)| (i, f * b)).collect();
        row.push((kappa, b));
        let base = (self.setting.topology.base_mid_angle[line] - given) * b;
        if open {
            let curve = if self.cost_counts() { 2.0 * TIE_CURVATURE } else { 0.0 };
            let mu = self.program.add(curve, 0.0);
            // The stewards' own band: twice that of the flow.
            let band = 2.0 * self.setting.pu(self.setting.play.steward.tie_band_mw);
            self.program.at_most(vec![(mu, 1.0)], band);
            self.program.at_most(vec![(mu, -1.0)], band);
            row.push((mu, -1.0));
            self.program.equal(row, base);
            self.unknowns.mid[line] = Some(mu);
        } else {
            self.soft(row, base, base);
        }
    }

    /// A tie seen from one area: a given export at its own end.
    fn add_tie_as_injection(&mut self, line: usize, area: usize) {
        let grid = self.setting.grid;
        let l = &grid.lines[line];
        let (bus, sign) = match (self.holds(l.from), self.holds(l.to)) {
            (true, _) => (l.from, 1.0),
            (false, true) => (l.to, -1.0),
            (false, false) => return,
        };
        let live = self.setting.topology.is_live_tie(grid, self.setting.end, line);
        let flow_mw = match live {
            true => self.setting.end.schedule_mw[line],
            false => self.setting.end.line_flow_mw[line],
        };
        let export = sign * self.setting.pu(flow_mw);
        self.load_pu[bus] += export;
        if live && self.setting.topology.meshed[line] {
            let mid: Terms = self.unknowns.angle[bus].iter().map(|&i| (i, 1.0)).collect();
            self.hold_mid_angle(line, mid, -0.5 * l.reactance_pu * export, area, false);
        }
    }

    fn close_balances(&mut self) {
        for bus in 0..self.setting.grid.buses.len() {
            if !self.holds(bus) {
                continue;
            }
            let mut terms = std::mem::take(&mut self.balance[bus]);
            let load = self.load_pu[bus];
            let area = self.setting.grid.buses[bus].area;
            let is_first = self.setting.topology.first_bus[area] == Some(bus);
            if is_first && !self.setting.topology.alive[area] {
                // What a dead steward leaves unbalanced is not the others' limit.
                terms.push((self.program.add(0.0, 0.0), 1.0));
            }
            if is_first {
                self.soft(terms, load, load);
            } else {
                self.program.equal(terms, load);
            }
        }
    }
}
