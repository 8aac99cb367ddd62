//! A random connected area, at rest on its base points, and its charter.
//!
//! Sizes: buses as asked, 1.2 to 1.5 lines a bus, a unit for every four buses
//! and a battery, feeders on large loads, one to four ties; reactances 0.01 to
//! 0.06 pu (the 39-bus system, from memory: 0.005 to 0.06), loads up to 1.5 pu a
//! bus, ratings 1.3 times the base flow.

use super::dense::{Matrix, inverse_laplacian};
use super::rng::Rng;
use hedgerow_protocol::charter::{
    CHARTER_FORMAT, CharterWriter, Feeder, Header, Line, Meter, Settings, Tie, Unit,
};

/// An area, its base loads included.
#[derive(Clone, Debug)]
pub struct Area {
    /// Number of buses.
    pub buses: usize,
    /// Internal lines.
    pub lines: Vec<Line>,
    /// Ties.
    pub ties: Vec<Tie>,
    /// Units.
    pub units: Vec<Unit>,
    /// Feeders.
    pub feeders: Vec<Feeder>,
    /// Meters.
    pub meters: Vec<Meter>,
    /// Settings.
    pub settings: Settings,
    /// Load per bus, pu.
    pub load: Vec<f64>,
}

/// The defaults of the law at a tick of 100 ms.
pub fn settings() -> Settings {
    Settings {
        tick_s: 0.1,
        iterations: 50,
        shadow_iterations: 25,
        filter_gain: 0.048_770_577,
        envelope_keep: 0.951_229_4,
        freeze_ticks: 30,
        damping_pu_per_hz: 0.0,
        lowest_rung: 3,
        tie_band: 1.0,
        angle_band: 2.0,
        tie_price: 3.0,
        tie_curvature: 0.05,
        agreement_penalty: 5.0,
        agreement_relax: 0.5,
        settle_ticks: 2,
        help_hops: 4,
        neighbour_ticks: 20,
        proof_threshold: 0.002,
        proof_ticks: 5,
        persist_ticks: 100,
        climb_ticks: 50,
        climb_margin: 0.01,
        climb_tolerance: 0.002,
        dual_clamp: 2000.0,
        return_ramp: 0.05,
        return_free_hz: 0.01,
    }
}

impl Area {
    /// A random area.
    pub fn random(buses: usize, seed: u64) -> Self {
        let mut rng = Rng::new(seed ^ 0x48_45_44_47);
        let mut area = Self {
            buses,
            lines: random_lines(buses, &mut rng),
            ties: Vec::new(),
            units: Vec::new(),
            feeders: Vec::new(),
            meters: Vec::new(),
            settings: settings(),
            load: (0..buses)
                .map(|_| if rng.chance(0.7) { rng.between(0.1, 1.5) } else { 0.0 })
                .collect(),
        };
        area.load[buses - 1] += 0.5;
        area.add_ties(&mut rng);
        area.add_units(&mut rng);
        area.add_feeders(&mut rng);
        area.settle();
        area
    }

    fn add_ties(&mut self, rng: &mut Rng) {
        let count = 1 + rng.index(4);
        let meshed = count > 1 && rng.chance(0.6);
        let total: f64 = self.load.iter().sum();
        for index in 0..count {
            self.ties.push(Tie {
                number: 100 + index as u16,
                bus: rng.index(self.buses) as u8,
                neighbour: 2 + (index % 3) as u8,
                reactance: rng.between32(0.02, 0.1),
                rating: 3.0,
                schedule: rng.between32(-0.1, 0.1) * total as f32,
                angle: 0.0,
                from_end: rng.chance(0.5),
                meshed,
                closed: true,
            });
        }
    }

    fn add_units(&mut self, rng: &mut Rng) {
        let count = (self.buses / 4).max(2);
        let shares: Vec<f64> = (0..count).map(|_| rng.between(0.3, 1.0)).collect();
        let exports: f64 = self.ties.iter().map(|tie| f64::from(tie.schedule)).sum();
        let need = self.load.iter().sum::<f64>() + exports;
        let whole: f64 = shares.iter().sum();
        for (index, share) in shares.iter().enumerate() {
            let base = (need * share / whole) as f32;
            self.units.push(Unit {
                bus: rng.index(self.buses) as u8,
                available: index == 0 || rng.chance(0.9),
                storage: false,
                base,
                low: 0.4 * base,
                high: 1.15 * base + 0.1,
                emergency_low: 0.2 * base,
                emergency_high: 1.3 * base + 0.2,
                cost: 6.0 * rng.between32(1.0, 8.0) / base.max(0.3),
                ramp: 0.01 * base,
                droop_pu_per_hz: base.max(0.2) * 0.4,
            });
        }
        self.units.push(Unit {
            bus: rng.index(self.buses) as u8,
            available: true,
            storage: true,
            base: 0.0,
            low: -1.0,
            high: 1.0,
            emergency_low: -1.5,
            emergency_high: 1.5,
            cost: 12.0,
            ramp: 1.0,
            droop_pu_per_hz: 0.1,
        });
        for unit in &self.units {
            if !self.meters.iter().any(|meter| meter.bus == unit.bus) {
                self.meters.push(Meter { bus: unit.bus, weight: rng.between32(1.0, 6.0) });
            }
        }
    }

    fn add_feeders(&mut self, rng: &mut Rng) {
        for bus in 0..self.buses {
            if self.load[bus] > 0.6 && self.feeders.len() < 14 {
                self.feeders.push(Feeder {
                    bus: bus as u8,
                    load: 0.6 * self.load[bus] as f32,
                    price: 60.0,
                    curvature: 1.0,
                    switched: rng.chance(0.25),
                    automatic: rng.chance(0.7),
                });
            }
        }
    }

    /// Balance the base case, then ratings and mid-tie angles from its flow.
    pub fn settle(&mut self) {
        let supply: f64 = self.units.iter().map(|unit| f64::from(unit.base)).sum();
        let exports: f64 = self.ties.iter().map(|tie| f64::from(tie.schedule)).sum();
        let load: f64 = self.load.iter().sum();
        for value in &mut self.load {
            *value *= (supply - exports) / load;
        }
        let angle = self.base_angles();
        for line in &mut self.lines {
            let across = angle[usize::from(line.from)] - angle[usize::from(line.to)];
            let flow = f64::from(line.susceptance) * across;
            line.rating = (1.3 * flow.abs().max(0.4)) as f32;
        }
        for tie in &mut self.ties {
            let half = 0.5 * f64::from(tie.reactance) * f64::from(tie.schedule);
            tie.angle = (angle[usize::from(tie.bus)] - half) as f32;
        }
    }

    fn base_angles(&self) -> Vec<f64> {
        let mut injection: Vec<f64> = self.load.iter().map(|load| -load).collect();
        for unit in &self.units {
            injection[usize::from(unit.bus)] += f64::from(unit.base);
        }
        for tie in &self.ties {
            injection[usize::from(tie.bus)] -= f64::from(tie.schedule);
        }
        let x = self.inverse();
        x.iter().map(|row| row.iter().zip(&injection).map(|(x, p)| x * p).sum()).collect()
    }

    /// Inverse Laplacian at boot.
    pub fn inverse(&self) -> Matrix {
        let closed: Vec<bool> = self.lines.iter().map(|line| line.closed).collect();
        inverse_laplacian(self.buses, &self.lines, &closed, &vec![true; self.buses], 0)
    }

    /// The header of its charter.
    pub fn header(&self) -> Header<'static> {
        Header {
            format: CHARTER_FORMAT,
            address: 1,
            name: "Fenwick",
            base_mva: 100.0,
            nominal_hz: 50.0,
            buses: self.buses as u8,
            lines: self.lines.len() as u8,
            ties: self.ties.len() as u8,
            units: self.units.len() as u8,
            feeders: self.feeders.len() as u8,
            meters: self.meters.len() as u8,
            settings: self.settings,
        }
    }

    /// Its charter.
    pub fn charter(&self) -> Vec<u8> {
        self.charter_with(&self.header(), 0)
    }

    /// Its charter under another header, with `extra` more sensitivities than belong there.
    pub fn charter_with(&self, header: &Header<'_>, extra: isize) -> Vec<u8> {
        let mut buffer = vec![0; 32 * 1024];
        let mut writer = CharterWriter::new(&mut buffer);
        writer.put(header).unwrap();
        self.lines.iter().for_each(|line| writer.put(line).unwrap());
        self.ties.iter().for_each(|tie| writer.put(tie).unwrap());
        self.units.iter().for_each(|unit| writer.put(unit).unwrap());
        self.feeders.iter().for_each(|feeder| writer.put(feeder).unwrap());
        self.meters.iter().for_each(|meter| writer.put(meter).unwrap());
        let x = self.inverse();
        let packed = (1..self.buses).flat_map(|row| x[row][1..=row].to_vec());
        let count = (self.buses * (self.buses - 1) / 2).saturating_add_signed(extra);
        for value in packed.chain([0.0; 4]).take(count) {
            writer.put(&(value as f32)).unwrap();
        }
        writer.finish().unwrap().to_vec()
    }
}

fn random_lines(buses: usize, rng: &mut Rng) -> Vec<Line> {
    let mut lines = Vec::new();
    let mut add = |from: usize, to: usize, rng: &mut Rng| {
        let (from, to) = if rng.chance(0.5) { (from, to) } else { (to, from) };
        lines.push(Line {
            from: from as u8,
            to: to as u8,
            susceptance: 1.0 / rng.between32(0.01, 0.06),
            rating: 1.0,
            metered: true,
            closed: true,
        });
    };
    for bus in 1..buses {
        let back = 1 + rng.index(bus.min(5));
        add(bus, bus - back, rng);
    }
    for _ in 0..buses.div_ceil(5) + rng.index(buses * 3 / 10 + 1) {
        let (a, step) = (rng.index(buses), 1 + rng.index(buses.min(8) - 1));
        let b = (a + step) % buses;
        if a != b {
            add(a, b, rng);
        }
    }
    lines
}
