//! Areas of the file, made to hang together.
//!
//! Contract: the largest piece of an area keeps its name; every other piece goes
//! to the area it has most branches with (the lower number among equals). Each
//! move leaves one piece less, so it ends. A piece without a branch to another
//! area stays: the network itself is then in pieces, which is reported later.

use super::super::model::Line;
use super::super::network::pieces;

/// Join stray pieces to neighbours; returns a sentence per move.
pub(super) fn join_pieces(
    area_of: &mut [i64],
    lines: &[Line],
    called: impl Fn(usize) -> String,
) -> Vec<String> {
    let mut moves = Vec::new();
    // Each round moves one piece, and there are at most as many pieces as buses.
    for _ in 0..area_of.len() {
        let Some((piece, area)) = next_move(area_of, lines) else {
            break;
        };
        let from = area_of[piece[0]];
        let others = match piece.len() {
            1 => String::new(),
            count => format!(" and {} more", count - 1),
        };
        moves.push(format!(
            "{}{others} of area {from} do not hang together with the rest of it: moved to area {area}, \
             with which they have most branches",
            called(piece[0]),
        ));
        for bus in piece {
            area_of[bus] = area;
        }
    }
    moves
}

/// The first stray piece and where it goes.
fn next_move(area_of: &[i64], lines: &[Line]) -> Option<(Vec<usize>, i64)> {
    let mut numbers: Vec<i64> = area_of.to_vec();
    numbers.sort_unstable();
    numbers.dedup();
    for number in numbers {
        let mut parts = pieces(area_of.len(), lines, |bus| area_of[bus] == number, |_| true);
        // A stable sort: the first of equals stays.
        parts.sort_by_key(|part| std::cmp::Reverse(part.len()));
        for part in parts.into_iter().skip(1) {
            if let Some(area) = neighbour(&part, area_of, lines) {
                return Some((part, area));
            }
        }
    }
    None
}

/// The area a piece has most branches with.
fn neighbour(part: &[usize], area_of: &[i64], lines: &[Line]) -> Option<i64> {
    let mut counts = std::collections::BTreeMap::new();
    for line in lines {
        let other = match (part.contains(&line.from), part.contains(&line.to)) {
            (true, false) => line.to,
            (false, true) => line.from,
            (true, true) | (false, false) => continue,
        };
        *counts.entry(area_of[other]).or_insert(0usize) += 1;
    }
    let most = counts.values().copied().max()?;
    counts.into_iter().find(|&(_, count)| count == most).map(|(area, _)| area)
}
