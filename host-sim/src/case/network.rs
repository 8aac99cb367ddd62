//! Which buses hang together over the lines in service.
//!
//! Contract: the whole network is one piece, and so is each area by itself,
//! because a steward knows nothing of the outside. Pieces are listed in file
//! order. Cost: near-linear in buses and lines.

use super::grid_file::GridMarks;
use super::model::{Grid, Line};
use super::problems::Problem;

/// The pieces that lines join a set of `count` buses into; each piece lists buses in file order.
///
/// `keep` says which buses take part, `use_line` which lines count.
pub fn pieces(
    count: usize,
    lines: &[Line],
    keep: impl Fn(usize) -> bool,
    use_line: impl Fn(&Line) -> bool,
) -> Vec<Vec<usize>> {
    let mut root: Vec<usize> = (0..count).collect();
    for line in lines.iter().filter(|line| use_line(line)) {
        if keep(line.from) && keep(line.to) {
            let (a, b) = (find(&mut root, line.from), find(&mut root, line.to));
            // The lower index leads, so that pieces come out in file order.
            root[a.max(b)] = a.min(b);
        }
    }
    let mut piece_of = vec![usize::MAX; count];
    let mut pieces: Vec<Vec<usize>> = Vec::new();
    for bus in (0..count).filter(|&bus| keep(bus)) {
        let leader = find(&mut root, bus);
        if piece_of[leader] == usize::MAX {
            piece_of[leader] = pieces.len();
            pieces.push(Vec::new());
        }
        pieces[piece_of[leader]].push(bus);
    }
    pieces
}

/// Leader of a bus's piece, with path halving.
fn find(root: &mut [usize], mut bus: usize) -> usize {
    while root[bus] != bus {
        root[bus] = root[root[bus]];
        bus = root[bus];
    }
    bus
}

/// Log a network or an area that falls apart.
pub(crate) fn check_network(grid: &Grid, marks: &GridMarks, log: &mut Vec<Problem>) {
    let closed = |line: &Line| line.closed;
    let whole = pieces(grid.buses.len(), &grid.lines, |_| true, closed);
    if let [first, second, ..] = whole.as_slice() {
        let (one, other) = (&grid.buses[first[0]].name, &grid.buses[second[0]].name);
        let problem = Problem::new(
            marks.buses[second[0]].of("name"),
            format!("the network falls into {} pieces", whole.len()),
        )
        .found(format!("no line in service leads from `{other}` to `{one}`"))
        .see(marks.buses[first[0]].of("name"), "the other side")
        .right("join them with a `[[line]]`, or close one");
        log.push(problem);
    }
    for (index, area) in grid.areas.iter().enumerate() {
        let inside = |bus: usize| grid.buses[bus].area == index;
        let parts = pieces(grid.buses.len(), &grid.lines, inside, closed);
        if parts.len() > 1 {
            let listed: Vec<String> = parts.iter().map(|part| describe(grid, part)).collect();
            let problem = Problem::new(
                marks.areas[index].of("name"),
                format!("area `{}` falls into {} pieces", area.name, parts.len()),
            )
            .found(format!("pieces: {}", listed.join("; ")))
            .right("an area hangs together by its own lines; split it or move buses");
            log.push(problem);
        }
    }
}

/// A piece in a few words.
fn describe(grid: &Grid, piece: &[usize]) -> String {
    const SHOWN: usize = 4;
    let names: Vec<&str> =
        piece.iter().take(SHOWN).map(|&bus| grid.buses[bus].name.as_str()).collect();
    let more = piece.len().saturating_sub(SHOWN);
    if more > 0 { format!("{} and {more} more", names.join(", ")) } else { names.join(", ") }
}
