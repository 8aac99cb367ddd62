//! Reading a grid file into the model, with the places of its values.
//!
//! Contract: [`parse_grid`] returns a grid that passed every check, or every
//! problem. Order: syntax (nothing else if it fails), `format`, tables, areas,
//! buses, lines, units and feeders, then the checks across entries.

use toml::de::DeTable;

use super::bounds::Bounds;
use super::defaults;
use super::fields::Fields;
use super::marks::{Marks, Names};
use super::model::{
    Area, Bus, Feeder, FeederKind, Grid, Line, OnSilence, Restore, Unit, UnitKind, UnitStatus,
};
use super::problems::{Problem, Problems};
use super::tables::{read_list, read_root, read_table};
use super::validate;

/// Largest power the files may state, in MW: far above any single plant or line.
pub(crate) const POWER_MW_MAX: f64 = 100_000.0;
/// Any power, either sign.
pub(crate) const ANY_MW: Bounds = Bounds::within(-POWER_MW_MAX, POWER_MW_MAX);
/// A power that cannot be negative.
const SOME_MW: Bounds = Bounds::within(0.0, POWER_MW_MAX);
/// A power that must be there.
const REAL_MW: Bounds = Bounds::above(0.0, POWER_MW_MAX);

const GRID_TABLES: [&str; 6] = ["grid", "area", "bus", "line", "unit", "feeder"];

/// The words of the rungs, deepest last.
pub(crate) const RUNGS: [(&str, u8); 4] = [("keep", 0), ("lean", 1), ("stretch", 2), ("shed", 3)];

/// Where the entries of a grid stood.
#[derive(Debug, Default)]
pub(crate) struct GridMarks {
    /// `[grid]`.
    pub grid: Marks,
    /// Areas.
    pub areas: Vec<Marks>,
    /// Buses.
    pub buses: Vec<Marks>,
    /// Lines.
    pub lines: Vec<Marks>,
    /// Units.
    pub units: Vec<Marks>,
    /// Feeders.
    pub feeders: Vec<Marks>,
}

/// Read and check the text of a grid file.
///
/// Errors: everything that is wrong with it.
pub fn parse_grid(text: &str, file_name: &str) -> Result<Grid, Problems> {
    let mut log = Vec::new();
    let grid = read(text, &mut log);
    match grid {
        Some(grid) if log.is_empty() => Ok(grid),
        _ => Err(Problems::of_text(file_name, text, log)),
    }
}

/// Read the grid of a text; none after a syntax error.
fn read(text: &str, log: &mut Vec<Problem>) -> Option<Grid> {
    let root = read_root(text, &GRID_TABLES, log)?;
    let (grid, marks) = read_tables(&root, log);
    validate::check(&grid, &marks, log);
    Some(grid)
}

/// Read every table of a grid.
fn read_tables(root: &DeTable<'_>, log: &mut Vec<Problem>) -> (Grid, GridMarks) {
    let mut marks = GridMarks::default();
    let (mut grid, place) = read_head(root, log);
    marks.grid = place;
    for (table, heading) in read_list(root, "area", log) {
        let (area, place) = read_area(Fields::new(table, heading, "an area", log));
        grid.areas.push(area);
        marks.areas.push(place);
    }
    let areas = Names::of(grid.areas.iter().map(|area| area.name.as_str()));
    for (table, heading) in read_list(root, "bus", log) {
        let (bus, place) = read_bus(Fields::new(table, heading, "a bus", log), &areas);
        grid.buses.push(bus);
        marks.buses.push(place);
    }
    let buses = Names::of(grid.buses.iter().map(|bus| bus.name.as_str()));
    for (table, heading) in read_list(root, "line", log) {
        let (line, place) =
            read_line(Fields::new(table, heading, "a line", log), &buses, &grid.buses);
        grid.lines.push(line);
        marks.lines.push(place);
    }
    for (table, heading) in read_list(root, "unit", log) {
        let (unit, place) =
            read_unit(Fields::new(table, heading, "a unit", log), &buses, grid.base_mva);
        grid.units.push(unit);
        marks.units.push(place);
    }
    for (table, heading) in read_list(root, "feeder", log) {
        let (feeder, place) = read_feeder(Fields::new(table, heading, "a feeder", log), &buses);
        grid.feeders.push(feeder);
        marks.feeders.push(place);
    }
    (grid, marks)
}

fn read_head(root: &DeTable<'_>, log: &mut Vec<Problem>) -> (Grid, Marks) {
    let mut grid = Grid {
        name: String::new(),
        base_mva: defaults::BASE_MVA,
        nominal_hz: defaults::NOMINAL_HZ,
        areas: Vec::new(),
        buses: Vec::new(),
        lines: Vec::new(),
        units: Vec::new(),
        feeders: Vec::new(),
    };
    let known = root.get("grid").is_some();
    let Some((table, heading)) = read_table(root, "grid", log) else {
        if !known {
            let problem = Problem::new(0..0, "table `[grid]` is missing")
                .right("write `[grid]` with the `name` of the grid");
            log.push(problem);
        }
        return (grid, Marks::default());
    };
    let mut fields = Fields::new(table, heading, "the grid", log);
    grid.name = fields.need_name();
    grid.base_mva = fields.number("base_mva", defaults::BASE_MVA, Bounds::within(0.001, 10_000.0));
    grid.nominal_hz =
        fields.number("nominal_hz", defaults::NOMINAL_HZ, Bounds::within(15.0, 450.0));
    (grid, fields.finish())
}

fn read_area(mut fields: Fields<'_, '_>) -> (Area, Marks) {
    let area =
        Area { name: fields.need_name(), lowest_rung: fields.choice("lowest_rung", &RUNGS, 3) };
    (area, fields.finish())
}

fn read_bus(mut fields: Fields<'_, '_>, areas: &Names) -> (Bus, Marks) {
    let bus = Bus {
        name: fields.need_name(),
        area: fields.need_reference("area", "area", areas),
        load_mw: fields.number("load_mw", 0.0, SOME_MW),
        load_damping: fields.number(
            "load_damping",
            defaults::LOAD_DAMPING,
            Bounds::within(0.0, 10.0),
        ),
        damping_mw_per_hz: fields.number("damping_mw_per_hz", 0.0, SOME_MW),
        position: fields.maybe_pair("position"),
    };
    (bus, fields.finish())
}

fn read_line(mut fields: Fields<'_, '_>, names: &Names, buses: &[Bus]) -> (Line, Marks) {
    let from = fields.need_reference("from", "bus", names);
    let to = fields.need_reference("to", "bus", names);
    let called = |at: usize| buses.get(at).map_or("", |bus| bus.name.as_str());
    let line = Line {
        name: fields.name_or(|| format!("{}-{}", called(from), called(to))),
        from,
        to,
        reactance_pu: fields.need_number("reactance_pu", Bounds::within(-10.0, 10.0)),
        rating_mw: fields.number("rating_mw", f64::INFINITY, REAL_MW),
        rating_short_mw: fields.maybe_number("rating_short_mw", REAL_MW),
        rating_short_min: fields.maybe_number("rating_short_min", Bounds::above(0.0, 240.0)),
        metered: fields.flag("metered", true),
        closed: fields.flag("closed", true),
        schedule_mw: fields.maybe_number("schedule_mw", ANY_MW),
    };
    (line, fields.finish())
}

const KINDS: [(&str, UnitKind); 6] = [
    ("steam", UnitKind::Steam),
    ("gas", UnitKind::Gas),
    ("hydro", UnitKind::Hydro),
    ("wind", UnitKind::Wind),
    ("solar", UnitKind::Solar),
    ("battery", UnitKind::Battery),
];

const STATUSES: [(&str, UnitStatus); 3] =
    [("available", UnitStatus::Available), ("fixed", UnitStatus::Fixed), ("off", UnitStatus::Off)];

const SILENCES: [(&str, OnSilence); 3] =
    [("last", OnSilence::Last), ("schedule", OnSilence::Schedule), ("zero", OnSilence::Zero)];

fn read_unit(mut fields: Fields<'_, '_>, buses: &Names, base_mva: f64) -> (Unit, Marks) {
    let name = fields.need_name();
    let bus = fields.need_reference("bus", "bus", buses);
    let kind = fields.need_choice("kind", &KINDS).unwrap_or(UnitKind::Steam);
    let status = fields.choice("status", &STATUSES, UnitStatus::Available);
    let usual = defaults::of_kind(kind);
    let max_mw = fields.need_number("max_mw", ANY_MW);
    // A battery takes in what it can give; others stop at standstill.
    let lowest_mw = if kind == UnitKind::Battery { -max_mw } else { 0.0 };
    let min_mw = fields.number("min_mw", lowest_mw, ANY_MW);
    let base_mw = match status {
        UnitStatus::Off => fields.number("base_mw", 0.0, ANY_MW),
        UnitStatus::Available | UnitStatus::Fixed => fields.need_number("base_mw", ANY_MW),
    };
    let rating_mva = fields.number("rating_mva", max_mw, REAL_MW);
    let ramp = Bounds::above(0.0, POWER_MW_MAX).or_endless();
    let ramp_mw_per_s = usual.ramp_percent_per_s / 100.0 * rating_mva;
    let cost = defaults::cost_per_pu2(kind, rating_mva, base_mva);
    let unit = Unit {
        name,
        bus,
        kind,
        status,
        rating_mva,
        base_mw,
        min_mw,
        max_mw,
        emergency_min_mw: fields.number("emergency_min_mw", min_mw, ANY_MW),
        emergency_max_mw: fields.number("emergency_max_mw", max_mw, ANY_MW),
        reserve_up_mw: fields.number("reserve_up_mw", 0.0, SOME_MW),
        reserve_down_mw: fields.number("reserve_down_mw", 0.0, SOME_MW),
        ramp_mw_per_s: fields.number("ramp_mw_per_s", ramp_mw_per_s, ramp),
        cost_per_pu2: fields.number("cost_per_pu2", cost, Bounds::within(0.001, 1_000_000.0)),
        inertia_s: fields.number("inertia_s", usual.inertia_s, Bounds::within(0.0, 30.0)),
        droop_percent: read_droop(&mut fields, usual.droop_percent),
        damping_pu: fields.number("damping_pu", usual.damping_pu, Bounds::within(0.0, 100.0)),
        lag_s: fields.number("lag_s", usual.lag_s, Bounds::within(0.0, 100.0)),
        energy_mwh: fields.maybe_number("energy_mwh", Bounds::above(0.0, 1_000_000.0)),
        energy_start: fields.number(
            "energy_start",
            defaults::ENERGY_START,
            Bounds::within(0.0, 1.0),
        ),
        forms_grid: fields.flag("forms_grid", usual.forms_grid),
        may_trip: fields.flag("may_trip", false),
        gain_error: fields.number("gain_error", 0.0, Bounds::within(-0.5, 0.5)),
        bias_mw: fields.number("bias_mw", 0.0, ANY_MW),
        on_silence: fields.choice("on_silence", &SILENCES, OnSilence::Schedule),
    };
    (unit, fields.finish())
}

/// Droop in per cent; `inf` says that there is no governor.
fn read_droop(fields: &mut Fields<'_, '_>, usual: Option<f64>) -> Option<f64> {
    let bounds = Bounds::within(0.1, 100.0).or_endless();
    match fields.maybe_number("droop_percent", bounds) {
        Some(droop) => Some(droop).filter(|droop| droop.is_finite()),
        None => usual,
    }
}

fn read_feeder(mut fields: Fields<'_, '_>, buses: &Names) -> (Feeder, Marks) {
    let kinds = [("continuous", FeederKind::Continuous), ("switched", FeederKind::Switched)];
    let restores = [("operator", Restore::Operator), ("automatic", Restore::Automatic)];
    let price = Bounds::within(0.1, 1_000_000.0);
    let feeder = Feeder {
        name: fields.need_name(),
        bus: fields.need_reference("bus", "bus", buses),
        load_mw: fields.need_number("load_mw", REAL_MW),
        kind: fields.choice("kind", &kinds, FeederKind::Continuous),
        restore: fields.choice("restore", &restores, Restore::Operator),
        price_per_pu: fields.number("price_per_pu", defaults::SHED_PRICE_PER_PU, price),
    };
    (feeder, fields.finish())
}
