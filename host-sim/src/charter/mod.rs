//! Charters: an area of the grid turned into the bytes its steward boots with.
//!
//! Contract: [`compile`] makes one charter per area from a checked grid and the
//! settings of a play; the bytes hold everything the steward knows. [`Area`]
//! keeps the host's side: which bus, line or unit of the grid stands at which
//! place of the charter, and the f64 figures with which [`proof`] re-checks
//! what a steward claims.
//!
//! Data flow: base-case DC flow -> schedules and mid-tie angles; internal
//! Laplacian, inverted in f64 -> sensitivities; settings -> per-tick figures.

pub mod proof;
mod settings;

pub use settings::TIE_CURVATURE;

use crate::case::model::{FeederKind, Grid, Play, Restore, Unit, UnitKind, UnitStatus};
use crate::grid::dc::{DcError, DcNetwork, DcSolution};
use crate::grid::graph::blocks;
use hedgerow_protocol::charter::{self as wire, CHARTER_FORMAT, CharterWriter};
use hedgerow_protocol::message::Refusal;
use nalgebra::DMatrix;
use thiserror::Error;

/// Room for the largest charter: 2016 sensitivities of 4 bytes and the records.
const CHARTER_BYTES_MAX: usize = 24 * 1024;
/// What an unlimited rating or ramp is written as, in pu.
const UNLIMITED_PU: f64 = 1e5;
/// Curvature of the price of shed load, per pu squared: small against the price,
/// so that equal prices share evenly.
pub const FEEDER_CURVATURE: f64 = 1.0;

/// Why an area can not be chartered.
#[derive(Clone, Debug, Error, PartialEq)]
pub enum CharterError {
    /// The base case has no DC flow.
    #[error("the base case has no DC flow: {0}")]
    BaseCase(#[from] DcError),
    /// The area is larger than any steward.
    #[error("area {area} does not fit a charter: {what}")]
    Capacity {
        /// Name of the area.
        area: String,
        /// What is too large.
        what: String,
    },
    /// The area's internal lines do not join its buses.
    #[error(
        "area {area}: its internal lines do not join all its buses, so it has no sensitivities"
    )]
    Singular {
        /// Name of the area.
        area: String,
    },
}

/// Where the parts of an area stand in grid and charter. Each list holds grid indices in charter order.
#[derive(Clone, Debug, Default)]
pub struct Area {
    /// Index of the area; its steward's address is one more.
    pub index: usize,
    /// The charter.
    pub bytes: Vec<u8>,
    /// Buses.
    pub buses: Vec<usize>,
    /// Internal lines.
    pub lines: Vec<usize>,
    /// Ties.
    pub ties: Vec<usize>,
    /// Whether this area is at each tie's `from` end.
    pub from_end: Vec<bool>,
    /// Whether each tie lies on a loop of areas.
    pub meshed: Vec<bool>,
    /// Area at the other end of each tie.
    pub neighbour: Vec<usize>,
    /// Units.
    pub units: Vec<usize>,
    /// Feeders.
    pub feeders: Vec<usize>,
    /// Buses with a frequency meter.
    pub meters: Vec<usize>,
}

impl Area {
    /// Address of the area's steward.
    pub fn address(&self) -> u8 {
        (self.index + 1) as u8
    }

    /// Place of a grid bus in the charter, if it is one of the area's.
    pub fn local_bus(&self, bus: usize) -> Option<usize> {
        self.buses.iter().position(|&own| own == bus)
    }
}

/// The agreed flow of every line at the start in MW: the file's, else the base case's (0 for lines that are no ties).
///
/// Errors: the base case has no DC flow.
pub fn schedules_mw(grid: &Grid) -> Result<Vec<f64>, CharterError> {
    let base = base_case(grid)?;
    let of = |(line, l): (usize, &crate::case::model::Line)| {
        let is_tie = grid.buses[l.from].area != grid.buses[l.to].area;
        let agreed = l.schedule_mw.unwrap_or(base.flow_mw[line]);
        if is_tie && l.closed { agreed } else { 0.0 }
    };
    Ok(grid.lines.iter().enumerate().map(of).collect())
}

/// Charters of all areas, in the grid's order.
///
/// Errors: [`CharterError`].
pub fn compile(grid: &Grid, play: &Play) -> Result<Vec<Area>, CharterError> {
    let base = base_case(grid)?;
    let schedules = schedules_mw(grid)?;
    let meshed = meshed_lines(grid);
    (0..grid.areas.len())
        .map(|index| {
            let mut area = places(grid, index, &meshed);
            area.bytes = write(grid, play, &area, &base.angle_rad, &schedules)?;
            Ok(area)
        })
        .collect()
}

fn base_case(grid: &Grid) -> Result<DcSolution, CharterError> {
    let closed: Vec<bool> = grid.lines.iter().map(|line| line.closed).collect();
    let mut injection: Vec<f64> = grid.buses.iter().map(|bus| -bus.load_mw).collect();
    for unit in grid.units.iter().filter(|unit| unit.status != UnitStatus::Off) {
        injection[unit.bus] += unit.base_mw;
    }
    // A file may be out of balance by the checked 0.1 MW; the loads take it, as in the plant.
    let (sum, load): (f64, f64) =
        (injection.iter().sum(), grid.buses.iter().map(|bus| bus.load_mw).sum());
    if load > 0.0 {
        for (value, bus) in injection.iter_mut().zip(&grid.buses) {
            *value -= sum * bus.load_mw / load;
        }
    }
    Ok(DcNetwork::new(grid, &closed)?.flows_mw(&injection)?)
}

/// Ties on a loop of areas: their mid-tie angles must be held too.
fn meshed_lines(grid: &Grid) -> Vec<bool> {
    let ends: Vec<(usize, usize)> = grid
        .lines
        .iter()
        .map(|line| (grid.buses[line.from].area, grid.buses[line.to].area))
        .collect();
    let closed: Vec<bool> = grid.lines.iter().map(|line| line.closed).collect();
    let found = blocks(grid.areas.len(), &ends, &closed);
    let ties = ends.iter().zip(&found.is_bridge).zip(&closed);
    ties.map(|((&(a, b), &bridge), &closed)| a != b && closed && !bridge).collect()
}

fn places(grid: &Grid, index: usize, meshed: &[bool]) -> Area {
    let area_of = |bus: usize| grid.buses[bus].area;
    let own = |bus: usize| area_of(bus) == index;
    let mut area = Area { index, ..Area::default() };
    area.buses = (0..grid.buses.len()).filter(|&bus| own(bus)).collect();
    for (number, line) in grid.lines.iter().enumerate() {
        match (own(line.from), own(line.to)) {
            (true, true) => area.lines.push(number),
            (false, false) => {}
            (from_end, _) => {
                area.ties.push(number);
                area.from_end.push(from_end);
                area.meshed.push(meshed[number]);
                area.neighbour.push(area_of(if from_end { line.to } else { line.from }));
            }
        }
    }
    let with = |bus: usize| own(bus);
    area.units = (0..grid.units.len()).filter(|&unit| with(grid.units[unit].bus)).collect();
    area.feeders = (0..grid.feeders.len()).filter(|&f| with(grid.feeders[f].bus)).collect();
    area.meters = area.buses.iter().copied().filter(|&bus| inertia(grid, bus) > 0.0).collect();
    if area.meters.is_empty() {
        area.meters = area.buses.clone();
    }
    area
}

/// Inertia behind a bus in MW s.
fn inertia(grid: &Grid, bus: usize) -> f64 {
    let here = grid.units.iter().filter(|unit| unit.bus == bus && unit.status != UnitStatus::Off);
    here.map(|unit| unit.inertia_s * unit.rating_mva).sum()
}

fn write(
    grid: &Grid,
    play: &Play,
    area: &Area,
    angle_rad: &[f64],
    schedules: &[f64],
) -> Result<Vec<u8>, CharterError> {
    let sensitivity = sensitivities(grid, area)?;
    let mut buffer = vec![0; CHARTER_BYTES_MAX];
    let mut writer = CharterWriter::new(&mut buffer);
    let full = |_: Refusal| CharterError::Capacity {
        area: grid.areas[area.index].name.clone(),
        what: format!("its records take more than {CHARTER_BYTES_MAX} bytes"),
    };
    writer.put(&header(grid, play, area)?).map_err(full)?;
    for &line in &area.lines {
        writer.put(&line_record(grid, area, line)).map_err(full)?;
    }
    for place in 0..area.ties.len() {
        let record = tie_record(grid, area, place, angle_rad, schedules);
        writer.put(&record).map_err(full)?;
    }
    for &unit in &area.units {
        writer.put(&unit_record(grid, area, &grid.units[unit])).map_err(full)?;
    }
    for &feeder in &area.feeders {
        writer.put(&feeder_record(grid, area, feeder)).map_err(full)?;
    }
    for &bus in &area.meters {
        let weight = inertia(grid, bus);
        let weight = if weight > 0.0 { weight as f32 } else { 1.0 };
        writer.put(&wire::Meter { bus: local(area, bus), weight }).map_err(full)?;
    }
    for row in 0..sensitivity.nrows() {
        for col in 0..=row {
            writer.put(&(sensitivity[(row, col)] as f32)).map_err(full)?;
        }
    }
    writer.finish().map(<[u8]>::to_vec).map_err(full)
}

fn header<'a>(grid: &'a Grid, play: &Play, area: &Area) -> Result<wire::Header<'a>, CharterError> {
    let name = grid.areas[area.index].name.as_str();
    let count = |what: &str, len: usize, most: usize| {
        u8::try_from(len).ok().filter(|_| len <= most).ok_or_else(|| CharterError::Capacity {
            area: name.to_owned(),
            what: format!("it has {len} {what}, the largest steward holds {most}"),
        })
    };
    use hedgerow_protocol::limits as most;
    Ok(wire::Header {
        format: CHARTER_FORMAT,
        address: count("areas before it", area.index + 1, 254)?,
        name,
        base_mva: grid.base_mva as f32,
        nominal_hz: grid.nominal_hz as f32,
        buses: count("buses", area.buses.len(), most::BUSES_MAX)?,
        lines: count("internal lines", area.lines.len(), most::LINES_MAX)?,
        ties: count("ties", area.ties.len(), most::TIES_MAX)?,
        units: count("units", area.units.len(), most::UNITS_MAX)?,
        feeders: count("feeders", area.feeders.len(), most::FEEDERS_MAX)?,
        meters: count("frequency meters", area.meters.len(), most::BUSES_MAX)?,
        settings: settings::per_tick(grid, play, area),
    })
}

fn local(area: &Area, bus: usize) -> u8 {
    area.local_bus(bus).unwrap_or(0) as u8
}

fn pu(grid: &Grid, mw: f64) -> f32 {
    (mw / grid.base_mva).clamp(-UNLIMITED_PU, UNLIMITED_PU) as f32
}

fn line_record(grid: &Grid, area: &Area, line: usize) -> wire::Line {
    let l = &grid.lines[line];
    wire::Line {
        from: local(area, l.from),
        to: local(area, l.to),
        susceptance: (1.0 / l.reactance_pu) as f32,
        rating: pu(grid, l.rating_mw),
        metered: l.metered,
        closed: l.closed,
    }
}

fn tie_record(
    grid: &Grid,
    area: &Area,
    place: usize,
    angle_rad: &[f64],
    schedules: &[f64],
) -> wire::Tie {
    let line = area.ties[place];
    let l = &grid.lines[line];
    let from_end = area.from_end[place];
    let middle = 0.5 * (angle_rad[l.from] + angle_rad[l.to]);
    wire::Tie {
        number: line as u16,
        bus: local(area, if from_end { l.from } else { l.to }),
        neighbour: (area.neighbour[place] + 1) as u8,
        reactance: l.reactance_pu as f32,
        rating: pu(grid, l.rating_mw),
        schedule: pu(grid, if from_end { schedules[line] } else { -schedules[line] }),
        angle: (middle - angle_rad[area.buses[0]]) as f32,
        from_end,
        meshed: area.meshed[place],
        closed: l.closed,
    }
}

fn unit_record(grid: &Grid, area: &Area, unit: &Unit) -> wire::Unit {
    let droop_mw_per_hz = unit
        .droop_percent
        .map_or(0.0, |percent| unit.rating_mva / (percent / 100.0 * grid.nominal_hz));
    wire::Unit {
        bus: local(area, unit.bus),
        available: unit.status == UnitStatus::Available,
        storage: unit.kind == UnitKind::Battery,
        base: pu(grid, unit.base_mw),
        low: pu(grid, unit.min_mw + unit.reserve_down_mw),
        high: pu(grid, unit.max_mw - unit.reserve_up_mw),
        emergency_low: pu(grid, unit.emergency_min_mw),
        emergency_high: pu(grid, unit.emergency_max_mw),
        cost: unit.cost_per_pu2 as f32,
        ramp: pu(grid, unit.ramp_mw_per_s),
        droop_pu_per_hz: pu(grid, droop_mw_per_hz),
    }
}

fn feeder_record(grid: &Grid, area: &Area, feeder: usize) -> wire::Feeder {
    let f = &grid.feeders[feeder];
    wire::Feeder {
        bus: local(area, f.bus),
        load: pu(grid, f.load_mw),
        price: f.price_per_pu as f32,
        curvature: FEEDER_CURVATURE as f32,
        switched: f.kind == FeederKind::Switched,
        automatic: f.restore == Restore::Automatic,
    }
}

/// Inverse Laplacian of the closed internal lines, grounded at the area's first bus.
fn sensitivities(grid: &Grid, area: &Area) -> Result<DMatrix<f64>, CharterError> {
    let free = area.buses.len() - 1;
    let mut laplacian = DMatrix::<f64>::zeros(free, free);
    for &line in area.lines.iter().filter(|&&line| grid.lines[line].closed) {
        let l = &grid.lines[line];
        let b = 1.0 / l.reactance_pu;
        let ends = [l.from, l.to].map(|bus| area.local_bus(bus).and_then(|at| at.checked_sub(1)));
        for end in ends.into_iter().flatten() {
            laplacian[(end, end)] += b;
        }
        if let [Some(i), Some(j)] = ends {
            laplacian[(i, j)] -= b;
            laplacian[(j, i)] -= b;
        }
    }
    if free == 0 {
        return Ok(laplacian);
    }
    laplacian
        .try_inverse()
        .filter(|inverse| inverse.iter().all(|value| value.is_finite()))
        .ok_or_else(|| CharterError::Singular { area: grid.areas[area.index].name.clone() })
}
