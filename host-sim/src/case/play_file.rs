//! Reading a play file into the model.
//!
//! Contract: a play is read against a grid that has passed its checks; events
//! come out in order of time, those of one time in file order. Settings that are
//! absent take the values of `defaults`.

use std::path::Path;

use toml::de::DeTable;

use super::bounds::Bounds;
use super::builtin::builtin_grid;
use super::capacity::fits_largest_steward;
use super::defaults;
use super::fields::Fields;
use super::grid_file::ANY_MW;
use super::marks::{Marks, Names};
use super::model::{Event, Grid, Happening, Links, Play, Run, StewardSettings};
use super::problems::{Problem, Problems};
use super::tables::{read_list, read_root, read_table};
use super::timeline;
use super::{read_grid, read_text};

const PLAY_TABLES: [&str; 6] = ["grid", "title", "run", "steward", "links", "event"];
/// Longest run in s: a day.
const DURATION_S_MAX: f64 = 86_400.0;
/// A time or length within a run, in s.
const SOME_S: Bounds = Bounds::within(0.0, DURATION_S_MAX);
/// A chance.
const CHANCE: Bounds = Bounds::within(0.0, 1.0);

/// Read and check a play file and the grid it names (absent = the built-in one).
///
/// The grid's path is relative to the play file. Errors: everything that is
/// wrong with the grid, or else everything that is wrong with the play.
pub fn read_play(path: &Path) -> Result<(Grid, Play), Problems> {
    let file = path.display().to_string();
    let text = read_text(path)?;
    let grid = match grid_of(&text) {
        None => builtin_grid(),
        Some((named, span)) => {
            let beside = path.parent().unwrap_or(Path::new("")).join(named);
            if !beside.is_file() {
                let problem = Problem::new(span, "there is no such grid file")
                    .found(format!("looked for {}", beside.display()))
                    .right("the path is relative to the play file; without `grid` the built-in one is used");
                return Err(Problems::of_text(&file, &text, vec![problem]));
            }
            read_grid(&beside)?
        }
    };
    let play = parse_play(&text, &file, &grid)?;
    Ok((grid, play))
}

/// The grid a play names, if it can be read that far.
fn grid_of(text: &str) -> Option<(String, std::ops::Range<usize>)> {
    let (root, _) = DeTable::parse_recoverable(text);
    let value = root.get_ref().get("grid")?;
    Some((value.get_ref().as_str()?.to_owned(), value.span()))
}

/// Read and check the text of a play against its grid.
///
/// Errors: everything that is wrong with it.
pub fn parse_play(text: &str, file_name: &str, grid: &Grid) -> Result<Play, Problems> {
    let mut log = Vec::new();
    let play = read(text, file_name, grid, &mut log);
    match play {
        Some(play) if log.is_empty() => Ok(play),
        _ => Err(Problems::of_text(file_name, text, log)),
    }
}

fn read(text: &str, file_name: &str, grid: &Grid, log: &mut Vec<Problem>) -> Option<Play> {
    let root = read_root(text, &PLAY_TABLES, log)?;
    let title = read_head(&root, text, grid, log);
    let (run, run_marks) = read_run(&root, log);
    let steward = read_steward(&root, grid.base_mva, log);
    let links = read_links(&root, log);
    let events = read_events(&root, grid, log);
    timeline::check(grid, &run, &run_marks, &events, log);
    let mut events: Vec<Event> = events.into_iter().map(|(event, _)| event).collect();
    events.sort_by(|a, b| a.at_s.total_cmp(&b.at_s));
    Some(Play { name: name_of(file_name), title, run, steward, links, events })
}

/// `dir/storm.play.toml` is called `storm`.
fn name_of(file_name: &str) -> String {
    let stem =
        Path::new(file_name).file_name().map_or(file_name.into(), |name| name.to_string_lossy());
    stem.trim_end_matches(".toml").trim_end_matches(".play").to_owned()
}

/// The keys above the first table.
fn read_head(root: &DeTable<'_>, text: &str, grid: &Grid, log: &mut Vec<Problem>) -> String {
    let first_line = 0..text.lines().next().map_or(0, str::len);
    let mut fields = Fields::new(root, first_line, "a play", log);
    let title = fields.maybe_text("title").unwrap_or_default().to_owned();
    fields.maybe_text("grid");
    let place = fields.place("grid");
    if let Err(sentences) = fits_largest_steward(grid) {
        for sentence in sentences {
            let problem = Problem::new(place.clone(), sentence)
                .found("a play runs one steward per area")
                .right("divide the area, or leave feeders out");
            fields.wrong(problem);
        }
    }
    title
}

fn read_run(root: &DeTable<'_>, log: &mut Vec<Problem>) -> (Run, Marks) {
    let mut run = Run {
        duration_s: 0.0,
        tick_s: defaults::TICK_S,
        plant_step_s: defaults::PLANT_STEP_S,
        seed: defaults::SEED,
    };
    let known = root.get("run").is_some();
    let Some((table, heading)) = read_table(root, "run", log) else {
        if !known {
            let problem = Problem::new(0..0, "table `[run]` is missing")
                .right("write `[run]` with `duration_s`, the length of the run");
            log.push(problem);
        }
        return (run, Marks::of_nothing());
    };
    let mut fields = Fields::new(table, heading, "[run]", log);
    run.duration_s = fields.need_number("duration_s", Bounds::within(1.0, DURATION_S_MAX));
    run.tick_s = fields.number("tick_s", run.tick_s, Bounds::within(0.02, 4.0));
    run.plant_step_s = fields.number("plant_step_s", run.plant_step_s, Bounds::within(0.0005, 0.1));
    run.seed = fields.whole("seed", run.seed, 0, i64::MAX as u64);
    (run, fields.finish())
}

fn read_steward(root: &DeTable<'_>, base_mva: f64, log: &mut Vec<Problem>) -> StewardSettings {
    let usual = defaults::steward(base_mva);
    let Some((table, heading)) = read_table(root, "steward", log) else {
        return usual;
    };
    let mut fields = Fields::new(table, heading, "[steward]", log);
    let settings = StewardSettings {
        iterations: fields.whole("iterations", usual.iterations.into(), 1, 2000) as u16,
        shadow_iterations: fields.whole(
            "shadow_iterations",
            usual.shadow_iterations.into(),
            1,
            2000,
        ) as u16,
        filter_s: fields.number("filter_s", usual.filter_s, Bounds::within(0.0, 60.0)),
        event_freeze_s: fields.number(
            "event_freeze_s",
            usual.event_freeze_s,
            Bounds::within(0.0, 60.0),
        ),
        tie_band_mw: fields.number(
            "tie_band_mw",
            usual.tie_band_mw,
            Bounds::within(0.0, 100_000.0),
        ),
        tie_price_per_pu: fields.number(
            "tie_price_per_pu",
            usual.tie_price_per_pu,
            Bounds::within(0.0, 1e6),
        ),
        proof_threshold_mw: fields.number(
            "proof_threshold_mw",
            usual.proof_threshold_mw,
            Bounds::above(0.0, 1000.0),
        ),
        assumed_load_damping: fields.number(
            "assumed_load_damping",
            usual.assumed_load_damping,
            Bounds::within(0.0, 10.0),
        ),
        help_hops: fields.whole("help_hops", usual.help_hops.into(), 0, 100) as u8,
    };
    fields.finish();
    settings
}

fn read_links(root: &DeTable<'_>, log: &mut Vec<Problem>) -> Links {
    let usual = defaults::links();
    let Some((table, heading)) = read_table(root, "links", log) else {
        return usual;
    };
    let mut fields = Fields::new(table, heading, "[links]", log);
    let links = Links {
        delay_ticks: fields.whole("delay_ticks", usual.delay_ticks.into(), 0, 1000) as u16,
        jitter_ticks: fields.whole("jitter_ticks", usual.jitter_ticks.into(), 0, 1000) as u16,
        loss: fields.number("loss", usual.loss, CHANCE),
        duplicate: fields.number("duplicate", usual.duplicate, CHANCE),
        reorder: fields.number("reorder", usual.reorder, CHANCE),
        corrupt: fields.number("corrupt", usual.corrupt, CHANCE),
        plant_too: fields.flag("plant_too", usual.plant_too),
    };
    fields.finish();
    links
}

/// What the names in events refer to.
struct Known {
    areas: Names,
    buses: Names,
    lines: Names,
    units: Names,
}

fn read_events(root: &DeTable<'_>, grid: &Grid, log: &mut Vec<Problem>) -> Vec<(Event, Marks)> {
    let known = Known {
        areas: Names::of(grid.areas.iter().map(|area| area.name.as_str())),
        buses: Names::of(grid.buses.iter().map(|bus| bus.name.as_str())),
        lines: Names::of(grid.lines.iter().map(|line| line.name.as_str())),
        units: Names::of(grid.units.iter().map(|unit| unit.name.as_str())),
    };
    let mut events = Vec::new();
    for (table, heading) in read_list(root, "event", log) {
        let mut fields = Fields::new(table, heading, "this event", log);
        let at_s = fields.need_number("at_s", SOME_S);
        match fields.need_choice("what", &KINDS) {
            Some(kind) => {
                let what = read_happening(kind, &mut fields, &known);
                events.push((Event { at_s, what }, fields.finish()));
            }
            // Without the kind nobody can say which keys belong to it.
            None => continue,
        }
    }
    events
}

/// Kind of an event, before its keys are read.
#[derive(Clone, Copy)]
enum Kind {
    LineTrip,
    LineClose,
    LoadStep,
    UnitTrip,
    UnitReturn,
    Schedule,
    BasePoint,
    StewardDies,
    StewardReturns,
    LinkOutage,
    RestoreLoad,
}

const KINDS: [(&str, Kind); 11] = [
    ("line-trip", Kind::LineTrip),
    ("line-close", Kind::LineClose),
    ("load-step", Kind::LoadStep),
    ("unit-trip", Kind::UnitTrip),
    ("unit-return", Kind::UnitReturn),
    ("schedule", Kind::Schedule),
    ("base-point", Kind::BasePoint),
    ("steward-dies", Kind::StewardDies),
    ("steward-returns", Kind::StewardReturns),
    ("link-outage", Kind::LinkOutage),
    ("restore-load", Kind::RestoreLoad),
];

fn read_happening(kind: Kind, fields: &mut Fields<'_, '_>, known: &Known) -> Happening {
    let line = |fields: &mut Fields<'_, '_>| fields.need_reference("line", "line", &known.lines);
    let unit = |fields: &mut Fields<'_, '_>| fields.need_reference("unit", "unit", &known.units);
    let area = |fields: &mut Fields<'_, '_>| fields.need_reference("area", "area", &known.areas);
    match kind {
        Kind::LineTrip => Happening::LineTrip { line: line(fields) },
        Kind::LineClose => Happening::LineClose { line: line(fields) },
        Kind::LoadStep => Happening::LoadStep {
            bus: fields.need_reference("bus", "bus", &known.buses),
            mw: fields.need_number("mw", ANY_MW),
        },
        Kind::UnitTrip => Happening::UnitTrip { unit: unit(fields) },
        Kind::UnitReturn => Happening::UnitReturn { unit: unit(fields) },
        Kind::Schedule => Happening::Schedule {
            line: line(fields),
            mw: fields.need_number("mw", ANY_MW),
            ramp_s: fields.number("ramp_s", 0.0, SOME_S),
        },
        Kind::BasePoint => Happening::BasePoint {
            unit: unit(fields),
            mw: fields.need_number("mw", ANY_MW),
            ramp_s: fields.number("ramp_s", 0.0, SOME_S),
        },
        Kind::StewardDies => Happening::StewardDies { area: area(fields) },
        Kind::StewardReturns => Happening::StewardReturns { area: area(fields) },
        Kind::LinkOutage => Happening::LinkOutage {
            areas: fields.need_two("areas", "area", &known.areas),
            for_s: fields.need_number("for_s", Bounds::above(0.0, DURATION_S_MAX)),
        },
        Kind::RestoreLoad => Happening::RestoreLoad { area: area(fields) },
    }
}
