//! The play file.

use super::super::model::{Grid, Happening, Play};
use super::super::{Problems, parse_grid, parse_play, read_play};
use super::{SMALL, has};

/// A play of the small grid that passes.
const CALM: &str = "format = 1
title = \"A calm day\"

[run]
duration_s = 100.0

[[event]]
at_s = 20.0
what = \"line-trip\"
line = \"N1-N2\"

[[event]]
at_s = 10.0
what = \"unit-trip\"
unit = \"Jar\"
";

fn small() -> Grid {
    parse_grid(SMALL, "small.grid.toml").expect("the small grid is right")
}

fn play(text: &str) -> Result<Play, Problems> {
    parse_play(text, "calm.play.toml", &small())
}

/// Assert that the calm play with these lines added has one problem, with this title on this line.
#[track_caller]
fn one_problem(added: &str, on_line: &str, title: &str) {
    let text = format!("{CALM}\n{added}\n");
    let problems = play(&text).expect_err("the addition is wrong");
    assert_eq!(problems.list().len(), 1, "exactly one problem:\n{problems}");
    assert!(has(&problems, &text, on_line, title), "{title:?} on {on_line:?}:\n{problems}");
}

/// Lines of an event.
fn event(at_s: f64, what: &str, keys: &str) -> String {
    format!("[[event]]\nat_s = {at_s}\nwhat = \"{what}\"\n{keys}\n")
}

#[test]
fn reads_a_play_with_its_defaults_and_events_in_order_of_time() {
    let play = play(CALM).expect("the play is right");
    assert_eq!((play.name.as_str(), play.title.as_str()), ("calm", "A calm day"));
    assert_eq!((play.run.tick_s, play.run.plant_step_s, play.run.seed), (0.1, 0.01, 1));
    assert_eq!((play.steward.iterations, play.steward.tie_band_mw), (50, 100.0));
    assert_eq!((play.links.delay_ticks, play.links.loss, play.links.plant_too), (0, 0.0, false));
    let order: Vec<&Happening> = play.events.iter().map(|event| &event.what).collect();
    assert_eq!(order, [&Happening::UnitTrip { unit: 2 }, &Happening::LineTrip { line: 0 }]);
}

#[test]
fn reads_every_kind_of_event() {
    let more = [
        event(21.0, "line-close", "line = \"N1-N2\""),
        event(22.0, "load-step", "bus = \"N2\"\nmw = 5"),
        event(23.0, "unit-return", "unit = \"Jar\""),
        event(24.0, "schedule", "line = \"West tie\"\nmw = 20\nramp_s = 30"),
        event(25.0, "base-point", "unit = \"Sluice\"\nmw = 70"),
        event(26.0, "steward-dies", "area = \"South\""),
        event(27.0, "steward-returns", "area = \"South\""),
        event(28.0, "link-outage", "areas = [\"South\", \"North\"]\nfor_s = 9"),
        event(29.0, "restore-load", "area = \"North\""),
    ];
    let play = play(&format!("{CALM}\n{}", more.concat())).expect("all are right");
    assert_eq!(play.events.len(), 11);
    assert_eq!(play.events[5].what, Happening::Schedule { line: 3, mw: 20.0, ramp_s: 30.0 });
    assert_eq!(play.events[6].what, Happening::BasePoint { unit: 1, mw: 70.0, ramp_s: 0.0 });
    assert_eq!(play.events[9].what, Happening::LinkOutage { areas: (1, 0), for_s: 9.0 });
}

#[test]
fn rejects_settings_out_of_range() {
    one_problem("[links]\nloss = 1.1", "loss = 1.1", "`loss` is out of range");
    one_problem("[links]\ndelay_ticks = 1.5", "1.5", "`delay_ticks` must be a whole number");
    one_problem("[steward]\niterations = 0", "iterations", "`iterations` is out of range");
    one_problem("[steward]\nfilter_s = inf", "inf", "`filter_s` must be finite");
    one_problem("[steward]\nhops = 3", "hops = 3", "unknown key `hops`");
    one_problem("[stewards]", "[stewards]", "unknown table or key `stewards`");
}

#[test]
fn rejects_a_tick_that_is_no_whole_number_of_steps() {
    let text = CALM.replace("duration_s = 100.0", "duration_s = 100.0\nplant_step_s = 0.03");
    let problems = play(&text).expect_err("0.1 / 0.03");
    assert_eq!(problems.list().len(), 1, "{problems}");
    assert!(has(&problems, &text, "0.03", "a tick must be a whole number of plant steps"));
}

#[test]
fn rejects_a_play_without_its_length() {
    let text = CALM.replace("[run]\nduration_s = 100.0\n", "");
    let problems = play(&text).expect_err("no run");
    assert!(has(&problems, &text, "format", "table `[run]` is missing"), "{problems}");
}

#[test]
fn rejects_times_outside_the_run() {
    one_problem(&event(100.0, "restore-load", "area = \"North\""), "at_s = 100", "outside the run");
    one_problem(
        &event(-1.0, "restore-load", "area = \"North\""),
        "at_s = -1",
        "`at_s` is out of range",
    );
    let keys = "line = \"West tie\"\nmw = 1\nramp_s = 60";
    one_problem(&event(50.0, "schedule", keys), "ramp_s = 60", "outside the run");
}

#[test]
fn rejects_unknown_kinds_and_keys_of_another_kind() {
    one_problem(&event(5.0, "load-stop", ""), "load-stop", "`what` cannot be `load-stop`");
    let keys = "line = \"West tie\"\nmw = 4";
    one_problem(&event(5.0, "line-trip", keys), "mw = 4", "unknown key `mw`");
    one_problem(&event(5.0, "load-step", "bus = \"N1\""), "[[event]]", "`mw` is missing");
}

#[test]
fn rejects_events_that_refer_to_nothing_or_to_the_wrong_kind() {
    one_problem(&event(5.0, "line-trip", "line = \"N1-N9\""), "N1-N9", "there is no line `N1-N9`");
    one_problem(
        &event(5.0, "schedule", "line = \"N2-N3\"\nmw = 1"),
        "N2-N3",
        "line `N2-N3` is no tie",
    );
    one_problem(
        &event(5.0, "schedule", "line = \"East tie\"\nmw = 56"),
        "mw = 56",
        "more than tie",
    );
    one_problem(
        &event(5.0, "base-point", "unit = \"Sluice\"\nmw = 101"),
        "mw = 101",
        "cannot be scheduled",
    );
    one_problem(
        &event(5.0, "restore-load", "area = \"South\""),
        "South",
        "area `South` has no feeder",
    );
    let twice = "areas = [\"South\", \"South\"]\nfor_s = 1";
    one_problem(&event(5.0, "link-outage", twice), "areas", "are no neighbours");
}

#[test]
fn rejects_events_that_cannot_happen_then() {
    one_problem(
        &event(30.0, "line-trip", "line = \"N1-N2\""),
        "N1-N2",
        "line `N1-N2` is already open then",
    );
    one_problem(&event(5.0, "line-close", "line = \"N1-N2\""), "N1-N2", "is already closed then");
    one_problem(
        &event(30.0, "unit-trip", "unit = \"Jar\""),
        "Jar",
        "unit `Jar` has already tripped then",
    );
    one_problem(
        &event(5.0, "unit-return", "unit = \"Jar\""),
        "Jar",
        "unit `Jar` is in service then",
    );
    one_problem(&event(5.0, "steward-returns", "area = \"South\""), "South", "is alive then");
    one_problem(
        &event(5.0, "load-step", "bus = \"N1\"\nmw = -71"),
        "mw = -71",
        "would have 29 MW left",
    );
}

#[test]
fn reads_the_grid_beside_the_play_and_the_built_in_one_without() {
    let dir = std::env::temp_dir().join(format!("hedgerow-plays-{}", std::process::id()));
    std::fs::create_dir_all(&dir).expect("a directory for the test");
    let put =
        |name: &str, text: &str| std::fs::write(dir.join(name), text).expect("a file for the test");
    put("small.grid.toml", SMALL);
    put("calm.play.toml", &CALM.replace("title", "grid = \"small.grid.toml\"\ntitle"));
    put("lost.play.toml", &CALM.replace("title", "grid = \"smal.grid.toml\"\ntitle"));
    put("islands.play.toml", "format = 1\n[run]\nduration_s = 5\n");
    let (grid, play) = read_play(&dir.join("calm.play.toml")).expect("both are right");
    assert_eq!((grid.name.as_str(), play.events.len()), ("Two Fields", 2));
    let (grid, _) = read_play(&dir.join("islands.play.toml")).expect("the built-in grid");
    assert_eq!(grid.name, "Quillon Islands");
    let problems = read_play(&dir.join("lost.play.toml")).expect_err("no such grid");
    assert!(problems.to_string().contains("there is no such grid file"), "{problems}");
    std::fs::remove_dir_all(&dir).expect("the test's directory goes again");
}

#[test]
fn refuses_a_grid_that_no_steward_can_hold() {
    let mut grid = small();
    let feeder = grid.feeders[0].clone();
    grid.feeders.extend(std::iter::repeat_n(feeder, 64));
    let problems = parse_play(CALM, "calm.play.toml", &grid).expect_err("66 units and feeders");
    assert!(has(&problems, CALM, "format", "area `North` has 66 units and feeders"), "{problems}");
}
