//! Checks across the entries of a grid.
//!
//! Contract: logs every fault at the place of the value that is wrong; entries
//! already marked broken are left alone, and checks of the whole are skipped
//! where a broken entry would make them guess.

use super::grid_file::GridMarks;
use super::marks::Marks;
use super::model::{Bus, Feeder, Grid, Line, Unit, UnitKind, UnitStatus};
use super::network::check_network;
use super::problems::Problem;

/// Generation and load may differ by this much, in MW: rounding of a hand-written file.
pub(crate) const BALANCE_MW: f64 = 0.1;
/// Slack for sums and differences of figures written with a few digits, in MW.
const ROUNDING_MW: f64 = 1e-6;
/// Smallest reactance whose reciprocal keeps six digits beside ordinary ones, in pu.
const REACTANCE_PU_MIN: f64 = 1e-6;

/// Check a grid that has been read.
pub(crate) fn check(grid: &Grid, marks: &GridMarks, log: &mut Vec<Problem>) {
    check_names(grid, marks, log);
    check_areas(grid, marks, log);
    for (line, place) in sound(&grid.lines, &marks.lines) {
        // A bus in no known area would make a tie of any line that ends there.
        if !marks.buses[line.from].broken && !marks.buses[line.to].broken {
            check_line(line, &grid.buses, place, log);
        }
    }
    for (unit, place) in sound(&grid.units, &marks.units) {
        check_unit(unit, place, log);
    }
    check_feeders(grid, marks, log);
    let broken = |list: &[Marks]| list.iter().any(|place| place.broken);
    if broken(&marks.areas) || broken(&marks.buses) || grid.buses.is_empty() {
        return;
    }
    if !broken(&marks.units) {
        check_balance(grid, marks, log);
    }
    if !broken(&marks.lines) {
        check_network(grid, marks, log);
    }
}

/// Entries that were read without a fault.
fn sound<'a, T>(list: &'a [T], marks: &'a [Marks]) -> impl Iterator<Item = (&'a T, &'a Marks)> {
    list.iter().zip(marks).filter(|(_, place)| !place.broken)
}

fn check_names(grid: &Grid, marks: &GridMarks, log: &mut Vec<Problem>) {
    let mut unique = |noun: &str, names: Vec<&str>, marks: &[Marks]| {
        for (later, name) in names.iter().enumerate() {
            let first = names.iter().position(|other| other == name).unwrap_or(later);
            if first == later || name.is_empty() || marks[later].broken {
                continue;
            }
            let problem =
                Problem::new(marks[later].of("name"), format!("two {noun} are called `{name}`"))
                    .found("this name is taken")
                    .see(marks[first].of("name"), "first used here")
                    .right("give each a `name` of its own");
            log.push(problem);
        }
    };
    unique("areas", grid.areas.iter().map(|x| x.name.as_str()).collect(), &marks.areas);
    unique("buses", grid.buses.iter().map(|x| x.name.as_str()).collect(), &marks.buses);
    unique("lines", grid.lines.iter().map(|x| x.name.as_str()).collect(), &marks.lines);
    unique("units", grid.units.iter().map(|x| x.name.as_str()).collect(), &marks.units);
    unique("feeders", grid.feeders.iter().map(|x| x.name.as_str()).collect(), &marks.feeders);
}

fn check_areas(grid: &Grid, marks: &GridMarks, log: &mut Vec<Problem>) {
    if grid.areas.is_empty() {
        let problem = Problem::new(marks.grid.of("name"), "the grid has no area")
            .right("add an `[[area]]` with a `name`, and say `area = ...` at each bus");
        log.push(problem);
    }
    if grid.buses.is_empty() {
        let problem = Problem::new(marks.grid.of("name"), "the grid has no bus")
            .right("add a `[[bus]]` with a `name` and an `area`");
        log.push(problem);
    }
    if grid.buses.is_empty() || marks.buses.iter().any(|place| place.broken) {
        return;
    }
    for (index, (area, place)) in grid.areas.iter().zip(&marks.areas).enumerate() {
        if grid.buses.iter().all(|bus| bus.area != index) {
            let problem =
                Problem::new(place.of("name"), format!("area `{}` has no bus", area.name))
                    .right("give it a `[[bus]]` or take it out");
            log.push(problem);
        }
    }
}

fn check_line(line: &Line, buses: &[Bus], place: &Marks, log: &mut Vec<Problem>) {
    if line.from == line.to {
        let problem =
            Problem::new(place.of("to"), format!("line `{}` ends where it begins", line.name))
                .see(place.of("from"), "the other end")
                .right("`from` and `to` must be two buses");
        log.push(problem);
        return;
    }
    let is_tie = buses[line.from].area != buses[line.to].area;
    check_reactance(line, is_tie, place, log);
    if is_tie && line.rating_mw.is_infinite() {
        let problem =
            Problem::new(place.of("rating_mw"), format!("tie `{}` has no rating", line.name))
                .found("its ends lie in two areas")
                .right("a tie needs `rating_mw`: both stewards hold its flow within it");
        log.push(problem);
    }
    if let Some(schedule_mw) = line.schedule_mw {
        if !is_tie {
            let problem =
                Problem::new(place.of("schedule_mw"), format!("line `{}` is no tie", line.name))
                    .found("only a line between two areas has an agreed flow")
                    .right("take `schedule_mw` out");
            log.push(problem);
        } else if schedule_mw.abs() > line.rating_mw {
            let problem =
                Problem::new(place.of("schedule_mw"), "the agreed flow is above the rating")
                    .found(format!("{schedule_mw} MW"))
                    .see(place.of("rating_mw"), "the rating");
            log.push(problem);
        }
    }
    check_short_rating(line, place, log);
}

fn check_reactance(line: &Line, is_tie: bool, place: &Marks, log: &mut Vec<Problem>) {
    let right = if line.reactance_pu.abs() < REACTANCE_PU_MIN {
        "at least 0.000001 pu; join two buses that have nothing between them"
    } else if is_tie && line.reactance_pu < 0.0 {
        "a tie compensated below zero is outside the model: above 0"
    } else {
        return;
    };
    let problem = Problem::new(place.of("reactance_pu"), "`reactance_pu` is out of range")
        .found(format!("this is {} pu", line.reactance_pu))
        .right(right);
    log.push(problem);
}

fn check_short_rating(line: &Line, place: &Marks, log: &mut Vec<Problem>) {
    match (line.rating_short_mw, line.rating_short_min) {
        (Some(short_mw), Some(_)) if short_mw < line.rating_mw => {
            let problem = Problem::new(
                place.of("rating_short_mw"),
                "the short-time rating is below the continuous one",
            )
            .found(format!("{short_mw} MW"))
            .see(place.of("rating_mw"), "the continuous rating")
            .right("it must be at least `rating_mw`");
            log.push(problem);
        }
        (Some(_), None) | (None, Some(_)) => {
            let at =
                if line.rating_short_mw.is_some() { "rating_short_mw" } else { "rating_short_min" };
            let problem = Problem::new(place.of(at), "half a short-time rating")
                .right("`rating_short_mw` and `rating_short_min` go together");
            log.push(problem);
        }
        (Some(_), Some(_)) | (None, None) => {}
    }
}

fn check_unit(unit: &Unit, place: &Marks, log: &mut Vec<Problem>) {
    check_ranges(unit, place, log);
    check_base(unit, place, log);
    let consumes = matches!(unit.kind, UnitKind::Battery | UnitKind::Hydro);
    if !consumes && unit.emergency_min_mw < 0.0 {
        let key = if unit.min_mw < 0.0 { "min_mw" } else { "emergency_min_mw" };
        let problem =
            Problem::new(place.of(key), format!("unit `{}` cannot take power in", unit.name))
                .found("below zero")
                .right("only a battery or a hydro unit (pumping) may have a negative output");
        log.push(problem);
    }
    match (unit.kind, unit.energy_mwh) {
        (UnitKind::Battery, None) => {
            let problem = Problem::new(
                place.of("energy_mwh"),
                format!("battery `{}` has no energy", unit.name),
            )
            .right("say `energy_mwh`, the energy when full");
            log.push(problem);
        }
        (UnitKind::Battery, Some(_)) => {}
        (_, None) if !place.has("energy_start") => {}
        (_, energy_mwh) => {
            let key = if energy_mwh.is_some() { "energy_mwh" } else { "energy_start" };
            let problem =
                Problem::new(place.of(key), format!("unit `{}` stores no energy", unit.name))
                    .found(format!("only a battery has `{key}`"))
                    .right("take it out, or say `kind = \"battery\"`");
            log.push(problem);
        }
    }
}

fn check_ranges(unit: &Unit, place: &Marks, log: &mut Vec<Problem>) {
    let mut crossed = |bad: bool, at: &str, other: &str, title: &str| {
        if bad {
            let problem = Problem::new(place.of(at), format!("unit `{}`: {title}", unit.name))
                .see(place.of(other), format!("against `{other}`"));
            log.push(problem);
        }
    };
    crossed(unit.min_mw > unit.max_mw, "min_mw", "max_mw", "`min_mw` is above `max_mw`");
    crossed(
        unit.emergency_min_mw > unit.min_mw,
        "emergency_min_mw",
        "min_mw",
        "the emergency range begins inside the normal one; it must be at most `min_mw`",
    );
    crossed(
        unit.emergency_max_mw < unit.max_mw,
        "emergency_max_mw",
        "max_mw",
        "the emergency range ends inside the normal one; it must be at least `max_mw`",
    );
    let reserve_mw = unit.reserve_up_mw + unit.reserve_down_mw;
    crossed(
        unit.min_mw <= unit.max_mw && reserve_mw > unit.max_mw - unit.min_mw + ROUNDING_MW,
        if unit.reserve_up_mw > 0.0 { "reserve_up_mw" } else { "reserve_down_mw" },
        "max_mw",
        "the reserve is larger than the normal range",
    );
}

fn check_base(unit: &Unit, place: &Marks, log: &mut Vec<Problem>) {
    let (low_mw, high_mw, right) = match unit.status {
        UnitStatus::Off => (0.0, 0.0, "a unit that is off stands at 0"),
        UnitStatus::Fixed => (
            unit.emergency_min_mw,
            unit.emergency_max_mw,
            "a fixed unit stands within its emergency range",
        ),
        UnitStatus::Available => (
            unit.min_mw + unit.reserve_down_mw,
            unit.max_mw - unit.reserve_up_mw,
            "the base point stands in the normal range less the reserve",
        ),
    };
    let outside = unit.base_mw < low_mw - ROUNDING_MW || unit.base_mw > high_mw + ROUNDING_MW;
    // Crossed ranges are reported on their own and leave nothing to stand in.
    if outside && low_mw <= high_mw {
        let problem = Problem::new(
            place.of("base_mw"),
            format!("unit `{}`: `base_mw` is out of its range", unit.name),
        )
        .found(format!("{} MW", unit.base_mw))
        .right(format!("{right}: from {low_mw} to {high_mw} MW"));
        log.push(problem);
    }
}

fn check_feeders(grid: &Grid, marks: &GridMarks, log: &mut Vec<Problem>) {
    for (index, (bus, place)) in grid.buses.iter().zip(&marks.buses).enumerate() {
        if place.broken {
            continue;
        }
        let here = |(feeder, mark): &(&Feeder, &Marks)| feeder.bus == index && !mark.broken;
        let feeders = grid.feeders.iter().zip(&marks.feeders).filter(here);
        let mut sum_mw = 0.0;
        for (feeder, mark) in feeders {
            let before_mw = sum_mw;
            sum_mw += feeder.load_mw;
            let over = sum_mw > bus.load_mw + ROUNDING_MW;
            if over && before_mw <= bus.load_mw + ROUNDING_MW {
                let problem = Problem::new(
                    mark.of("load_mw"),
                    format!("the feeders of bus `{}` carry more than its load", bus.name),
                )
                .found(format!("with this one they carry {sum_mw} MW"))
                .see(place.of("load_mw"), format!("the bus has {} MW", bus.load_mw))
                .right("a feeder is a part of its bus's `load_mw`");
                log.push(problem);
            }
        }
    }
}

fn check_balance(grid: &Grid, marks: &GridMarks, log: &mut Vec<Problem>) {
    let generation_mw: f64 = grid
        .units
        .iter()
        .filter(|unit| unit.status != UnitStatus::Off)
        .map(|unit| unit.base_mw)
        .sum();
    let load_mw: f64 = grid.buses.iter().map(|bus| bus.load_mw).sum();
    let excess_mw = generation_mw - load_mw;
    if excess_mw.abs() <= BALANCE_MW {
        return;
    }
    let word = if excess_mw > 0.0 { "more" } else { "less" };
    let problem = Problem::new(
        marks.grid.of("name"),
        format!("generation is {:.3} MW {word} than load", excess_mw.abs()),
    )
    .found(format!("units give {generation_mw:.3} MW, buses take {load_mw:.3} MW"))
    .right("the base points of the units in service must add up to the load within 0.1 MW");
    log.push(problem);
}
