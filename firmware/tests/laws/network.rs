//! Outages and reclosings of internal lines against a recomputation in f64.
//!
//! Method: matrix inversion lemma (O. Alsac, B. Stott, W. Tinney, 1983), as in the
//! module under test; the tolerances are the project's own requirements.

use crate::common::dense::Matrix;
use crate::common::{Area, Network32, Plan32, Rng, inverse_laplacian, is_bridge};
use hedgerow_firmware::network::{CUT_DENOMINATOR, Change, LoadPart};
use proptest::prelude::*;

const ROOM: usize = 64;

/// A network and what it should be.
struct Pair {
    area: Area,
    plan: Plan32,
    network: Network32,
    part: LoadPart<ROOM>,
    closed: Vec<bool>,
}

impl Pair {
    fn new(buses: usize, seed: u64) -> Self {
        let area = Area::random(buses, seed);
        let mut plan = Plan32::new();
        plan.load(&area.charter()).unwrap();
        let mut network = Network32::new();
        network.start(&plan);
        let closed = vec![true; area.lines.len()];
        let mut pair = Self { area, plan, network, part: LoadPart::new(), closed };
        pair.part = pair.expected_part();
        pair
    }

    fn kept(&self) -> Vec<bool> {
        (0..self.area.buses).map(|bus| self.network.is_kept(bus)).collect()
    }

    fn x(&self) -> Matrix {
        let lines = &self.area.lines;
        let root = self.network.root();
        inverse_laplacian(self.area.buses, lines, &self.closed, &self.kept(), root)
    }

    fn strength(&self) -> [f32; 32] {
        let mut strength = [0.0; 32];
        for unit in &self.area.units {
            strength[usize::from(unit.bus)] += unit.emergency_high;
        }
        strength
    }

    /// At rest P - R_u p - R_t t = -H d over the kept buses, the angles -X d.
    fn expected_part(&self) -> LoadPart<ROOM> {
        let (x, kept) = (self.x(), self.kept());
        let load = |bus: usize| if kept[bus] { self.area.load[bus] } else { 0.0 };
        let angle: Vec<f64> = x
            .iter()
            .map(|row| row.iter().enumerate().map(|(bus, x)| -x * load(bus)).sum())
            .collect();
        let mut part = LoadPart::new();
        part.load = (0..self.area.buses).map(load).sum::<f64>() as f32;
        for (index, line) in self.area.lines.iter().enumerate() {
            let (from, to) = (usize::from(line.from), usize::from(line.to));
            if self.closed[index] && kept[from] && kept[to] {
                part.flow[index] = (f64::from(line.susceptance) * (angle[from] - angle[to])) as f32;
            }
        }
        for (index, tie) in self.area.ties.iter().enumerate() {
            part.angle[index] = angle[usize::from(tie.bus)] as f32;
        }
        part
    }

    fn open(&mut self, index: usize) -> Change {
        self.closed[index] = false;
        let strength = self.strength();
        self.network.open(&self.plan, index, &mut self.part, &strength)
    }

    fn close(&mut self, index: usize) -> Change {
        self.closed[index] = true;
        let strength = self.strength();
        self.network.close(&self.plan, index, &mut self.part, &strength)
    }

    /// `1 - b (a_f - a_t)` in f64.
    fn denominator(&self, index: usize) -> f64 {
        let (x, line) = (self.x(), &self.area.lines[index]);
        let (f, t) = (usize::from(line.from), usize::from(line.to));
        1.0 - f64::from(line.susceptance) * (x[f][f] - 2.0 * x[f][t] + x[t][t])
    }

    /// The denominator as the steward's own sensitivities give it.
    fn denominator32(&self, index: usize) -> f32 {
        let line = &self.area.lines[index];
        1.0 - self.network.weight(line, line.from.into())
            + self.network.weight(line, line.to.into())
    }

    fn live_lines(&self) -> Vec<usize> {
        let lines = self.area.lines.iter().enumerate();
        lines.filter(|(i, line)| self.network.is_live(*i, line)).map(|(i, _)| i).collect()
    }

    /// Largest error of a live row, per unit of injection.
    fn row_error(&self) -> f64 {
        let x = self.x();
        let mut worst = 0.0_f64;
        for index in self.live_lines() {
            let line = &self.area.lines[index];
            let ends = x[usize::from(line.from)].iter().zip(&x[usize::from(line.to)]);
            for (bus, (from, to)) in ends.enumerate() {
                let exact = f64::from(line.susceptance) * (from - to);
                worst = worst.max((f64::from(self.network.weight(line, bus)) - exact).abs());
            }
        }
        worst
    }

    /// What f32 sensitivities allow the load part to be off, pu: 1e-4 after one
    /// change; later ones amplify it by the loads that flow, 5e-5 of the area's load.
    fn allowance(&self, changes: usize) -> f64 {
        let load: f64 = self.area.load.iter().sum();
        if changes > 1 { f64::max(1e-4, 5e-5 * load) } else { 1e-4 }
    }

    fn part_error(&self) -> (f64, String) {
        let exact = self.expected_part();
        let gap = |a: f32, b: f32| (f64::from(a) - f64::from(b)).abs();
        let load = gap(self.part.load, exact.load);
        let flows = self.part.flow.iter().zip(&exact.flow).map(|(&a, &b)| gap(a, b));
        let flow = flows.fold(0.0, f64::max);
        let kept = self.kept();
        let ties = self.area.ties.iter().zip(self.part.angle).zip(exact.angle);
        let angle = ties
            .filter(|((tie, _), _)| kept[usize::from(tie.bus)])
            .fold(0.0, |worst: f64, ((_, a), b)| worst.max(gap(a, b)));
        (load.max(flow).max(angle), format!("load {load:.1e} flow {flow:.1e} angle {angle:.1e}"))
    }

    fn relative_x_error(&self, before: &Network32) -> f32 {
        let size = before.x().iter().fold(0.0_f32, |most, x| most.max(x.abs()));
        let gaps = self.network.x().iter().zip(before.x().iter()).map(|(a, b)| (a - b).abs());
        gaps.fold(0.0, f32::max) / size
    }
}

proptest! {
    #[test]
    fn five_outages_leave_rows_and_load_part_exact(buses in 5_usize..=32, seed in any::<u64>()) {
        let mut pair = Pair::new(buses, seed);
        let mut rng = Rng::new(seed);
        for outage in 0..5 {
            let live = pair.live_lines();
            if live.is_empty() {
                break;
            }
            let index = live[rng.index(live.len())];
            let bridge = is_bridge(buses, &pair.area.lines, &pair.closed, index);
            let change = pair.open(index);
            prop_assert_eq!(change, if bridge { Change::Cut } else { Change::Exact });
            prop_assert!(pair.row_error() < 1e-4, "outage {outage}: rows {:e}", pair.row_error());
            let (error, which) = pair.part_error();
            let allowed = pair.allowance(outage + 1);
            prop_assert!(error < allowed, "outage {outage}, bridge {bridge}: {which}");
            for bus in 0..buses {
                let probe = pair.network.probe(&pair.plan, bus);
                prop_assert!(!pair.network.is_kept(bus) || probe < 1e-3, "probe {probe:e}");
            }
        }
    }

    #[test]
    fn denominator_tells_bridges_from_all_other_lines(buses in 5_usize..=32, seed in any::<u64>()) {
        let mut pair = Pair::new(buses, seed);
        let mut rng = Rng::new(seed);
        for _ in 0..3 {
            let mut loops = Vec::new();
            for index in pair.live_lines() {
                let bridge = is_bridge(buses, &pair.area.lines, &pair.closed, index);
                let (exact, own) = (pair.denominator(index), pair.denominator32(index));
                prop_assert_eq!(own < CUT_DENOMINATOR, bridge, "line {}: {} {}", index, exact, own);
                if !bridge {
                    loops.push(index);
                }
            }
            if loops.is_empty() {
                break;
            }
            pair.open(loops[rng.index(loops.len())]);
        }
    }

    #[test]
    fn outage_and_reclosing_give_back_the_sensitivities(buses in 5_usize..=32, seed in any::<u64>()) {
        let mut pair = Pair::new(buses, seed);
        let mut rng = Rng::new(seed);
        let before = pair.network.clone();
        let mut opened = Vec::new();
        for _ in 0..1 + rng.index(5) {
            let live = pair.live_lines();
            let index = live[rng.index(live.len())];
            if !is_bridge(buses, &pair.area.lines, &pair.closed, index) {
                prop_assert_eq!(pair.open(index), Change::Exact);
                opened.push(index);
            }
        }
        let allowed = pair.allowance(opened.len());
        while let Some(index) = opened.pop() {
            prop_assert_eq!(pair.close(index), Change::Exact);
            let (error, which) = pair.part_error();
            prop_assert!(error < allowed, "{which}");
        }
        prop_assert!(pair.relative_x_error(&before) < 1e-5, "{:e}", pair.relative_x_error(&before));
    }

    #[test]
    fn a_lost_piece_comes_back_whole(buses in 5_usize..=32, seed in any::<u64>()) {
        let mut pair = Pair::new(buses, seed);
        let bridge = pair
            .live_lines()
            .into_iter()
            .find(|&index| is_bridge(buses, &pair.area.lines, &pair.closed, index));
        prop_assume!(bridge.is_some());
        let index = bridge.unwrap();
        prop_assert_eq!(pair.open(index), Change::Cut);
        let strength = pair.strength();
        let capacity = |kept: bool| -> f32 {
            (0..buses).filter(|&bus| pair.network.is_kept(bus) == kept).map(|b| strength[b]).sum()
        };
        prop_assert!(capacity(true) >= capacity(false) - 1e-4, "the weaker piece was kept");
        prop_assert_eq!(pair.close(index), Change::Relearn);
        prop_assert!((0..buses).all(|bus| pair.network.is_kept(bus)));
        prop_assert!(pair.row_error() < 1e-4, "{:e}", pair.row_error());
    }

    #[test]
    fn sensitivities_stay_symmetric_to_the_bit(buses in 5_usize..=32, seed in any::<u64>()) {
        let mut pair = Pair::new(buses, seed);
        let mut rng = Rng::new(seed);
        for _ in 0..4 {
            let live = pair.live_lines();
            if live.is_empty() {
                break;
            }
            let index = live[rng.index(live.len())];
            if !is_bridge(buses, &pair.area.lines, &pair.closed, index) {
                pair.open(index);
            }
            let x = pair.network.x();
            for i in 0..buses {
                for j in 0..i {
                    prop_assert_eq!(x[(i, j)].to_bits(), x[(j, i)].to_bits());
                }
            }
        }
    }
}

#[test]
fn a_line_opened_twice_or_closed_twice_changes_nothing() {
    let mut pair = Pair::new(8, 3);
    let before = pair.network.x().clone_owned();
    assert_eq!(pair.close(0), Change::None);
    assert_eq!(pair.network.x(), &before);
    pair.open(0);
    let after = pair.network.x().clone_owned();
    assert_eq!(pair.open(0), Change::None);
    assert_eq!(pair.network.x(), &after);
}
