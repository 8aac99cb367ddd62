//! Checks of a play's events in the order they happen.
//!
//! Contract: walks the sound events by time with the status of lines, units,
//! stewards and loads, and logs what cannot happen then: opening an open line,
//! returning a unit that never left, a schedule on a line that is no tie.

use super::marks::Marks;
use super::model::{Event, Grid, Happening, Line, Run, UnitStatus};
use super::problems::Problem;

/// Slack for sums of figures written with a few digits, in MW.
const ROUNDING_MW: f64 = 1e-6;

/// What has happened so far.
struct Now<'a> {
    grid: &'a Grid,
    closed: Vec<bool>,
    tripped: Vec<bool>,
    alive: Vec<bool>,
    load_mw: Vec<f64>,
}

/// Check the run's steps and every event that was read without a fault.
pub(crate) fn check(
    grid: &Grid,
    run: &Run,
    run_marks: &Marks,
    events: &[(Event, Marks)],
    log: &mut Vec<Problem>,
) {
    if !run_marks.broken {
        check_steps(run, run_marks, log);
    }
    let mut order: Vec<&(Event, Marks)> =
        events.iter().filter(|(_, place)| !place.broken).collect();
    order.sort_by(|a, b| a.0.at_s.total_cmp(&b.0.at_s));
    let mut now = Now {
        grid,
        closed: grid.lines.iter().map(|line| line.closed).collect(),
        tripped: vec![false; grid.units.len()],
        alive: vec![true; grid.areas.len()],
        load_mw: grid.buses.iter().map(|bus| bus.load_mw).collect(),
    };
    for (event, place) in order {
        if !run_marks.broken {
            check_time(event, place, run, run_marks, log);
        }
        if let Some(problem) = now.pass(&event.what, place) {
            log.push(problem);
        }
    }
}

/// A tick is a whole number of plant steps.
fn check_steps(run: &Run, marks: &Marks, log: &mut Vec<Problem>) {
    let steps = run.tick_s / run.plant_step_s;
    // Decimal fractions are not exact in binary; a part in a million is the reader's rounding.
    if (steps - steps.round()).abs() > 1e-6 * steps || steps.round() < 1.0 {
        let at = if marks.has("plant_step_s") { "plant_step_s" } else { "tick_s" };
        let problem = Problem::new(marks.of(at), "a tick must be a whole number of plant steps")
            .found(format!("{} s / {} s = {steps:.4}", run.tick_s, run.plant_step_s))
            .right("for example `tick_s = 0.1` and `plant_step_s = 0.01`");
        log.push(problem);
    }
}

/// An event lies inside the run, with its ramp or length.
fn check_time(event: &Event, place: &Marks, run: &Run, run_marks: &Marks, log: &mut Vec<Problem>) {
    let (key, end_s) = match event.what {
        Happening::Schedule { ramp_s, .. } | Happening::BasePoint { ramp_s, .. } => {
            ("ramp_s", event.at_s + ramp_s)
        }
        Happening::LinkOutage { for_s, .. } => ("for_s", event.at_s + for_s),
        _ => ("at_s", event.at_s),
    };
    let key = if event.at_s >= run.duration_s { "at_s" } else { key };
    if event.at_s >= run.duration_s || end_s > run.duration_s {
        let problem = Problem::new(place.of(key), "outside the run")
            .found(format!("this is {} s after the start", end_s.max(event.at_s)))
            .see(run_marks.of("duration_s"), format!("the run ends at {} s", run.duration_s));
        log.push(problem);
    }
}

impl Now<'_> {
    /// Let an event happen, or say why it cannot.
    fn pass(&mut self, what: &Happening, place: &Marks) -> Option<Problem> {
        match *what {
            Happening::LineTrip { line } => self.move_line(line, false, place),
            Happening::LineClose { line } => self.move_line(line, true, place),
            Happening::LoadStep { bus, mw } => self.step_load(bus, mw, place),
            Happening::UnitTrip { unit } => self.move_unit(unit, true, place),
            Happening::UnitReturn { unit } => self.move_unit(unit, false, place),
            Happening::Schedule { line, mw, .. } => self.schedule(line, mw, place),
            Happening::BasePoint { unit, mw, .. } => self.base_point(unit, mw, place),
            Happening::StewardDies { area } => self.move_steward(area, false, place),
            Happening::StewardReturns { area } => self.move_steward(area, true, place),
            Happening::LinkOutage { areas, .. } => self.link_outage(areas, place),
            Happening::RestoreLoad { area } => self.restore(area, place),
        }
    }

    fn is_tie(&self, line: &Line) -> bool {
        self.grid.buses[line.from].area != self.grid.buses[line.to].area
    }

    fn move_line(&mut self, line: usize, close: bool, place: &Marks) -> Option<Problem> {
        let was_closed = std::mem::replace(&mut self.closed[line], close);
        let word = if close { "closed" } else { "open" };
        (was_closed == close).then(|| {
            let name = &self.grid.lines[line].name;
            Problem::new(place.of("line"), format!("line `{name}` is already {word} then"))
                .found("nothing would happen")
                .right("look at `closed` in the grid and at the events before this one")
        })
    }

    fn step_load(&mut self, bus: usize, mw: f64, place: &Marks) -> Option<Problem> {
        self.load_mw[bus] += mw;
        let load_mw = self.load_mw[bus];
        let feeders = self.grid.feeders.iter().filter(|feeder| feeder.bus == bus);
        let feeders_mw: f64 = feeders.map(|feeder| feeder.load_mw).sum();
        (load_mw < feeders_mw - ROUNDING_MW).then(|| {
            let name = &self.grid.buses[bus].name;
            Problem::new(place.of("mw"), format!("bus `{name}` would have {load_mw} MW left"))
                .found("a smaller load than its feeders carry")
                .right(format!("its load must stay at {feeders_mw} MW or above"))
        })
    }

    fn move_unit(&mut self, unit: usize, trip: bool, place: &Marks) -> Option<Problem> {
        let name = &self.grid.units[unit].name;
        if self.grid.units[unit].status == UnitStatus::Off {
            let problem =
                Problem::new(place.of("unit"), format!("unit `{name}` is off all the time"))
                    .right("its `status` in the grid would have to be `available` or `fixed`");
            return Some(problem);
        }
        let was_tripped = std::mem::replace(&mut self.tripped[unit], trip);
        let word = if trip { "has already tripped" } else { "is in service" };
        (was_tripped == trip).then(|| {
            Problem::new(place.of("unit"), format!("unit `{name}` {word} then"))
                .found("nothing would happen")
        })
    }

    fn schedule(&self, line: usize, mw: f64, place: &Marks) -> Option<Problem> {
        let line = &self.grid.lines[line];
        if !self.is_tie(line) {
            let problem = Problem::new(place.of("line"), format!("line `{}` is no tie", line.name))
                .found("both ends lie in one area")
                .right("only a line between two areas has an agreed flow");
            return Some(problem);
        }
        (mw.abs() > line.rating_mw).then(|| {
            Problem::new(place.of("mw"), format!("more than tie `{}` may carry", line.name))
                .found(format!("{mw} MW"))
                .right(format!("its rating is {} MW", line.rating_mw))
        })
    }

    fn base_point(&self, unit: usize, mw: f64, place: &Marks) -> Option<Problem> {
        let unit = &self.grid.units[unit];
        let low_mw = unit.min_mw + unit.reserve_down_mw;
        let high_mw = unit.max_mw - unit.reserve_up_mw;
        (mw < low_mw - ROUNDING_MW || mw > high_mw + ROUNDING_MW).then(|| {
            Problem::new(place.of("mw"), format!("unit `{}` cannot be scheduled there", unit.name))
                .found(format!("{mw} MW"))
                .right(format!("its normal range less reserve goes from {low_mw} to {high_mw} MW"))
        })
    }

    fn move_steward(&mut self, area: usize, lives: bool, place: &Marks) -> Option<Problem> {
        let was_alive = std::mem::replace(&mut self.alive[area], lives);
        let word = if lives { "is alive" } else { "is already dead" };
        (was_alive == lives).then(|| {
            let name = &self.grid.areas[area].name;
            Problem::new(place.of("area"), format!("the steward of `{name}` {word} then"))
                .found("nothing would happen")
        })
    }

    fn link_outage(&self, (a, b): (usize, usize), place: &Marks) -> Option<Problem> {
        let joins = |line: &&Line| {
            let ends = (self.grid.buses[line.from].area, self.grid.buses[line.to].area);
            a != b && (ends == (a, b) || ends == (b, a))
        };
        self.grid.lines.iter().find(joins).is_none().then(|| {
            let (one, other) = (&self.grid.areas[a].name, &self.grid.areas[b].name);
            Problem::new(place.of("areas"), format!("`{one}` and `{other}` are no neighbours"))
                .found("no tie joins them, so no frames pass between them")
                .right("name two areas that a tie joins")
        })
    }

    fn restore(&self, area: usize, place: &Marks) -> Option<Problem> {
        let feeders = self.grid.feeders.iter();
        let mut here = feeders.filter(|feeder| self.grid.buses[feeder.bus].area == area);
        here.next().is_none().then(|| {
            let name = &self.grid.areas[area].name;
            Problem::new(place.of("area"), format!("area `{name}` has no feeder"))
                .found("there is nothing to put back")
        })
    }
}
