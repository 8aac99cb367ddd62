//! The built-in example, the Quillon Islands, and its plays.
//!
//! Contract: the embedded files pass the same checks as any other. A test reads
//! every one of them, so the only panics here are those of a broken build.

use super::grid_file::parse_grid;
use super::model::{Grid, Play};
use super::play_file::parse_play;

/// Text of the built-in grid file.
pub const GRID_TEXT: &str = include_str!("quillon/quillon.grid.toml");

/// Name and sentence of each built-in play; the first one is the default.
const TITLES: &[(&str, &str)] = &[
    (
        "quillon",
        "Two disturbances kept inside their areas, one that needs the neighbours, and the way back",
    ),
    ("absorb", "A line trip and a load step that their areas absorb alone"),
    ("lean", "A hydro unit is lost; Ashmere leans on its neighbours"),
    ("stretch", "Two ties and a unit are lost; Ashmere spends its reserve and emergency range"),
    ("shed", "Load is shed in Ashmere when no help can reach it, and comes back when it can"),
    ("switched", "A pocket behind one full line, and a feeder that is either on or off"),
    ("rough-link", "A wind park is lost while the links between the stewards are bad"),
    (
        "silent-neighbour",
        "A neighbour's board dies while it is helping; the other neighbour is enough",
    ),
    ("island", "A line trip leaves a village dark"),
];

/// Texts of the built-in plays, in the same order.
const TEXTS: &[&str] = &[
    include_str!("quillon/quillon.play.toml"),
    include_str!("quillon/absorb.play.toml"),
    include_str!("quillon/lean.play.toml"),
    include_str!("quillon/stretch.play.toml"),
    include_str!("quillon/shed.play.toml"),
    include_str!("quillon/switched.play.toml"),
    include_str!("quillon/rough-link.play.toml"),
    include_str!("quillon/silent-neighbour.play.toml"),
    include_str!("quillon/island.play.toml"),
];

/// The Quillon Islands.
pub fn builtin_grid() -> Grid {
    match parse_grid(GRID_TEXT, "quillon.grid.toml") {
        Ok(grid) => grid,
        Err(problems) => panic!("the built-in grid is broken:\n{problems}"),
    }
}

/// Name and sentence of each built-in play; the first one is the default.
pub fn builtin_plays() -> &'static [(&'static str, &'static str)] {
    TITLES
}

/// Text of a built-in play.
pub fn builtin_text(name: &str) -> Option<&'static str> {
    let index = TITLES.iter().position(|(known, _)| *known == name)?;
    TEXTS.get(index).copied()
}

/// A built-in play with its grid; none when there is no play of this name.
pub fn builtin_play(name: &str) -> Option<(Grid, Play)> {
    let text = builtin_text(name)?;
    let grid = builtin_grid();
    match parse_play(text, &format!("{name}.play.toml"), &grid) {
        Ok(play) => Some((grid, play)),
        Err(problems) => panic!("the built-in play {name} is broken:\n{problems}"),
    }
}

#[cfg(test)]
mod tests {
    use super::super::cdf::flow::base_flows_pu;
    use super::*;

    #[test]
    fn reads_every_built_in_play_under_its_stated_title() {
        for (name, title) in builtin_plays() {
            let (_, play) = builtin_play(name).expect(name);
            assert_eq!((play.name.as_str(), play.title.as_str()), (*name, *title));
            assert!(!play.events.is_empty());
        }
        assert_eq!(TITLES.len(), TEXTS.len());
    }

    #[test]
    fn built_in_grid_has_the_promised_shape() {
        let grid = builtin_grid();
        let count = |area| grid.buses.iter().filter(|bus| bus.area == area).count();
        assert_eq!([count(0), count(1), count(2)], [12, 10, 8]);
        let area_of = |bus: usize| grid.buses[bus].area;
        let ties = grid.lines.iter().filter(|line| area_of(line.from) != area_of(line.to));
        assert_eq!(ties.count(), 5);
        let load_mw: f64 = grid.buses.iter().map(|bus| bus.load_mw).sum();
        assert_eq!(load_mw, 1400.0);
        assert!(grid.buses.iter().all(|bus| bus.position.is_some()));
    }

    #[test]
    fn base_case_fills_no_line_of_the_example_above_two_thirds() {
        let grid = builtin_grid();
        let mut injection_pu: Vec<f64> =
            grid.buses.iter().map(|bus| -bus.load_mw / 100.0).collect();
        for unit in &grid.units {
            injection_pu[unit.bus] += unit.base_mw / 100.0;
        }
        let flows_pu = base_flows_pu(&injection_pu, &grid.lines).expect("one network");
        for (line, flow_pu) in grid.lines.iter().zip(flows_pu) {
            let loading = 100.0 * flow_pu.abs() / line.rating_mw;
            assert!(loading < 0.667, "{}: {loading}", line.name);
        }
    }

    #[test]
    fn every_play_rests_before_it_ends() {
        for (name, _) in builtin_plays() {
            let (_, play) = builtin_play(name).expect(name);
            let last_s = play.events.last().map_or(0.0, |event| event.at_s);
            assert!(play.run.duration_s - last_s >= 120.0, "{name}");
        }
    }

    #[test]
    fn knows_no_play_of_another_name() {
        assert!(builtin_play("storm").is_none());
    }
}
