//! The short play that `fit` runs: quiet ticks, a line out in every area, a unit lost.
//!
//! Contract: made from the grid alone, so that the same grid is always measured
//! by the same play. It is there to make stewards work, not to be kept.

use crate::case::defaults;
use crate::case::model::{Event, Grid, Happening, Play, Run, UnitStatus};
use crate::grid::graph::blocks;

/// When the first line opens, s.
const LINES_AT_S: f64 = 1.0;
/// When the largest unit trips, s.
const UNIT_AT_S: f64 = 2.0;
/// Controller tick, s.
pub const TICK_S: f64 = 0.1;

/// The play for a grid, this long.
pub fn short(grid: &Grid, duration_s: f64) -> Play {
    let mut events: Vec<Event> = lines_to_open(grid)
        .map(|line| Event { at_s: LINES_AT_S, what: Happening::LineTrip { line } })
        .collect();
    if let Some(unit) = largest_unit(grid) {
        events.push(Event { at_s: UNIT_AT_S, what: Happening::UnitTrip { unit } });
    }
    Play {
        name: "fit".to_owned(),
        title: "A line opens in every area, then the largest unit trips".to_owned(),
        run: Run { duration_s, tick_s: TICK_S, plant_step_s: 0.01, seed: 1 },
        steward: defaults::steward(grid.base_mva),
        links: defaults::links(),
        events,
    }
}

/// The first line of each area whose opening splits nothing.
fn lines_to_open(grid: &Grid) -> impl Iterator<Item = usize> {
    let ends: Vec<(usize, usize)> = grid.lines.iter().map(|line| (line.from, line.to)).collect();
    let area = |bus: usize| grid.buses[bus].area;
    // Ties are left out: an area must stay whole by its own lines.
    let inner: Vec<bool> =
        grid.lines.iter().map(|l| l.closed && area(l.from) == area(l.to)).collect();
    let found = blocks(grid.buses.len(), &ends, &inner);
    (0..grid.areas.len()).filter_map(move |index| {
        let mut lines = grid.lines.iter().enumerate().zip(&inner).zip(&found.is_bridge);
        lines.find_map(|(((number, line), &inner), &bridge)| {
            (inner && !bridge && area(line.from) == index).then_some(number)
        })
    })
}

fn largest_unit(grid: &Grid) -> Option<usize> {
    let running = grid.units.iter().enumerate().filter(|(_, u)| u.status != UnitStatus::Off);
    running.max_by(|(_, a), (_, b)| a.base_mw.total_cmp(&b.base_mw)).map(|(unit, _)| unit)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::case::builtin_grid;
    use crate::record::Scheme;
    use crate::rehearsal::rehearse;

    #[test]
    fn opens_a_line_in_every_area_and_trips_the_largest_unit() {
        let grid = builtin_grid();
        let play = short(&grid, 5.0);
        assert_eq!(play.events.len(), grid.areas.len() + 1);
        let last = play.events.last().map(|event| event.what.clone());
        let Some(Happening::UnitTrip { unit }) = last else { panic!("{last:?}") };
        assert!(grid.units.iter().all(|u| u.base_mw <= grid.units[unit].base_mw));
    }

    #[test]
    fn runs_and_makes_somebody_work() {
        let grid = builtin_grid();
        let run = rehearse(&grid, &short(&grid, 5.0), Scheme::Steward, &mut |_| true).unwrap();
        assert_eq!(run.series.times_s.len(), 50);
        assert!(run.extremes.lowest_frequency_hz.value < grid.nominal_hz - 0.01);
    }
}
