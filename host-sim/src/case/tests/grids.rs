//! The grid file.

use std::fmt::Write as _;

use super::super::model::{FeederKind, Restore, UnitKind, UnitStatus};
use super::super::{fits_largest_steward, parse_grid, read_grid};
use super::{SMALL, changed, has, one_problem};

#[test]
fn reads_names_into_indices_and_fills_in_the_stated_defaults() {
    let grid = parse_grid(SMALL, "small.grid.toml").expect("the small grid is right");
    assert_eq!((grid.base_mva, grid.nominal_hz), (100.0, 50.0));
    assert_eq!((grid.areas[0].lowest_rung, grid.areas[1].lowest_rung), (3, 2));
    assert_eq!(grid.buses[0].position, Some((0.0, 1.5)));
    assert_eq!((grid.buses[0].load_damping, grid.buses[4].load_damping), (1.0, 1.5));
    let (first, tie) = (&grid.lines[0], &grid.lines[3]);
    assert_eq!((first.name.as_str(), first.from, first.to), ("N1-N2", 0, 1));
    assert!(grid.lines[1].rating_mw.is_infinite() && first.metered && first.closed);
    assert_eq!((tie.name.as_str(), tie.schedule_mw), ("West tie", Some(10.0)));
    assert_eq!(grid.lines[4].schedule_mw, None);
}

#[test]
fn fills_in_a_units_defaults_by_its_kind() {
    let grid = parse_grid(SMALL, "small.grid.toml").expect("the small grid is right");
    let [kiln, sluice, jar] = grid.units.as_slice() else { panic!("three units") };
    assert_eq!(
        (kiln.kind, kiln.status, kiln.rating_mva),
        (UnitKind::Steam, UnitStatus::Available, 200.0)
    );
    // 3 % of 200 MVA a minute = 0.1 MW a second; 6 * 2 / (200/100) = 6.
    assert!((kiln.ramp_mw_per_s - 0.1).abs() < 1e-12);
    assert_eq!((kiln.cost_per_pu2, kiln.droop_percent, kiln.inertia_s), (6.0, Some(5.0), 5.0));
    assert_eq!((kiln.emergency_min_mw, kiln.emergency_max_mw), (45.0, 210.0));
    assert_eq!((sluice.min_mw, sluice.emergency_max_mw), (0.0, 100.0));
    assert_eq!((sluice.droop_percent, sluice.ramp_mw_per_s), (None, f64::INFINITY));
    assert_eq!((jar.min_mw, jar.energy_mwh, jar.energy_start), (-25.0, Some(12.0), 0.5));
    assert_eq!((jar.cost_per_pu2, jar.ramp_mw_per_s, jar.inertia_s), (8.0, f64::INFINITY, 0.0));
    let mill = &grid.feeders[0];
    assert_eq!((mill.kind, mill.restore), (FeederKind::Switched, Restore::Automatic));
    assert_eq!(mill.price_per_pu, 60.0);
}

#[test]
fn rejects_a_wrong_format() {
    one_problem("format = 1\n", "", "", "`format` is missing");
    one_problem("format = 1", "format = 2", "format = 2", "unknown format");
    one_problem("format = 1", "format = \"1\"", "format =", "`format` must be a number");
    one_problem(
        "format = 1\n\n[grid]\nname = \"Two Fields\"\n",
        "grid = { name = \"x\" }\nformat = 1\n",
        "format = 1",
        "`format` must come first",
    );
}

#[test]
fn rejects_unknown_tables_and_keys_and_names_the_nearest() {
    one_problem("[[feeder]]", "[[feeders]]", "[[feeders]]", "unknown table or key `feeders`");
    one_problem(
        "rating_mw = 50.0",
        "rating_mw = 50.0\nmetred = true",
        "metred",
        "unknown key `metred`",
    );
    let text = changed("rating_mw = 50.0", "rating_mw = 50.0\nmetred = true");
    let problems = parse_grid(&text, "small.grid.toml").expect_err("no such key");
    assert!(problems.to_string().contains("did you mean `metered`?"), "{problems}");
}

#[test]
fn rejects_wrong_types() {
    one_problem(
        "load_mw = 40.0",
        "load_mw = \"40\"",
        "load_mw = \"40\"",
        "`load_mw` must be a number",
    );
    one_problem("name = \"Mill\"", "name = 7", "name = 7", "`name` must be a text");
    one_problem(
        "reactance_pu = 0.2",
        "reactance_pu = 0.2\nclosed = 1",
        "closed",
        "`closed` must be true or false",
    );
    one_problem(
        "position = [0, 1.5]",
        "position = [0]",
        "position",
        "`position` must be two finite numbers",
    );
    one_problem("[[feeder]]", "[feeder]", "[feeder]", "`feeder` must be a list of tables");
}

#[test]
fn rejects_figures_out_of_range_or_not_finite() {
    one_problem("load_mw = 40.0", "load_mw = nan", "nan", "`load_mw` must be finite");
    one_problem("load_mw = 40.0", "load_mw = -1", "-1", "`load_mw` is out of range");
    one_problem("rating_mw = 50.0", "rating_mw = inf", "inf", "`rating_mw` must be finite");
    one_problem(
        "energy_mwh = 12.0",
        "energy_mwh = 0",
        "energy_mwh",
        "`energy_mwh` is out of range",
    );
    one_problem(
        "name = \"Two Fields\"",
        "name = \"x\"\nbase_mva = 0",
        "base_mva",
        "`base_mva` is out of range",
    );
    one_problem(
        "kind = \"steam\"",
        "kind = \"steam\"\ninertia_s = 99",
        "inertia_s",
        "`inertia_s` is out of range",
    );
}

#[test]
fn rejects_missing_keys_at_the_heading() {
    one_problem("reactance_pu = 0.2\n", "", "[[line]]", "`reactance_pu` is missing");
    one_problem("load_mw = 30.0\n", "", "[[feeder]]", "`load_mw` is missing");
}

#[test]
fn rejects_names_that_are_taken_or_unusable() {
    one_problem(
        "name = \"Sluice\"",
        "name = \"Kiln\"",
        "name = \"Kiln\"",
        "two units are called `Kiln`",
    );
    one_problem("name = \"East tie\"", "name = \"West tie\"", "West tie", "two lines are called");
    one_problem("name = \"Mill\"", "name = \" Mill\"", " Mill", "a name nobody can refer to");
    one_problem("name = \"Mill\"", "name = \"\"", "name = \"\"", "a name nobody can refer to");
}

#[test]
fn rejects_references_to_nothing_and_suggests_the_nearest() {
    one_problem("to = \"N3\"", "to = \"N33\"", "to = \"N33\"", "there is no bus `N33`");
    one_problem("bus = \"S2\"", "bus = \"T2\"", "bus = \"T2\"", "there is no bus `T2`");
    let text = changed("area = \"South\"", "area = \"Suoth\"");
    let problems = parse_grid(&text, "small.grid.toml").expect_err("no such area");
    assert!(problems.to_string().contains("did you mean `South`?"), "{problems}");
}

#[test]
fn rejects_an_area_without_a_bus_and_a_bus_without_an_area() {
    one_problem(
        "[[bus]]",
        "[[area]]\nname = \"West\"\n\n[[bus]]",
        "name = \"West\"",
        "area `West` has no bus",
    );
    one_problem("name = \"N3\"\narea = \"North\"", "name = \"N3\"", "[[bus]]", "`area` is missing");
}

#[test]
fn rejects_a_network_in_pieces_and_names_a_bus_on_each_side() {
    let text = changed(
        "[[line]]",
        "[[area]]\nname = \"Isle\"\n\n[[bus]]\nname = \"I1\"\narea = \"Isle\"\n\n[[line]]",
    );
    let problems = parse_grid(&text, "small.grid.toml").expect_err("two pieces");
    assert!(has(&problems, &text, "I1", "the network falls into 2 pieces"), "{problems}");
    assert!(problems.to_string().contains("no line in service leads from `I1` to `N1`"));
}

#[test]
fn rejects_an_area_that_hangs_together_only_by_its_ties() {
    let text = changed("reactance_pu = 0.2", "reactance_pu = 0.2\nclosed = false");
    let problems = parse_grid(&text, "small.grid.toml").expect_err("area in pieces");
    assert_eq!(problems.list().len(), 1, "{problems}");
    assert!(has(&problems, &text, "North", "area `North` falls into 2 pieces"));
    assert!(problems.to_string().contains("pieces: N1, N2; N3"), "{problems}");
}

#[test]
fn reports_every_problem_of_a_file_at_once_in_file_order() {
    let text = SMALL
        .replace("load_mw = 40.0", "load_mw = -1")
        .replace("kind = \"hydro\"", "kind = \"hidro\"")
        .replace("to = \"N3\"", "to = \"X\"")
        .replace("load_mw = 30.0", "load = 30.0");
    let problems = parse_grid(&text, "small.grid.toml").expect_err("five things are wrong");
    let lines: Vec<usize> = problems.list().iter().map(|p| problems.line_of(p)).collect();
    assert_eq!(lines.len(), 5, "{problems}");
    assert!(lines.is_sorted());
    assert!(problems.to_string().ends_with("5 problems in small.grid.toml"));
}

#[test]
fn points_at_a_syntax_error_and_stops_there() {
    let text = changed("name = \"Kiln\"", "name = \"Kiln");
    let problems = parse_grid(&text, "small.grid.toml").expect_err("a quote is missing");
    assert!(has(&problems, &text, "Kiln", ""), "{problems}");
    assert!(problems.list().iter().all(|problem| problem.found == "cannot be read as TOML"));
}

#[test]
fn shows_file_line_and_caret_without_colour_and_with() {
    let text = changed("load_mw = 40.0", "load_mw = -1");
    let problems = parse_grid(&text, "small.grid.toml").expect_err("a negative load");
    let plain = problems.to_string();
    assert!(plain.contains("small.grid.toml:22:11"), "{plain}");
    assert!(plain.contains("^^ this is -1") && !plain.contains('\u{1b}'), "{plain}");
    assert!(problems.render(true).contains('\u{1b}'));
}

#[test]
fn says_why_a_file_cannot_be_read() {
    let problems = read_grid(std::path::Path::new("no/such.grid.toml")).expect_err("no file");
    assert!(problems.to_string().contains("cannot read no/such.grid.toml"), "{problems}");
}

#[test]
fn finds_an_area_too_large_for_any_steward() {
    assert_eq!(fits_largest_steward(&parse_grid(SMALL, "x").expect("right")), Ok(()));
    let mut text = SMALL.to_owned();
    for bus in 0..62 {
        let _ = write!(
            text,
            "[[bus]]\nname = \"L{bus}\"\narea = \"North\"\n\
             [[line]]\nfrom = \"N1\"\nto = \"L{bus}\"\nreactance_pu = 0.1\n"
        );
    }
    let grid = parse_grid(&text, "x").expect("a large area is no fault of a grid");
    let sentences = fits_largest_steward(&grid).expect_err("65 buses");
    assert_eq!(sentences, ["area `North` has 65 buses; the largest steward holds 64"]);
}
