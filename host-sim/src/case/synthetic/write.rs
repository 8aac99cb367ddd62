//! A made-up grid as the text of a grid file; what has its usual value is left out.

use std::fmt::Write as _;

use crate::case::model::{FeederKind, Grid, UnitKind};

/// Write it.
pub(super) fn write(grid: &Grid, buses: usize, areas: usize, seed: u64) -> String {
    let mut out = format!(
        "# A made-up grid: {buses} buses, {areas} areas, seed {seed}. The same numbers make the same file.\n\
         # Shape, reactances, loads and units are plausible in size and belong to no place on earth.\n\
         \nformat = 1\n\n[grid]\nname = \"{}\"\nbase_mva = 100.0\nnominal_hz = 50.0\n",
        grid.name
    );
    for area in &grid.areas {
        let _ = write!(out, "\n[[area]]\nname = \"{}\"\n", area.name);
    }
    for bus in &grid.buses {
        let _ = write!(
            out,
            "\n[[bus]]\nname = \"{}\"\narea = \"{}\"\n",
            bus.name, grid.areas[bus.area].name
        );
        if bus.load_mw > 0.0 {
            let _ = writeln!(out, "load_mw = {:?}", bus.load_mw);
        }
        if let Some((x, y)) = bus.position {
            let _ = writeln!(out, "position = [{x:?}, {y:?}]");
        }
    }
    for line in &grid.lines {
        let end = |bus: usize| grid.buses[bus].name.as_str();
        let _ = write!(
            out,
            "\n[[line]]\nname = \"{}\"\nfrom = \"{}\"\nto = \"{}\"\nreactance_pu = {:?}\nrating_mw = {:?}\n",
            line.name,
            end(line.from),
            end(line.to),
            line.reactance_pu,
            line.rating_mw
        );
    }
    units(&mut out, grid);
    for feeder in &grid.feeders {
        let _ = write!(
            out,
            "\n[[feeder]]\nname = \"{}\"\nbus = \"{}\"\nload_mw = {:?}\n",
            feeder.name, grid.buses[feeder.bus].name, feeder.load_mw
        );
        if feeder.kind == FeederKind::Switched {
            out.push_str("kind = \"switched\"\n");
        }
    }
    out
}

fn units(out: &mut String, grid: &Grid) {
    for unit in &grid.units {
        let kind = match unit.kind {
            UnitKind::Steam => "steam",
            UnitKind::Gas => "gas",
            UnitKind::Hydro => "hydro",
            UnitKind::Wind => "wind",
            UnitKind::Solar => "solar",
            UnitKind::Battery => "battery",
        };
        let _ = write!(
            out,
            "\n[[unit]]\nname = \"{}\"\nbus = \"{}\"\nkind = \"{kind}\"\nbase_mw = {:?}\nmin_mw = {:?}\nmax_mw = {:?}\n\
             emergency_max_mw = {:?}\nreserve_up_mw = {:?}\n",
            unit.name,
            grid.buses[unit.bus].name,
            unit.base_mw,
            unit.min_mw,
            unit.max_mw,
            unit.emergency_max_mw,
            unit.reserve_up_mw
        );
    }
}
