//! Whether each area fits the largest build of the steward.
//!
//! Contract: a grid may be larger than any board (it can still be divided); a
//! play may not, since it runs one steward per area.

use super::model::Grid;

/// Buses of one area that the largest build holds.
pub const BUSES_MAX: usize = 64;
/// Internal lines of one area that the largest build holds.
pub const LINES_MAX: usize = 96;
/// Units and feeders of one area, together, that the largest build holds.
pub const ACTUATORS_MAX: usize = 64;
/// Ties of one area that the largest build holds.
pub const TIES_MAX: usize = 12;

/// What of an area is too large, in one sentence each; empty when everything fits.
pub fn fits_largest_steward(grid: &Grid) -> Result<(), Vec<String>> {
    let mut sentences = Vec::new();
    for (index, area) in grid.areas.iter().enumerate() {
        let inside = |bus: usize| grid.buses[bus].area == index;
        let ends = |line: &&super::model::Line| (inside(line.from), inside(line.to));
        let counts = [
            ("buses", grid.buses.iter().filter(|bus| bus.area == index).count(), BUSES_MAX),
            (
                "lines",
                grid.lines.iter().filter(|line| ends(line) == (true, true)).count(),
                LINES_MAX,
            ),
            (
                "units and feeders",
                grid.units.iter().filter(|unit| inside(unit.bus)).count()
                    + grid.feeders.iter().filter(|feeder| inside(feeder.bus)).count(),
                ACTUATORS_MAX,
            ),
            (
                "ties",
                grid.lines.iter().filter(|line| ends(line).0 != ends(line).1).count(),
                TIES_MAX,
            ),
        ];
        for (noun, count, most) in counts {
            if count > most {
                sentences.push(format!(
                    "area `{}` has {count} {noun}; the largest steward holds {most}",
                    area.name
                ));
            }
        }
    }
    if sentences.is_empty() { Ok(()) } else { Err(sentences) }
}
