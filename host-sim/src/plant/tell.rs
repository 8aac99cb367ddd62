//! Sentences on what an event did to islands, loads and units.

use super::Plant;

/// How many names are listed before the rest is counted.
const NAMES_MAX: usize = 6;

/// Tell what became dark, live, split or joined between two states.
pub(super) fn islands(
    before: &Plant,
    after: &Plant,
    lost_units: &[usize],
    sentences: &mut Vec<String>,
) {
    dark_and_live(before, after, sentences);
    for &unit in lost_units {
        let data = &after.constants.units[unit];
        sentences.push(format!(
            "unit {} trips at {:.1} MW: bus {} is dark",
            data.name, before.motion.output_mw[unit], after.constants.buses[data.bus].name
        ));
    }
    splits_and_joins(before, after, sentences);
}

fn dark_and_live(before: &Plant, after: &Plant, sentences: &mut Vec<String>) {
    let served_mw = after.switches.served_load_mw(&after.constants);
    let was = before.bus_island().iter();
    for (bus, (was, is)) in was.zip(after.bus_island()).enumerate() {
        let name = &after.constants.buses[bus].name;
        let load_mw = served_mw[bus];
        match (was, is) {
            (Some(_), None) if load_mw != 0.0 => {
                sentences.push(format!("bus {name} is dark: {load_mw:.1} MW lost"));
            }
            (Some(_), None) => sentences.push(format!("bus {name} is dark")),
            (None, Some(_)) if load_mw != 0.0 => {
                sentences.push(format!("bus {name} is live again: {load_mw:.1} MW back"));
            }
            (None, Some(_)) => sentences.push(format!("bus {name} is live again")),
            (Some(_), Some(_)) | (None, None) => {}
        }
    }
}

/// A split is told from the side of the smaller pieces, a join once.
fn splits_and_joins(before: &Plant, after: &Plant, sentences: &mut Vec<String>) {
    let pieces = |plant: &Plant, other: &Plant| -> Vec<Vec<Vec<usize>>> {
        let mut pieces = vec![vec![Vec::new(); other.island_count()]; plant.island_count()];
        let islands = plant.bus_island().iter().zip(other.bus_island());
        for (bus, islands) in islands.enumerate() {
            if let (Some(own), Some(others)) = islands {
                pieces[*own][*others].push(bus);
            }
        }
        pieces
    };
    for mut parts in pieces(before, after) {
        parts.retain(|part| !part.is_empty());
        parts.sort_by_key(|part| std::cmp::Reverse(part.len()));
        for part in parts.iter().skip(1) {
            sentences.push(format!("{} on an island of their own", names(after, part)));
        }
    }
    for mut parts in pieces(after, before) {
        parts.retain(|part| !part.is_empty());
        parts.sort_by_key(|part| std::cmp::Reverse(part.len()));
        for part in parts.iter().skip(1) {
            sentences.push(format!("{} joined with the rest again", names(after, part)));
        }
    }
}

fn names(plant: &Plant, buses: &[usize]) -> String {
    let listed: Vec<&str> =
        buses.iter().take(NAMES_MAX).map(|&bus| plant.constants.buses[bus].name.as_str()).collect();
    let (word, verb) = if buses.len() == 1 { ("bus", "is") } else { ("buses", "are") };
    match buses.len() - listed.len() {
        0 => format!("{word} {} {verb}", listed.join(", ")),
        more => format!("{word} {} and {more} more {verb}", listed.join(", ")),
    }
}
