//! Places and lines: each area grows line by line towards its nearest buses.
//!
//! Contract: areas sit on a near-square lattice; inside, every new bus is joined to
//! the nearest one there is (so the area hangs together), then the shortest missing
//! lines among near pairs are added; neighbouring areas get two to four ties
//! between their closest pairs.

use super::{Draw, rounded};
use crate::case::model::{Area, Bus, Grid, Line};

/// Lines per bus inside an area.
const LINES_PER_BUS: f64 = 1.37;
/// Near buses that an extra line may go to.
const NEAR: usize = 6;
/// Side of an area's square, against the lattice's step of 1: areas stay apart.
const SIDE: f64 = 0.82;
/// Length of a line between neighbours in km, about.
const NEIGHBOUR_KM: f64 = 25.0;
/// Reactance in pu per km on 100 MVA: 0.4 ohm/km at 230 kV gives 0.00076.
const PU_PER_KM: f64 = 0.000_76;

/// Lay out buses, areas and lines.
pub(super) fn lay_out(buses: usize, areas: usize, draw: &mut Draw) -> Grid {
    let mut grid = Grid {
        name: String::new(),
        base_mva: 100.0,
        nominal_hz: 50.0,
        areas: (1..=areas).map(|n| Area { name: format!("Area {n}"), lowest_rung: 3 }).collect(),
        buses: Vec::with_capacity(buses),
        lines: Vec::new(),
        units: Vec::new(),
        feeders: Vec::new(),
    };
    let columns = (areas as f64).sqrt().ceil() as usize;
    let mut first = vec![0];
    for area in 0..areas {
        let count = buses / areas + usize::from(area < buses % areas);
        let corner = ((area % columns) as f64, (area / columns) as f64);
        place(&mut grid, area, count, corner, draw);
        first.push(grid.buses.len());
    }
    // Spacing of buses in lattice units, and so the length of a unit.
    let km = NEIGHBOUR_KM / (SIDE / (buses as f64 / areas as f64).sqrt());
    for area in 0..areas {
        join_inside(&mut grid, first[area]..first[area + 1], km, draw);
    }
    for (a, b) in neighbours(areas, columns) {
        join_areas(&mut grid, first[a]..first[a + 1], first[b]..first[b + 1], km, draw);
    }
    grid
}

fn place(grid: &mut Grid, area: usize, count: usize, corner: (f64, f64), draw: &mut Draw) {
    for _ in 0..count {
        let mut at = |corner: f64| rounded(100.0 * (corner + SIDE * draw.share()), 2);
        let position = (at(corner.0), at(corner.1));
        grid.buses.push(Bus {
            name: format!("B{}", grid.buses.len() + 1),
            area,
            load_mw: 0.0,
            load_damping: 1.0,
            damping_mw_per_hz: 0.0,
            position: Some(position),
        });
    }
}

/// Distance between two buses in lattice units.
fn apart(grid: &Grid, a: usize, b: usize) -> f64 {
    let at = |bus: usize| grid.buses[bus].position.unwrap_or_default();
    let ((x0, y0), (x1, y1)) = (at(a), at(b));
    ((x1 - x0).powi(2) + (y1 - y0).powi(2)).sqrt() / 100.0
}

/// Add a line whose reactance follows its length.
fn join(grid: &mut Grid, a: usize, b: usize, km: f64, draw: &mut Draw) {
    let length_km = (apart(grid, a, b) * km).max(3.0);
    let reactance_pu = (length_km * PU_PER_KM * draw.within(0.8, 2.2)).clamp(0.002, 0.4);
    grid.lines.push(Line {
        name: format!("L{}", grid.lines.len() + 1),
        from: a,
        to: b,
        reactance_pu: rounded(reactance_pu, 5),
        rating_mw: f64::INFINITY,
        rating_short_mw: None,
        rating_short_min: None,
        metered: true,
        closed: true,
        schedule_mw: None,
    });
}

fn join_inside(grid: &mut Grid, own: std::ops::Range<usize>, km: f64, draw: &mut Draw) {
    let mut joined = std::collections::BTreeSet::new();
    let start = own.start;
    for bus in own.clone().skip(1) {
        let near =
            (start..bus).min_by(|&a, &b| apart(grid, bus, a).total_cmp(&apart(grid, bus, b)));
        let near = near.unwrap_or(start);
        joined.insert((near, bus));
        join(grid, near, bus, km, draw);
    }
    let mut missing: Vec<(f64, usize, usize)> = Vec::new();
    for bus in own.clone() {
        let mut near: Vec<(f64, usize)> = own
            .clone()
            .filter(|&other| other != bus)
            .map(|other| (apart(grid, bus, other), other))
            .collect();
        let nth = NEAR.min(near.len().saturating_sub(1));
        if nth > 0 {
            near.select_nth_unstable_by(nth, |a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1)));
        }
        near.truncate(NEAR);
        let pairs = near.iter().map(|&(length, other)| {
            // A draw blurs the order, or every grid would be a lattice of shortest lines.
            (length * draw.within(0.5, 1.5), bus.min(other), bus.max(other))
        });
        missing.extend(pairs.filter(|&(_, a, b)| !joined.contains(&(a, b))).collect::<Vec<_>>());
    }
    missing.sort_by(|x, y| x.0.total_cmp(&y.0).then((x.1, x.2).cmp(&(y.1, y.2))));
    let wanted = (LINES_PER_BUS * own.len() as f64).round() as usize;
    for (_, a, b) in missing {
        if joined.len() >= wanted {
            break;
        }
        if joined.insert((a, b)) {
            join(grid, a, b, km, draw);
        }
    }
}

/// Pairs of areas side by side on the lattice, and every other diagonal.
fn neighbours(areas: usize, columns: usize) -> Vec<(usize, usize)> {
    let mut pairs = Vec::new();
    for area in 0..areas {
        let (column, row) = (area % columns, area / columns);
        if column + 1 < columns && area + 1 < areas {
            pairs.push((area, area + 1));
        }
        if area + columns < areas {
            pairs.push((area, area + columns));
        }
        if column + 1 < columns && area + columns + 1 < areas && (column + row) % 2 == 0 {
            pairs.push((area, area + columns + 1));
        }
    }
    pairs
}

fn join_areas(
    grid: &mut Grid,
    a: std::ops::Range<usize>,
    b: std::ops::Range<usize>,
    km: f64,
    draw: &mut Draw,
) {
    let count = 2 + draw.below(3);
    let mut pairs: Vec<(f64, usize, usize)> = Vec::new();
    for one in a {
        let nearest =
            b.clone().min_by(|&x, &y| apart(grid, one, x).total_cmp(&apart(grid, one, y)));
        if let Some(other) = nearest {
            pairs.push((apart(grid, one, other), one, other));
        }
    }
    pairs.sort_by(|x, y| x.0.total_cmp(&y.0).then((x.1, x.2).cmp(&(y.1, y.2))));
    // Every second of the closest pairs: ties that stand apart are of more use.
    let mut ends = std::collections::BTreeSet::new();
    let spread: Vec<_> = pairs.iter().step_by(2).chain(pairs.iter().skip(1).step_by(2)).collect();
    for &&(_, one, other) in
        spread.iter().filter(|(_, one, other)| ends.insert(*one) & ends.insert(*other)).take(count)
    {
        join(grid, one, other, km, draw);
    }
}
