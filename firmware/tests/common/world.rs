//! A quasi-steady plant: flows follow injections at once, droop shares what is missing.
//!
//! Contract: in every tick outputs less sheds, loads and exports balance in the
//! piece with most capacity; the rest is dark. No lag, no swing: what is left is
//! what the steward decides.

use super::area::Area;
use super::dense::{inverse_laplacian, pieces};
use super::snapshot::{Said, Snapshot};
use hedgerow_protocol::message::Reading;

/// The plant's state, pu.
#[derive(Clone, Debug)]
pub struct World {
    /// The area.
    pub area: Area,
    /// Load per bus, feeders included.
    pub load: Vec<f64>,
    /// Export per tie.
    pub export: Vec<f64>,
    /// Set-point per unit.
    pub setpoint: Vec<f64>,
    /// Load taken off per feeder.
    pub shed: Vec<f64>,
    /// Breaker status per line.
    pub line_closed: Vec<bool>,
    /// Breaker status per tie.
    pub tie_closed: Vec<bool>,
    /// Breaker status per unit.
    pub unit_on: Vec<bool>,
}

impl World {
    /// At rest on the base case.
    pub fn new(area: &Area) -> Self {
        Self {
            load: area.load.clone(),
            export: area.ties.iter().map(|tie| tie.schedule.into()).collect(),
            setpoint: area.units.iter().map(|unit| unit.base.into()).collect(),
            shed: vec![0.0; area.feeders.len()],
            line_closed: vec![true; area.lines.len()],
            tie_closed: vec![true; area.ties.len()],
            unit_on: vec![true; area.units.len()],
            area: area.clone(),
        }
    }

    /// Buses of the piece with most unit capacity in service.
    pub fn kept(&self) -> Vec<bool> {
        let piece = pieces(self.area.buses, &self.area.lines, &self.line_closed);
        let mut capacity = vec![0.0; self.area.buses];
        for (unit, on) in self.area.units.iter().zip(&self.unit_on) {
            if *on {
                capacity[piece[usize::from(unit.bus)]] += unit.emergency_high;
            }
        }
        let best = (0..capacity.len()).max_by(|&i, &j| capacity[i].total_cmp(&capacity[j]));
        piece.iter().map(|&number| Some(number) == best).collect()
    }

    /// Load that a feeder carries, or carried.
    fn feeder_load(&self, index: usize) -> f64 {
        let feeder = &self.area.feeders[index];
        let bus = usize::from(feeder.bus);
        0.6 * self.load[bus]
    }

    /// Net injection per bus without what droop adds, and the capacity of droop.
    fn injection(&self, kept: &[bool]) -> (Vec<f64>, f64) {
        let mut injection: Vec<f64> = self.load.iter().map(|load| -load).collect();
        let mut droop = 0.0;
        for (index, unit) in self.area.units.iter().enumerate() {
            let bus = usize::from(unit.bus);
            if self.unit_on[index] && kept[bus] {
                injection[bus] += self.setpoint[index];
                droop += f64::from(unit.droop_pu_per_hz);
            }
        }
        for (feeder, shed) in self.area.feeders.iter().zip(&self.shed) {
            injection[usize::from(feeder.bus)] += shed;
        }
        for (index, tie) in self.area.ties.iter().enumerate() {
            if self.tie_closed[index] {
                injection[usize::from(tie.bus)] -= self.export[index];
            }
        }
        (injection, droop)
    }

    /// What the meters show.
    pub fn measure(&self) -> Snapshot {
        let kept = self.kept();
        let (mut injection, droop) = self.injection(&kept);
        let missing: f64 = injection.iter().zip(&kept).filter(|(_, k)| **k).map(|(p, _)| -p).sum();
        let freq_dev_hz = -missing / droop;
        let mut output = Vec::new();
        for (index, unit) in self.area.units.iter().enumerate() {
            let bus = usize::from(unit.bus);
            let live = self.unit_on[index] && kept[bus];
            let response = -f64::from(unit.droop_pu_per_hz) * freq_dev_hz;
            if live {
                injection[bus] += response;
            }
            output.push(if live { self.setpoint[index] + response } else { 0.0 });
        }
        let root = kept.iter().position(|&kept| kept).unwrap();
        let lines = &self.area.lines;
        let x = inverse_laplacian(self.area.buses, lines, &self.line_closed, &kept, root);
        let angle: Vec<f64> =
            x.iter().map(|row| row.iter().zip(&injection).map(|(x, p)| x * p).sum()).collect();
        let flow = lines.iter().zip(&self.line_closed).map(|(line, &closed)| {
            let across = angle[usize::from(line.from)] - angle[usize::from(line.to)];
            if closed { f64::from(line.susceptance) * across } else { 0.0 }
        });
        let mw = |pu: f64| Reading::fresh((100.0 * pu) as f32);
        let exports = self.export.iter().zip(&self.tie_closed);
        let feeders = 0..self.shed.len();
        Snapshot {
            freq_dev_hz: vec![Reading::fresh(freq_dev_hz as f32); self.area.meters.len()],
            line_flow_mw: flow.map(mw).collect(),
            tie_flow_mw: exports.map(|(&t, &on)| mw(if on { t } else { 0.0 })).collect(),
            output_mw: output.into_iter().map(mw).collect(),
            shed_mw: self.shed.iter().map(|&shed| mw(shed)).collect(),
            feeder_load_mw: feeders.map(|index| mw(self.feeder_load(index))).collect(),
            line_closed: self.line_closed.clone(),
            tie_closed: self.tie_closed.clone(),
            unit_in_service: self.unit_on.clone(),
        }
    }

    /// Follow what was said.
    pub fn obey(&mut self, said: &Said) {
        for (index, unit) in self.area.units.iter().enumerate() {
            if unit.available {
                self.setpoint[index] = f64::from(said.setpoint_mw[index]) / 100.0;
            }
        }
        for index in 0..self.shed.len() {
            let most = self.feeder_load(index);
            self.shed[index] = (f64::from(said.shed_mw[index]) / 100.0).min(most);
        }
    }
}
