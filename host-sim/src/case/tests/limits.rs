//! Checks across the values of a grid file.

use super::super::parse_grid;
use super::{a_problem, changed, one_problem};

#[test]
fn rejects_lines_outside_the_model() {
    a_problem("to = \"N3\"", "to = \"N2\"", "to = \"N2\"", "line `N2-N2` ends where it begins");
    one_problem(
        "reactance_pu = 0.2",
        "reactance_pu = 0.0",
        "0.0",
        "`reactance_pu` is out of range",
    );
    one_problem(
        "reactance_pu = 0.3",
        "reactance_pu = -0.3",
        "-0.3",
        "`reactance_pu` is out of range",
    );
    one_problem("rating_mw = 55.0\n", "", "[[line]]", "tie `East tie` has no rating");
    one_problem(
        "schedule_mw = 10.0",
        "schedule_mw = 51",
        "51",
        "the agreed flow is above the rating",
    );
    one_problem(
        "reactance_pu = 0.2",
        "reactance_pu = 0.2\nschedule_mw = 1",
        "schedule_mw = 1",
        "line `N2-N3` is no tie",
    );
    one_problem(
        "rating_short_mw = 120.0",
        "rating_short_mw = 99",
        "99",
        "the short-time rating is below",
    );
    one_problem("rating_short_min = 15.0\n", "", "rating_short_mw", "half a short-time rating");
}

#[test]
fn accepts_an_internal_line_compensated_below_zero() {
    let text = changed("reactance_pu = 0.2", "reactance_pu = -0.2");
    let grid = parse_grid(&text, "small.grid.toml").expect("allowed inside an area");
    assert_eq!(grid.lines[1].reactance_pu, -0.2);
}

#[test]
fn rejects_ranges_that_cross() {
    a_problem("min_mw = 50.0", "min_mw = 201", "min_mw = 201", "`min_mw` is above `max_mw`");
    one_problem(
        "emergency_min_mw = 45.0",
        "emergency_min_mw = 55",
        "55",
        "begins inside the normal one",
    );
    one_problem(
        "emergency_max_mw = 210.0",
        "emergency_max_mw = 199",
        "199",
        "ends inside the normal one",
    );
    one_problem("reserve_up_mw = 20.0", "reserve_up_mw = 140", "140", "the reserve is larger");
}

#[test]
fn rejects_a_base_point_outside_the_range_less_reserve() {
    one_problem(
        "reserve_up_mw = 20.0",
        "reserve_up_mw = 81",
        "base_mw = 120.0",
        "`base_mw` is out of its range",
    );
    a_problem(
        "reserve_up_mw = 20.0",
        "reserve_up_mw = 20.0\nstatus = \"off\"",
        "base_mw = 120.0",
        "`base_mw` is out of its range",
    );
}

#[test]
fn accepts_a_fixed_unit_in_its_emergency_range() {
    let text =
        changed("max_mw = 100.0", "max_mw = 70.0\nemergency_max_mw = 80.0\nstatus = \"fixed\"");
    assert!(parse_grid(&text, "small.grid.toml").is_ok());
}

#[test]
fn rejects_units_that_store_or_take_in_what_they_cannot() {
    one_problem("energy_mwh = 12.0\n", "", "[[unit]]", "battery `Jar` has no energy");
    one_problem(
        "min_mw = 50.0",
        "min_mw = 50.0\nenergy_mwh = 5",
        "energy_mwh = 5",
        "unit `Kiln` stores no energy",
    );
    one_problem(
        "min_mw = 50.0",
        "min_mw = 50.0\nenergy_start = 0.2",
        "energy_start",
        "unit `Kiln` stores no energy",
    );
    one_problem(
        "emergency_min_mw = 45.0",
        "emergency_min_mw = -1",
        "-1",
        "unit `Kiln` cannot take power in",
    );
}

#[test]
fn rejects_feeders_that_carry_more_than_their_bus() {
    one_problem(
        "load_mw = 30.0",
        "load_mw = 100.5",
        "load_mw = 100.5",
        "the feeders of bus `N1` carry more",
    );
}

#[test]
fn says_by_how_much_generation_and_load_differ() {
    one_problem(
        "load_mw = 60.0",
        "load_mw = 60.2",
        "Two Fields",
        "generation is 0.200 MW less than load",
    );
    one_problem(
        "load_mw = 60.0",
        "load_mw = 59",
        "Two Fields",
        "generation is 1.000 MW more than load",
    );
    let text = changed("load_mw = 60.0", "load_mw = 60.09");
    assert!(parse_grid(&text, "small.grid.toml").is_ok(), "rounding is let through");
}
