//! Random areas from a seed, as the raw problem of each rung.
//!
//! Contract: the same seed gives the same area on every machine (integers are
//! drawn from ChaCha8 and converted here). The base case is balanced and within
//! limits; an outage and a load step, where drawn, come on top. Rows as the
//! control law states them: balance, angle rows (unit 1 / mean x), lines.
//!
//! Data flow: [`Chance`] draws; [`Area::random`] lays out buses, lines, units,
//! feeders and ties; [`Area::programme`] writes A, l, r and the rung's ranges.
//! The inverse Laplacian is computed here from the lines, not by the steward.

use crate::grounded::{inverse, laplacian};
use crate::programme::{Kind, Programme};
use rand::rngs::ChaCha8Rng;
use rand::{Rng, SeedableRng};

/// Draws numbers from a seed.
#[derive(Debug)]
pub struct Chance(ChaCha8Rng);

impl Chance {
    /// The stream of a seed.
    pub fn new(seed: u64) -> Self {
        Self(ChaCha8Rng::seed_from_u64(seed))
    }

    /// From 0 up to but not 1.
    pub fn share(&mut self) -> f64 {
        f64::from(self.0.next_u32()) / 4_294_967_296.0
    }

    /// Evenly from `low` to `high`.
    pub fn between(&mut self, low: f64, high: f64) -> f64 {
        low + (high - low) * self.share()
    }

    /// Evenly in the logarithm from `low` to `high`.
    pub fn decades(&mut self, low: f64, high: f64) -> f64 {
        self.between(low.ln(), high.ln()).exp()
    }

    /// One of `0..count`.
    pub fn below(&mut self, count: usize) -> usize {
        (self.share() * count as f64) as usize
    }
}

/// How an area is drawn.
#[derive(Clone, Copy, Debug)]
pub struct Shape {
    /// Fewest and most buses.
    pub buses: (usize, usize),
    /// Least and largest reactance, pu.
    pub reactance: (f64, f64),
    /// Factor on each unit's curvature, drawn evenly in the logarithm.
    pub cost: (f64, f64),
    /// Chance of an outage, and of a load step.
    pub events: (f64, f64),
}

/// The shape of an ordinary area.
pub const ORDINARY: Shape =
    Shape { buses: (5, 64), reactance: (0.003, 0.06), cost: (1.0, 1.0), events: (0.5, 0.5) };

struct Line {
    from: usize,
    to: usize,
    x: f64,
    rating: f64,
    closed: bool,
}

struct Unit {
    bus: usize,
    base: f64,
    normal: (f64, f64),
    emergency: (f64, f64),
    curvature: f64,
}

struct Tie {
    bus: usize,
    x: f64,
    export: f64,
    meshed: bool,
}

/// A random area.
pub struct Area {
    loads: Vec<f64>,
    lines: Vec<Line>,
    units: Vec<Unit>,
    feeders: Vec<(usize, f64)>,
    ties: Vec<Tie>,
    /// Mid-tie angles of the base case, rad.
    angles: Vec<f64>,
}

impl Area {
    /// Draw an area.
    pub fn random(seed: u64, shape: Shape) -> Self {
        let mut chance = Chance::new(seed);
        let n = shape.buses.0 + chance.below(shape.buses.1 - shape.buses.0 + 1);
        let mut area = Self {
            loads: (0..n).map(|_| chance.between(0.2, 3.0)).collect(),
            lines: draw_lines(&mut chance, n, shape),
            units: draw_units(&mut chance, n, shape),
            feeders: vec![],
            ties: draw_ties(&mut chance, n),
            angles: vec![],
        };
        area.balance();
        area.feeders = draw_feeders(&mut chance, &area.loads);
        area.settle_base(&mut chance);
        let step = chance.share() < shape.events.1;
        if chance.share() < shape.events.0 {
            area.trip(&mut chance);
        }
        if step {
            let capacity: f64 = area.units.iter().map(|unit| unit.emergency.1).sum();
            area.loads[chance.below(n)] += chance.between(0.01, 0.12) * capacity;
        }
        area
    }

    /// Scale the loads so that units, loads and exports balance.
    fn balance(&mut self) {
        let supply: f64 = self.units.iter().map(|unit| unit.base).sum();
        let export: f64 = self.ties.iter().map(|tie| tie.export).sum();
        let load: f64 = self.loads.iter().sum();
        let factor = (supply - export) / load;
        self.loads.iter_mut().for_each(|load| *load *= factor);
    }

    /// Ratings and mid-tie angles from the base flows.
    fn settle_base(&mut self, chance: &mut Chance) {
        let factor = chance.between(1.15, 1.5);
        let angle = self.base_angle();
        for line in &mut self.lines {
            let flow = (angle[line.from] - angle[line.to]) / line.x;
            line.rating = factor * flow.abs().max(1.0);
        }
        self.angles =
            self.ties.iter().map(|tie| angle[tie.bus] - 0.5 * tie.x * tie.export).collect();
    }

    fn base_angle(&self) -> Vec<f64> {
        let mut injection: Vec<f64> = self.loads.iter().map(|load| -load).collect();
        self.units.iter().for_each(|unit| injection[unit.bus] += unit.base);
        self.ties.iter().for_each(|tie| injection[tie.bus] -= tie.export);
        product(&self.inverse(), &injection)
    }

    /// Open a line that does not cut the area, if a few draws find one.
    fn trip(&mut self, chance: &mut Chance) {
        for _ in 0..10 {
            let line = chance.below(self.lines.len().max(1));
            if line >= self.lines.len() {
                return;
            }
            self.lines[line].closed = false;
            if self.is_connected() {
                return;
            }
            self.lines[line].closed = true;
        }
    }

    fn is_connected(&self) -> bool {
        let mut seen = vec![false; self.loads.len()];
        seen[0] = true;
        for _ in 0..self.loads.len() {
            for line in self.lines.iter().filter(|line| line.closed) {
                let either = seen[line.from] || seen[line.to];
                (seen[line.from], seen[line.to]) = (either, either);
            }
        }
        seen.iter().all(|&seen| seen)
    }

    /// Inverse Laplacian of the closed lines, bus 0 grounded.
    fn inverse(&self) -> Vec<Vec<f64>> {
        let closed = self.lines.iter().filter(|line| line.closed);
        let lines: Vec<_> = closed.map(|line| (line.from, line.to, line.x)).collect();
        inverse(laplacian(self.loads.len(), &lines))
    }

    /// The problem of a rung (0 `keep` to 3 `shed`), physical pu.
    pub fn programme(&self, rung: u8) -> Programme {
        let x = self.inverse();
        let fixed = self.fixed_injection();
        let weights = self.row_weights(&x);
        let (a, n_eq) = self.matrix(&weights);
        let (mut l, mut r) = (vec![], vec![]);
        for (i, weight) in weights.iter().enumerate() {
            let known: f64 = weight.iter().zip(&fixed).map(|(w, f)| w * f).sum();
            let (low, high) = match i.checked_sub(n_eq) {
                None if i == 0 => (0.0, 0.0),
                None => (self.angle_difference(i), self.angle_difference(i)),
                Some(line) => (-self.lines[line].rating, self.lines[line].rating),
            };
            l.push(low - known);
            r.push(high - known);
        }
        let mut programme = Programme {
            a,
            l,
            r,
            lo: vec![],
            hi: vec![],
            q: vec![],
            x0: vec![],
            w: vec![],
            kinds: vec![],
            n_eq,
        };
        self.add_columns(rung, &mut programme);
        programme
    }

    /// Injections that no unknown moves: loads and agreed exports.
    fn fixed_injection(&self) -> Vec<f64> {
        let mut fixed: Vec<f64> = self.loads.iter().map(|load| -load).collect();
        self.ties.iter().for_each(|tie| fixed[tie.bus] -= tie.export);
        fixed
    }

    fn meshed(&self) -> Vec<usize> {
        let meshed: Vec<usize> =
            (0..self.ties.len()).filter(|&tie| self.ties[tie].meshed).collect();
        if meshed.len() < 2 { vec![] } else { meshed }
    }

    fn angle_scale(&self) -> f64 {
        let meshed = self.meshed();
        meshed.len() as f64 / meshed.iter().map(|&tie| self.ties[tie].x).sum::<f64>()
    }

    /// Right side of angle row `i`, apart from what injections contribute.
    fn angle_difference(&self, i: usize) -> f64 {
        let meshed = self.meshed();
        let side = |tie: usize| self.angles[tie] + 0.5 * self.ties[tie].x * self.ties[tie].export;
        self.angle_scale() * (side(meshed[i]) - side(meshed[0]))
    }

    /// Weight of an injection at each bus in each row.
    fn row_weights(&self, x: &[Vec<f64>]) -> Vec<Vec<f64>> {
        let mut rows = vec![vec![1.0; self.loads.len()]];
        let meshed = self.meshed();
        let difference = |p: usize, q: usize, factor: f64| -> Vec<f64> {
            x[p].iter().zip(&x[q]).map(|(p, q)| factor * (p - q)).collect()
        };
        for &tie in meshed.iter().skip(1) {
            let (own, first) = (self.ties[tie].bus, self.ties[meshed[0]].bus);
            rows.push(difference(own, first, self.angle_scale()));
        }
        for line in &self.lines {
            let b = if line.closed { 1.0 / line.x } else { 0.0 };
            rows.push(difference(line.from, line.to, b));
        }
        rows
    }

    fn matrix(&self, weights: &[Vec<f64>]) -> (Vec<Vec<f64>>, usize) {
        let meshed = self.meshed();
        let n_eq = meshed.len().max(1);
        let row = |(i, weight): (usize, &Vec<f64>)| {
            let units = self.units.iter().map(|unit| weight[unit.bus]);
            let feeders = self.feeders.iter().map(|&(bus, _)| weight[bus]);
            let share = |tie: usize| match meshed.iter().position(|&m| m == tie) {
                Some(place) if i > 0 && i < n_eq && (place == 0 || place == i) => {
                    let sign = if place == 0 { 1.0 } else { -1.0 };
                    sign * self.angle_scale() * self.ties[tie].x
                }
                _ => 0.0,
            };
            let all = 0..self.ties.len();
            let flows = all.clone().map(|tie| 0.5 * share(tie) - weight[self.ties[tie].bus]);
            units.chain(feeders).chain(flows).chain(all.map(share)).collect()
        };
        (weights.iter().enumerate().map(row).collect(), n_eq)
    }

    fn add_columns(&self, rung: u8, p: &mut Programme) {
        let mut add = |range: (f64, f64), curvature: f64, target: f64, weight: f64, kind: Kind| {
            p.lo.push(range.0);
            p.hi.push(range.1);
            p.q.push(curvature);
            p.x0.push(target);
            p.w.push(weight);
            p.kinds.push(kind);
        };
        for unit in &self.units {
            let range = if rung >= 2 { unit.emergency } else { unit.normal };
            add(range, unit.curvature, unit.base, 0.0, Kind::Unit);
        }
        for &(_, load) in &self.feeders {
            add((0.0, if rung >= 3 { load } else { 0.0 }), 1.0, 0.0, 60.0, Kind::Other);
        }
        let open = if rung >= 1 { 1.0 } else { 0.0 };
        for _ in &self.ties {
            add((-open, open), 5.05, 0.0, 3.0, Kind::Other);
        }
        let meshed = self.meshed();
        for tie in 0..self.ties.len() {
            let band = if meshed.contains(&tie) { 2.0 * open } else { 0.0 };
            add((-band, band), 5.05, 0.0, 0.0, Kind::Other);
        }
    }
}

/// A random tree, then further lines until there are 1.2 to 1.5 per bus.
fn draw_lines(chance: &mut Chance, n: usize, shape: Shape) -> Vec<Line> {
    let target = (chance.between(1.2, 1.5) * n as f64) as usize;
    let mut ends: Vec<(usize, usize)> = vec![];
    for bus in 1..n {
        // Near buses first, so that the area is long rather than a star.
        let back = 1 + chance.below(bus.min(6));
        ends.push((bus - back, bus));
    }
    let most = n * (n - 1) / 2;
    while ends.len() < target.min(most) {
        let (from, to) = (chance.below(n), chance.below(n));
        let pair = (from.min(to), from.max(to));
        if from != to && !ends.contains(&pair) {
            ends.push(pair);
        }
    }
    let (low, high) = shape.reactance;
    ends.into_iter()
        .map(|(from, to)| Line {
            from,
            to,
            x: chance.decades(low, high),
            rating: 0.0,
            closed: true,
        })
        .collect()
}

fn draw_units(chance: &mut Chance, n: usize, shape: Shape) -> Vec<Unit> {
    let mut units = vec![];
    for _ in 0..(n / 4).max(1) {
        let capacity = chance.between(2.0, 10.0);
        let base = chance.between(0.5, 0.8) * capacity;
        let factor = if shape.cost.0 < shape.cost.1 {
            chance.decades(shape.cost.0, shape.cost.1)
        } else {
            shape.cost.0
        };
        units.push(Unit {
            bus: chance.below(n),
            base,
            normal: (0.4 * capacity, 0.9 * capacity),
            emergency: (0.2 * capacity, 1.05 * capacity),
            curvature: factor * 6.0 * chance.between(1.0, 8.0) / capacity,
        });
    }
    for _ in 0..1 + chance.below(2) {
        let bus = chance.below(n);
        let range = (-1.5, 1.5);
        units.push(Unit { bus, base: 0.0, normal: range, emergency: range, curvature: 8.0 });
    }
    units
}

fn draw_feeders(chance: &mut Chance, loads: &[f64]) -> Vec<(usize, f64)> {
    let n = loads.len();
    let mut buses: Vec<usize> = (0..n).collect();
    let count = (0.4 * n as f64) as usize;
    for place in 0..count {
        let other = place + chance.below(n - place);
        buses.swap(place, other);
    }
    buses[..count]
        .iter()
        .map(|&bus| (bus, chance.between(0.3, 0.9) * loads[bus].max(0.0)))
        .collect()
}

fn draw_ties(chance: &mut Chance, n: usize) -> Vec<Tie> {
    let count = 1 + chance.below(4);
    let meshed = chance.below(count + 1);
    (0..count)
        .map(|tie| Tie {
            bus: chance.below(n),
            x: chance.between(0.01, 0.05),
            export: chance.between(-1.0, 1.0),
            meshed: tie < meshed,
        })
        .collect()
}

fn product(a: &[Vec<f64>], x: &[f64]) -> Vec<f64> {
    a.iter().map(|row| row.iter().zip(x).map(|(a, x)| a * x).sum()).collect()
}
