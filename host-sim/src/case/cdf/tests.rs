//! The importer, against a file written here column by column.

use super::super::model::{Grid, UnitStatus};
use super::super::parse_grid;
use super::{Imported, import};

/// A title in its columns.
fn title(base_mva: &str, name: &str) -> String {
    format!(" 01/02/03 {:<20} {base_mva:>6}  1973 W {name}\r\n", "WRITTEN HERE")
}

/// A bus record: number, name, area, type, load, generation.
fn bus(number: i64, name: &str, area: i64, kind: i64, load: &str, generation: &str) -> String {
    format!(
        "{number:>4} {name:<12} {area:>2}{:>3} {kind:>2} 1.0000   0.00{load:>9}{:>10}{generation:>8}{:>8}\r\n",
        1, "0.0", "0.0"
    )
}

/// A branch record: ends, reactance, rating, ratio, shift.
fn branch(from: i64, to: i64, reactance: &str, rating: &str, ratio: &str, shift: &str) -> String {
    format!(
        "{from:>4} {to:>4}  1  1 1 0{:>10}{reactance:>11}{:>10}{rating:>5}{:>6}{:>6} {:>4} {:>1} {ratio:>6} {shift:>7}\r\n",
        "0.01", "0.0", "", "", "", ""
    )
}

/// A file of sections.
fn file(title: &str, buses: &[String], branches: &[String]) -> String {
    format!(
        "{title}BUS DATA FOLLOWS {:>28} ITEMS\r\n{}-999\r\nBRANCH DATA FOLLOWS {:>25} ITEMS\r\n{}-999\r\nEND OF DATA\r\n",
        buses.len(),
        buses.concat(),
        branches.len(),
        branches.concat()
    )
}

/// Three buses in a row with 100 MW from the first to the last.
fn row() -> (Vec<String>, Vec<String>) {
    (
        vec![
            bus(1, "Bus 1     HV", 1, 3, "0.0", "103.5"),
            bus(2, "Bus 2     LV", 1, 0, "40.0", "0.0"),
            bus(9533, "", 1, 0, "60.0", "0.0"),
        ],
        vec![branch(1, 2, "0.1", "", "0.0", ""), branch(2, 9533, "0.2", "", "0.0", "")],
    )
}

#[track_caller]
fn imported(source: &str) -> (Grid, Imported) {
    let imported =
        import(source.as_bytes(), "case.cdf").unwrap_or_else(|problems| panic!("{problems}"));
    (parse_grid(&imported.text, "case.grid.toml").expect("it reads back"), imported)
}

/// The rows with changed records, imported.
fn changed(change: impl FnOnce(&mut Vec<String>, &mut Vec<String>)) -> String {
    let (mut buses, mut branches) = row();
    change(&mut buses, &mut branches);
    file(&title("100.0", "THREE IN A ROW"), &buses, &branches)
}

fn says(imported: &Imported, part: &str) -> bool {
    imported.rules.iter().any(|rule| rule.contains(part)) && imported.text.contains(part)
}

#[test]
fn reads_records_by_column_with_cr_lf_and_sparse_numbers() {
    let (grid, _) = imported(&changed(|_, _| {}));
    assert_eq!(
        (grid.name.as_str(), grid.base_mva, grid.nominal_hz),
        ("THREE IN A ROW", 100.0, 60.0)
    );
    let names: Vec<&str> = grid.buses.iter().map(|bus| bus.name.as_str()).collect();
    assert_eq!(names, ["B1", "B2", "B9533"]);
    assert_eq!((grid.lines[1].from, grid.lines[1].to, grid.lines[1].reactance_pu), (1, 2, 0.2));
}

#[test]
fn sets_the_slack_generation_to_the_lossless_balance_and_says_so() {
    let (grid, imported) = imported(&changed(|_, _| {}));
    assert_eq!((grid.units.len(), grid.units[0].base_mw), (1, 100.0));
    assert!(says(&imported, "the slack bus, B1, generates 100.000 MW instead of 103.5 MW"));
}

#[test]
fn rates_lines_by_the_base_flow_and_its_floor() {
    // Flows 100 and 60 MW, so 150 and 90; a third line with 2 MW gets 1.5 * 5 % of 100.
    let (grid, _) = imported(&changed(|buses, branches| {
        buses.push(bus(7, "", 1, 0, "2.0", "0.0"));
        buses[1] = bus(2, "", 1, 0, "38.0", "0.0");
        branches.push(branch(2, 7, "0.3", "", "", ""));
    }));
    let ratings: Vec<f64> = grid.lines.iter().map(|line| line.rating_mw).collect();
    assert_eq!(ratings, [150.0, 90.0, 7.5]);
}

#[test]
fn keeps_a_rating_of_the_file_above_the_base_flow_only() {
    let (grid, imported) = imported(&changed(|_, branches| {
        branches[0] = branch(1, 2, "0.1", "120", "", "");
        branches[1] = branch(2, 9533, "0.2", "50", "", "");
    }));
    assert_eq!((grid.lines[0].rating_mw, grid.lines[1].rating_mw), (120.0, 90.0));
    assert!(says(&imported, "1 branch with a first rating above the base flow"));
}

#[test]
fn skips_a_tape_line_and_takes_the_title_below_it() {
    let source = format!("TAPE\r\n{}", changed(|_, _| {}));
    assert_eq!(imported(&source).0.name, "THREE IN A ROW");
}

#[test]
fn reads_touching_and_blank_fields() {
    let mut touching = bus(1, "", 1, 3, "0.0", "0.0");
    // Load in columns 41-49 and reactive load in 50-59 without a blank between.
    touching.replace_range(40..59, "   100.25-1000.0000");
    let (grid, _) = imported(&changed(|buses, _| {
        buses[0] = touching;
        buses[1] = bus(2, "", 1, 0, "", "");
    }));
    assert_eq!(grid.buses[0].load_mw, 100.25);
    assert_eq!(grid.buses[1].load_mw, 0.0);
}

#[test]
fn stops_a_section_at_its_mark_whatever_follows_it() {
    let source = changed(|_, _| {}).replacen("-999\r\n", "-999 1\r\n", 1);
    assert_eq!(imported(&source).0.buses.len(), 3);
}

#[test]
fn reads_nothing_behind_the_branches() {
    let rest = "-999\r\nLOSS ZONES FOLLOWS  1 ITEMS\r\n-99\r\nINTERCHANGE DATA FOLLOWS 1 ITEMS\r\n-9\r\n 1 card after its mark\r\nEND OF DATA\r\n\u{1a}";
    let source = changed(|_, _| {}).replace("-999\r\nEND OF DATA\r\n", rest);
    assert_eq!(imported(&source).0.lines.len(), 2);
}

#[test]
fn reads_lines_that_end_early_or_run_on() {
    let source = changed(|buses, branches| {
        let short = branches[0].trim_end()[..45].to_owned();
        branches[0] = format!("{short}\r\n");
        buses[0] =
            buses[0].replace("\r\n", "      0.0       0.0        0   tail one column off\r\n");
    });
    assert_eq!(imported(&source).0.lines[0].reactance_pu, 0.1);
}

#[test]
fn ignores_ratios_and_shifts_and_says_so_but_takes_zero_for_one() {
    let source = changed(|_, branches| branches[0] = branch(1, 2, "0.1", "", "0.978", "11.4"));
    let (grid, imported) = imported(&source);
    assert_eq!(grid.lines[0].reactance_pu, 0.1);
    assert!(says(&imported, "1 branch with a ratio other than 1"));
    assert!(says(&imported, "1 branch with a phase shift"));
}

#[test]
fn keeps_digits_and_blanks_of_a_name_as_a_remark() {
    let (_, imported) = imported(&changed(|_, _| {}));
    assert!(imported.text.contains("# Bus 1     HV\n[[bus]]\nname = \"B1\""));
}

#[test]
fn turns_negative_generation_into_load_and_negative_load_into_fixed_generation() {
    let (grid, imported) = imported(&changed(|buses, _| {
        buses[1] = bus(2, "", 1, 2, "10.0", "-9.0");
        buses[2] = bus(9533, "", 1, 0, "-5.0", "0.0");
    }));
    assert_eq!(grid.buses[1].load_mw, 19.0);
    let embedded = grid.units.iter().find(|unit| unit.name == "E9533").expect("a unit");
    assert_eq!((embedded.status, embedded.base_mw), (UnitStatus::Fixed, 5.0));
    assert!(says(&imported, "1 bus with negative generation: 9.00 MW became load"));
    assert!(says(&imported, "1 bus with negative load"));
}

#[test]
fn names_parallel_branches_apart() {
    let (grid, _) =
        imported(&changed(|_, branches| branches.push(branch(1, 2, "0.1", "", "", ""))));
    assert_eq!((grid.lines[0].name.as_str(), grid.lines[2].name.as_str()), ("B1-B2", "B1-B2 #2"));
}

#[test]
fn keeps_negative_reactance_and_stands_in_for_none() {
    let (grid, imported) = imported(&changed(|_, branches| {
        branches[0] = branch(1, 2, "-0.3697", "", "", "");
        branches[1] = branch(2, 9533, "0.0", "", "", "");
    }));
    assert_eq!((grid.lines[0].reactance_pu, grid.lines[1].reactance_pu), (-0.3697, 0.0001));
    assert!(says(&imported, "1 branch without reactance"));
}

#[test]
fn moves_a_stray_piece_to_the_area_it_has_most_branches_with() {
    let (grid, imported) = imported(&changed(|buses, branches| {
        buses[1] = bus(2, "", 2, 0, "40.0", "0.0");
        buses.push(bus(4, "", 1, 0, "0.0", "0.0"));
        buses.push(bus(5, "", 1, 0, "0.0", "0.0"));
        branches.push(branch(1, 4, "0.1", "", "", ""));
        branches.push(branch(2, 5, "0.1", "", "", ""));
        branches.push(branch(4, 2, "0.1", "", "", ""));
    }));
    // Area 1 falls into {1, 4}, {9533} and {5}; the last two hang on bus 2 of area 2.
    let areas: Vec<usize> = grid.buses.iter().map(|bus| bus.area).collect();
    assert_eq!(areas, [0, 1, 1, 0, 1]);
    assert!(
        says(&imported, "B9533 of area 1 do not hang together") && says(&imported, "B5 of area 1")
    );
}

#[test]
fn remarks_on_a_wrong_count_and_reads_what_stands_there() {
    let source = changed(|_, _| {}).replacen("3 ITEMS", "4 ITEMS", 1);
    let (grid, imported) = imported(&source);
    assert_eq!(grid.buses.len(), 3);
    assert!(says(&imported, "promises 4 items; the 3 that stand there were read"));
}

#[track_caller]
fn refused(source: &str, title: &str) {
    let problems = import(source.as_bytes(), "case.cdf").expect_err("it is wrong");
    assert!(
        problems.list().iter().any(|problem| problem.title.contains(title)),
        "{title:?}:\n{problems}"
    );
}

#[test]
fn refuses_what_is_no_such_file_or_is_cut_off() {
    refused("", "no section `BUS DATA FOLLOWS`");
    refused(&changed(|_, _| {}).replace("-999", "   "), "does not end");
    refused(&changed(|_, _| {}).replace(" 100.0  1973", "        1973"), "no MVA base");
}

#[test]
fn points_at_the_columns_of_a_field_that_is_no_number() {
    let source = changed(|buses, _| buses[1] = bus(2, "", 1, 0, "4O.0", "0.0"));
    let problems = import(source.as_bytes(), "case.cdf").expect_err("a letter O");
    assert_eq!(
        (problems.list().len(), problems.line_of(&problems.list()[0])),
        (1, 4),
        "{problems}"
    );
    assert!(problems.to_string().contains("this is `4O.0`"), "{problems}");
}

#[test]
fn refuses_branches_to_no_bus_and_buses_that_come_twice() {
    refused(
        &changed(|_, branches| branches[0] = branch(1, 3, "0.1", "", "", "")),
        "there is no bus 3",
    );
    refused(
        &changed(|buses, _| buses[1] = bus(1, "", 1, 0, "1.0", "")),
        "two buses have the number 1",
    );
}

#[test]
fn refuses_a_network_in_pieces() {
    let source = changed(|_, branches| {
        branches.pop();
    });
    refused(&source, "the network has no unique flow");
}

#[test]
fn refuses_a_file_without_buses_or_with_too_many() {
    refused(&file(&title("100.0", "NONE"), &[], &[]), "the file has no bus");
    let many: Vec<String> = (1..=2001).map(|number| bus(number, "", 1, 0, "", "")).collect();
    refused(&file(&title("100.0", "MANY"), &many, &[]), "the importer holds 2000");
}

#[test]
fn imports_a_single_bus() {
    let (grid, _) = imported(&file(&title("100.0", "ONE"), &[bus(1, "", 1, 3, "5.0", "")], &[]));
    assert_eq!((grid.buses.len(), grid.units[0].base_mw), (1, 5.0));
}
