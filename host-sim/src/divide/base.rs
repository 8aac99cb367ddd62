//! The operating point that a division starts from, and the grid with its areas drawn.
//!
//! Contract: units stand at their base points, loads at nominal frequency; a
//! residual of the file (at most 0.1 MW) is put on the loads in proportion, as
//! the plant does. Opening ties moves no unit: the dispatch stays.

use crate::case::model::{Area, Grid, UnitStatus};
use crate::grid::dc::{DcError, DcNetwork};

/// Injections, angles and flows with the lines in service.
#[derive(Clone, Debug, PartialEq)]
pub struct BaseCase {
    /// Injection into each bus in MW; they add up to zero.
    pub injection_mw: Vec<f64>,
    /// Flow of each line in MW, 0 while open.
    pub flow_mw: Vec<f64>,
    /// Angle of each bus in rad.
    pub angle_rad: Vec<f64>,
    /// Lines in service.
    pub closed: Vec<bool>,
}

impl BaseCase {
    /// Solve the base case with the given lines in service.
    ///
    /// Errors: as [`DcNetwork::flows_mw`]; the lines must join all buses.
    pub fn new(grid: &Grid, closed: Vec<bool>) -> Result<Self, DcError> {
        let injection_mw = injections_mw(grid);
        let solution = DcNetwork::new(grid, &closed)?.flows_mw(&injection_mw)?;
        Ok(Self { injection_mw, flow_mw: solution.flow_mw, angle_rad: solution.angle_rad, closed })
    }

    /// The base case with the lines that the file has in service.
    ///
    /// Errors: as [`BaseCase::new`].
    pub fn of_file(grid: &Grid) -> Result<Self, DcError> {
        Self::new(grid, grid.lines.iter().map(|line| line.closed).collect())
    }

    /// Loading of a line: flow over continuous rating; 0 without a rating.
    pub fn loading(&self, grid: &Grid, line: usize) -> f64 {
        self.flow_mw[line].abs() / grid.lines[line].rating_mw
    }

    /// The most loaded line in service and its loading.
    pub fn worst(&self, grid: &Grid) -> (f64, Option<usize>) {
        (0..grid.lines.len()).fold((0.0, None), |worst, line| {
            let loading = self.loading(grid, line);
            if loading > worst.0 { (loading, Some(line)) } else { worst }
        })
    }
}

/// Injection into each bus: base points less loads, the file's residual on the loads.
///
/// Units: MW.
/// Sign: into the bus positive.
pub fn injections_mw(grid: &Grid) -> Vec<f64> {
    let mut injection_mw: Vec<f64> = grid.buses.iter().map(|bus| -bus.load_mw).collect();
    for unit in grid.units.iter().filter(|unit| unit.status != UnitStatus::Off) {
        injection_mw[unit.bus] += unit.base_mw;
    }
    let load_mw: f64 = grid.buses.iter().map(|bus| bus.load_mw.abs()).sum();
    let residual_mw: f64 = injection_mw.iter().sum();
    if load_mw > 0.0 {
        for (injection, bus) in injection_mw.iter_mut().zip(&grid.buses) {
            *injection -= residual_mw * bus.load_mw.abs() / load_mw;
        }
    }
    injection_mw
}

/// The same grid with other areas: their names are numbers, their lowest rung
/// the most cautious of the file's; agreed flows no longer mean anything.
pub fn with_areas(grid: &Grid, area_of_bus: &[usize], count: usize) -> Grid {
    let lowest_rung = grid.areas.iter().map(|area| area.lowest_rung).min().unwrap_or(0);
    let mut drawn = grid.clone();
    drawn.areas = (1..=count).map(|n| Area { name: format!("Area {n}"), lowest_rung }).collect();
    for (bus, &area) in drawn.buses.iter_mut().zip(area_of_bus) {
        bus.area = area;
    }
    for line in &mut drawn.lines {
        line.schedule_mw = None;
    }
    drawn
}

/// Whether a line joins two areas.
pub fn is_tie(grid: &Grid, line: usize) -> bool {
    let line = &grid.lines[line];
    grid.buses[line.from].area != grid.buses[line.to].area
}
