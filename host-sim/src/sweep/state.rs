//! The grid between two stages of a cascade: what is closed, served and injected.
//!
//! Contract: the network is factorised once per set of closed lines and shared;
//! islands without a grid-forming unit in service are black. A sensitivity row
//! is one solve, kept for as long as the network is.

use std::collections::BTreeMap;
use std::rc::Rc;

use super::prepare::Prepared;
use crate::case::model::{Grid, UnitStatus};
use crate::grid::dc::{DcError, DcNetwork};

/// A factorised network with the sensitivity rows asked for so far.
pub struct Network {
    /// The factors.
    pub dc: DcNetwork,
    base_mva: f64,
    flow_rows: std::cell::RefCell<BTreeMap<usize, Rc<Vec<f64>>>>,
    mid_rows: std::cell::RefCell<BTreeMap<usize, Rc<Vec<f64>>>>,
}

impl Network {
    /// Factorise the closed lines.
    ///
    /// Errors: as [`DcNetwork::new`].
    pub fn new(grid: &Grid, closed: &[bool]) -> Result<Self, DcError> {
        Ok(Self {
            dc: DcNetwork::new(grid, closed)?,
            base_mva: grid.base_mva,
            flow_rows: Default::default(),
            mid_rows: Default::default(),
        })
    }

    /// Flow of a line per unit injected at each bus and taken at its island's reference.
    ///
    /// Errors: a failed solve.
    pub fn flow_row(&self, grid: &Grid, line: usize) -> Result<Rc<Vec<f64>>, DcError> {
        if let Some(row) = self.flow_rows.borrow().get(&line) {
            return Ok(Rc::clone(row));
        }
        let l = &grid.lines[line];
        let row =
            Rc::new(self.row(&[(l.from, 1.0), (l.to, -1.0)], self.base_mva / l.reactance_pu)?);
        self.flow_rows.borrow_mut().insert(line, Rc::clone(&row));
        Ok(row)
    }

    /// Mid-angle of a line over its reactance, per unit injected at each bus, in pu.
    ///
    /// Errors: a failed solve.
    pub fn mid_row(&self, grid: &Grid, line: usize) -> Result<Rc<Vec<f64>>, DcError> {
        if let Some(row) = self.mid_rows.borrow().get(&line) {
            return Ok(Rc::clone(row));
        }
        let l = &grid.lines[line];
        let row = Rc::new(self.row(&[(l.from, 0.5), (l.to, 0.5)], self.base_mva / l.reactance_pu)?);
        self.mid_rows.borrow_mut().insert(line, Rc::clone(&row));
        Ok(row)
    }

    /// Angle of one bus over a line's reactance, per unit injected at each bus, in pu.
    ///
    /// Errors: a failed solve.
    pub fn angle_row(&self, grid: &Grid, line: usize, bus: usize) -> Result<Vec<f64>, DcError> {
        self.row(&[(bus, 1.0)], self.base_mva / grid.lines[line].reactance_pu)
    }

    /// The grounded inverse is symmetric: one solve gives the answer to every bus.
    fn row(&self, terms: &[(usize, f64)], factor: f64) -> Result<Vec<f64>, DcError> {
        let mut at = vec![0.0; self.dc.island().len()];
        terms.iter().for_each(|&(bus, share)| at[bus] += share);
        let mut row = self.dc.angles_rad(&at)?;
        row.iter_mut().for_each(|r| *r *= factor);
        Ok(row)
    }
}

/// A stage of a cascade.
#[derive(Clone)]
pub struct State<'a> {
    /// Grid and base case.
    pub case: &'a Prepared,
    /// Lines in service.
    pub closed: Vec<bool>,
    /// Units in service.
    pub unit_in: Vec<bool>,
    /// Island of each bus; none = black.
    pub island: Vec<Option<usize>>,
    /// Number of live islands.
    pub islands: usize,
    /// Output of each unit in MW.
    pub output_mw: Vec<f64>,
    /// Load taken off per feeder in MW.
    pub shed_mw: Vec<f64>,
    /// Load lost at each bus beside its feeders, in MW.
    pub lost_mw: Vec<f64>,
    /// What damping and load relief add to each bus, in MW.
    pub relief_mw: Vec<f64>,
    /// Frequency deviation at rest of each island, in Hz.
    pub freq_dev_hz: Vec<f64>,
    /// Flow per line in MW.
    pub flow_mw: Vec<f64>,
    /// The network of the closed lines.
    pub network: Rc<Network>,
}

impl<'a> State<'a> {
    /// The base case.
    pub fn base(case: &'a Prepared, network: Rc<Network>) -> Self {
        let grid = &case.grid;
        let mut state = Self {
            case,
            closed: grid.lines.iter().map(|l| l.closed).collect(),
            unit_in: grid.units.iter().map(|u| u.status != UnitStatus::Off).collect(),
            island: vec![None; grid.buses.len()],
            islands: 0,
            output_mw: grid.units.iter().map(|u| u.base_mw).collect(),
            shed_mw: vec![0.0; grid.feeders.len()],
            lost_mw: vec![0.0; grid.buses.len()],
            relief_mw: vec![0.0; grid.buses.len()],
            freq_dev_hz: Vec::new(),
            flow_mw: case.base_flow_mw.clone(),
            network,
        };
        state.find_islands();
        state
    }

    /// Name the live islands; what has no grid-forming unit goes black with its units.
    pub fn find_islands(&mut self) {
        let grid = &self.case.grid;
        let part = self.network.dc.island();
        let count = part.iter().max().map_or(0, |m| m + 1);
        let mut live = vec![false; count];
        for (unit, u) in grid.units.iter().enumerate() {
            live[part[u.bus]] |= self.unit_in[unit] && u.forms_grid;
        }
        let mut number = vec![None; count];
        self.islands = 0;
        for (part, is_live) in live.iter().enumerate() {
            if *is_live {
                number[part] = Some(self.islands);
                self.islands += 1;
            }
        }
        self.island = part.iter().map(|&p| number[p]).collect();
        self.freq_dev_hz = vec![0.0; self.islands];
        for (unit, u) in grid.units.iter().enumerate() {
            self.unit_in[unit] &= self.island[u.bus].is_some();
            if !self.unit_in[unit] {
                self.output_mw[unit] = 0.0;
            }
        }
        for bus in 0..grid.buses.len() {
            if self.island[bus].is_none() {
                self.lost_mw[bus] = grid.buses[bus].load_mw.max(0.0);
                self.relief_mw[bus] = 0.0;
            }
        }
        for (feeder, f) in grid.feeders.iter().enumerate() {
            if self.island[f.bus].is_none() {
                self.shed_mw[feeder] = 0.0;
            }
        }
    }

    /// Load of a bus that can still be served, before its feeders are opened, in MW.
    pub fn load_mw(&self, bus: usize) -> f64 {
        if self.island[bus].is_none() {
            return 0.0;
        }
        self.case.grid.buses[bus].load_mw - self.lost_mw[bus]
    }

    /// Load served at each bus in MW.
    pub fn served_mw(&self) -> Vec<f64> {
        let grid = &self.case.grid;
        let mut served: Vec<f64> = (0..grid.buses.len()).map(|b| self.load_mw(b)).collect();
        for (f, shed) in grid.feeders.iter().zip(&self.shed_mw) {
            served[f.bus] -= shed;
        }
        served
    }

    /// Injection of each bus in MW; 0 where black.
    pub fn injection_mw(&self) -> Vec<f64> {
        let mut injection: Vec<f64> = self
            .served_mw()
            .iter()
            .zip(&self.relief_mw)
            .map(|(load, relief)| relief - load)
            .collect();
        for (unit, u) in self.case.grid.units.iter().enumerate() {
            if self.unit_in[unit] {
                injection[u.bus] += self.output_mw[unit];
            }
        }
        for (bus, value) in injection.iter_mut().enumerate() {
            if self.island[bus].is_none() {
                *value = 0.0;
            }
        }
        injection
    }

    /// Solve the flows of what is injected now.
    ///
    /// Errors: a failed solve.
    pub fn find_flows(&mut self) -> Result<(), DcError> {
        let angle = self.network.dc.angles_rad(&self.injection_mw())?;
        self.flow_mw = flows_mw(&self.case.grid, &self.closed, &angle);
        Ok(())
    }

    /// Load lost for good, shed by feeders, by relays, or black, in MW.
    pub fn load_lost_mw(&self) -> f64 {
        self.shed_mw.iter().sum::<f64>() + self.lost_mw.iter().sum::<f64>()
    }
}

/// Flows of angles in MW.
pub fn flows_mw(grid: &Grid, closed: &[bool], angle_rad: &[f64]) -> Vec<f64> {
    grid.lines
        .iter()
        .zip(closed)
        .map(|(l, &closed)| match closed {
            true => grid.base_mva / l.reactance_pu * (angle_rad[l.from] - angle_rad[l.to]),
            false => 0.0,
        })
        .collect()
}
