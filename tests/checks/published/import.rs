//! The Common Data Format rendering of the 39-bus system.

use hedgerow::case::cdf::import;
use hedgerow::case::parse_grid;
use hedgerow_tests::table::{data_path, data_text, rows_of};

/// Source: New England 39-bus system (Athay, Podmore, Virmani 1979), from memory; figures of the table equal those read from the 1973 format; tolerance none (exactly equal).
#[test]
fn import_of_the_39_bus_system_gives_the_figures_of_the_table() {
    let bytes = std::fs::read(data_path("ieee39.cdf")).unwrap();
    let imported = import(&bytes, "ieee39.cdf").unwrap();
    let grid = parse_grid(&imported.text, "ieee39.grid.toml").unwrap();
    let text = data_text("ieee39.figures.csv");
    let bus_of = |number: f64| grid.buses.iter().position(|bus| bus.name == format!("B{number}"));
    let buses = rows_of(&text, "bus");
    assert_eq!(grid.buses.len(), buses.len());
    for (bus, row) in grid.buses.iter().zip(&buses) {
        assert_eq!((bus.name.clone(), bus.load_mw), (format!("B{}", row[0]), row[1]));
    }
    let lines = rows_of(&text, "line");
    assert_eq!(grid.lines.len(), lines.len());
    for (line, row) in grid.lines.iter().zip(&lines) {
        assert_eq!((Some(line.from), Some(line.to)), (bus_of(row[0]), bus_of(row[1])));
        assert_eq!((line.reactance_pu, line.rating_mw), (row[2], row[3]), "{}", line.name);
    }
    let units = rows_of(&text, "unit");
    assert_eq!(grid.units.len(), units.len());
    let load_mw: f64 = buses.iter().map(|row| row[1]).sum();
    let scheduled_mw: f64 = units.iter().map(|row| row[1]).sum();
    let slack_mw = units.iter().find(|row| row[0] == 31.0).unwrap()[1];
    for (unit, row) in grid.units.iter().zip(&units) {
        assert_eq!(Some(unit.bus), bus_of(row[0]));
        if row[0] == 31.0 {
            // Losses have no place in the model: the slack gives what is missing.
            let balanced_mw = load_mw - (scheduled_mw - slack_mw);
            assert!((unit.base_mw - balanced_mw).abs() < 1e-9, "{}", unit.base_mw);
        } else {
            assert_eq!(unit.base_mw, row[1]);
        }
    }
    assert_eq!(grid.nominal_hz, 60.0);
    assert_eq!(grid.base_mva, 100.0);
}

/// Source: IEEE Trans. PAS-92(6), 1973 (the format), our rendering of the 39-bus system; tolerance none (same network in the file of the two-part split).
#[test]
fn imported_39_bus_network_is_that_of_the_grid_file() {
    let bytes = std::fs::read(data_path("ieee39.cdf")).unwrap();
    let imported = parse_grid(&import(&bytes, "ieee39.cdf").unwrap().text, "imported").unwrap();
    let written = super::system("ieee39_2areas.grid.toml", "ieee39.dc.csv").grid;
    for (a, b) in imported.lines.iter().zip(&written.lines) {
        assert_eq!((a.from, a.to, a.reactance_pu), (b.from, b.to, b.reactance_pu));
    }
    for (a, b) in imported.units.iter().zip(&written.units) {
        assert_eq!(a.bus, b.bus);
        assert!((a.base_mw - b.base_mw).abs() < 1e-9);
    }
}
