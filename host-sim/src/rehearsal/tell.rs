//! Sentences for the story of a run.

use crate::case::model::{Grid, Happening};

pub use crate::record::rung_word;

/// What happens, in words, for events that are not the plant's to tell.
pub fn sentence(grid: &Grid, what: &Happening) -> String {
    let area = |index: usize| &grid.areas[index].name;
    match what {
        Happening::Schedule { line, mw, ramp_s } => {
            format!("tie {} is to carry {mw:.1} MW, in {ramp_s:.0} s", grid.lines[*line].name)
        }
        Happening::BasePoint { unit, mw, ramp_s } => {
            format!("base point of {} goes to {mw:.1} MW in {ramp_s:.0} s", grid.units[*unit].name)
        }
        Happening::StewardDies { area: index } => format!("the board of {} dies", area(*index)),
        Happening::StewardReturns { area: index } => {
            format!("a new board takes over {}", area(*index))
        }
        Happening::LinkOutage { areas: (a, b), for_s } => {
            format!("no frame passes between {} and {} for {for_s:.0} s", area(*a), area(*b))
        }
        Happening::RestoreLoad { area: index } => {
            format!("the operator lets the feeders of {} return", area(*index))
        }
        Happening::LineTrip { line } | Happening::LineClose { line } => {
            format!("line {} is switched", grid.lines[*line].name)
        }
        Happening::LoadStep { bus, mw } => {
            format!("the load of {} changes by {mw:+.1} MW", grid.buses[*bus].name)
        }
        Happening::UnitTrip { unit } | Happening::UnitReturn { unit } => {
            format!("unit {} is switched", grid.units[*unit].name)
        }
    }
}
