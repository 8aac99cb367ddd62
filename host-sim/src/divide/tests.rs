//! A ring of three areas worked out by hand, and what the pieces promise.

use super::base::BaseCase;
use super::figures::document;
use super::problem::TieProblem;
use super::propose::{Weight, propose};
use super::*;
use crate::case::synthetic::synthetic;
use crate::case::{builtin_grid, parse_grid};

/// A (buses 1, 2) gives 60 MW, B (3, 4) takes 40 MW at 4, C (5, 6) takes 20 MW at 6;
/// all six lines of the ring 1-2-3-4-5-6 have 0.1 pu, ties 50 MW, others 100 MW.
const RING: &str = r#"# a ring
format = 1

[grid]
name = "Ring"

[[area]]
name = "A"
[[area]]
name = "B"
[[area]]
name = "C"

[[bus]]
name = "1"
area = "A"
[[bus]]
name = "2"
area = "A" # of A
[[bus]]
name = "3"
area = "B"
[[bus]]
name = "4"
area = "B"
load_mw = 40.0
[[bus]]
name = "5"
area = "C"
[[bus]]
name = "6"
area = "C"
load_mw = 20.0

[[line]]
from = "1"
to = "2"
reactance_pu = 0.1
rating_mw = 100.0
[[line]]
from = "2"
to = "3"
reactance_pu = 0.1
rating_mw = 50.0
[[line]]
from = "3"
to = "4"
reactance_pu = 0.1
rating_mw = 100.0
# the long way round
[[line]]
from = "4"
to = "5"
reactance_pu = 0.1
rating_mw = 50.0 # thin
closed = true # for now
schedule_mw = -10.0
[[line]]
from = "5"
to = "6"
reactance_pu = 0.1
rating_mw = 100.0
[[line]]
from = "6"
to = "1"
reactance_pu = 0.1
rating_mw = 50.0

[[unit]]
name = "G"
bus = "1"
kind = "steam"
base_mw = 60.0
max_mw = 100.0
"#;

fn ring() -> Grid {
    parse_grid(RING, "ring.grid.toml").unwrap_or_else(|problems| panic!("{problems}"))
}

fn divided(grid: &Grid, settings: &Settings) -> Division {
    divide(grid, settings, &mut |_| true).expect("it can be divided")
}

#[test]
fn ring_of_three_areas_opens_the_tie_worked_out_by_hand() {
    // Opening 4-5: 2-3 carries 40 of 50 MW (0.8). Opening either of the others
    // puts all 60 MW on one tie (1.2).
    let division = divided(&ring(), &Settings::default());
    let choices = &division.choices;
    assert_eq!(choices.trees, TreeCount::Exact(3));
    assert_eq!((choices.certainty, choices.within_ratings), (Certainty::Enumerated, Some(1)));
    assert_eq!(
        (choices.best[0].opened.as_slice(), choices.best[0].worst_line),
        (&[3][..], Some(1))
    );
    let loadings: Vec<f64> = choices.best.iter().map(|choice| choice.worst_loading).collect();
    for (found, by_hand) in loadings.iter().zip([0.8, 1.2, 1.2]) {
        assert!((found - by_hand).abs() < 1e-12, "{loadings:?}");
    }
}

#[test]
fn price_of_the_ring_is_the_one_worked_out_by_hand() {
    let division = divided(&ring(), &Settings::default());
    let opened = &division.price.opened;
    assert_eq!(opened.len(), 1);
    // Angles in rad: bus 4 at -0.12 (three times 0.4 pu over 0.1 pu), bus 5 at -0.02.
    assert!((opened[0].angle_after_deg - (-0.10_f64).to_degrees()).abs() < 1e-9);
    // 2-3 trips: B is short of 40 MW and has no unit; A and C are left with 5 s times 100 MVA.
    let tie = &division.price.closed[0];
    assert_eq!(
        (tie.line, tie.sides[0].areas.as_slice(), tie.sides[1].areas.as_slice()),
        (1, &[0, 2][..], &[1][..])
    );
    assert!(
        (tie.sides[0].surplus_mw - 40.0).abs() < 1e-9
            && (tie.sides[1].surplus_mw + 40.0).abs() < 1e-9
    );
    assert_eq!((tie.sides[0].inertia_mws, tie.sides[1].inertia_mws), (500.0, 0.0));
    assert_eq!((tie.sides[0].room_up_mw, tie.sides[0].room_down_mw), (40.0, 60.0));
    assert!(tie.sides[0].can_balance() && !tie.sides[1].can_balance());
    // A ring has no bridge, a path nothing else.
    assert_eq!(division.price.lost_to_n1, [0, 1, 2, 4, 5]);
    // Before, 1-2 carries 140/6 MW, and its outage moves all of it to the ring's other side.
    let row = division.outages.rows.iter().find(|row| row.line == 0).expect("a row");
    let before = row.before.expect("a ring does not split");
    assert!((before.outside_mw - 140.0 / 6.0).abs() < 1e-9 && row.after.is_none());
}

#[test]
fn a_path_has_no_pocket_and_every_area_of_the_example_has_one() {
    assert!(divided(&ring(), &Settings::default()).outages.pockets.is_empty());
    let division = divided(&builtin_grid(), &Settings::default());
    let outages = &division.outages;
    for area in 0..3 {
        let own = outages.pockets.iter().filter(|pocket| pocket.area == area);
        assert!(own.map(|pocket| pocket.buses).max().is_some_and(|buses| buses > 3), "{area}");
    }
    for row in &outages.rows {
        assert_eq!(row.after.is_some(), outages.pocket_of_line[row.line].is_some(), "{}", row.line);
    }
}

#[test]
fn relaxed_bound_of_the_ring_shares_the_surplus_between_both_ties() {
    // 30 MW on each of the ties of A, of 50 MW.
    let grid = ring();
    let problem =
        TieProblem::new(&grid, &BaseCase::of_file(&grid).expect("flow")).expect("problem");
    let bound = relax::relax(&problem).bound;
    assert!(bound <= 0.6 && bound > 0.6 - 1e-6, "{bound}");
}

#[test]
fn file_keeps_comments_and_changes_only_what_the_division_does() {
    let division = divided(&ring(), &Settings::default());
    let text = file::divided_text(RING, &division).expect("a file");
    let (head, rest) = text.split_at(text.find("# a ring").expect("the first comment"));
    assert!(head.contains("planning decision") && head.contains("single point of separation"));
    let expected = RING
        .replace("closed = true # for now", "closed = false # for now")
        .replace("schedule_mw = -10.0\n", "");
    assert_eq!(rest, expected);
    let again = parse_grid(&text, "again").expect("it reads back");
    let open: Vec<usize> = (0..6).filter(|&line| !again.lines[line].closed).collect();
    assert_eq!(open, [3]);
}

#[test]
fn file_with_proposed_areas_reads_back_with_them() {
    let settings = Settings { areas: Some(4), ..Settings::default() };
    let division = divided(&builtin_grid(), &settings);
    let source = crate::case::builtin::GRID_TEXT;
    let text = file::divided_text(source, &division).expect("a file");
    let again = parse_grid(&text, "again").expect("it reads back");
    assert_eq!(again.areas.len(), 4);
    let areas = |grid: &Grid| grid.buses.iter().map(|bus| bus.area).collect::<Vec<_>>();
    assert_eq!(areas(&again), areas(&division.grid));
    let comments = |text: &str| text.lines().filter(|line| line.starts_with("# ---")).count();
    assert_eq!(comments(&text), comments(source));
}

#[test]
fn file_of_another_grid_is_refused() {
    let division = divided(&ring(), &Settings::default());
    let other = crate::case::builtin::GRID_TEXT;
    assert!(matches!(file::divided_text(other, &division), Err(file::FileError::Entries { .. })));
}

#[test]
fn one_area_asks_for_a_proposal_and_too_many_are_refused() {
    let mut grid = ring();
    grid.areas.truncate(1);
    grid.buses.iter_mut().for_each(|bus| bus.area = 0);
    let ask = |areas| divide(&grid, &Settings { areas, ..Settings::default() }, &mut |_| true);
    assert_eq!(ask(None).map(|_| ()), Err(DivideError::OneArea));
    assert_eq!(ask(Some(3)).map(|_| ()), Err(DivideError::Count { wanted: 3, buses: 6 }));
    assert!(ask(Some(2)).is_ok());
}

#[test]
fn proposal_cuts_a_dumbbell_at_its_handle_and_never_a_line_without_rating() {
    let text = synthetic(40, 2, 5).expect("sizes");
    let grid = parse_grid(&text, "two").expect("sound");
    let base = BaseCase::of_file(&grid).expect("flow");
    let made = propose(&grid, &base, 2, Weight::Susceptance).expect("two areas");
    let drawn = with_areas(&grid, &made.area_of_bus, 2);
    let ties =
        |grid: &Grid| (0..grid.lines.len()).filter(|&l| base::is_tie(grid, l)).collect::<Vec<_>>();
    assert!(ties(&drawn).len() <= ties(&grid).len() + 1, "{:?}", ties(&drawn));
    // Without a rating, no line of the cut may be one again.
    let mut bare = grid.clone();
    let cut = ties(&drawn);
    cut.iter().for_each(|&line| bare.lines[line].rating_mw = f64::INFINITY);
    let other = propose(&bare, &base, 2, Weight::Susceptance).expect("two areas");
    let drawn = with_areas(&bare, &other.area_of_bus, 2);
    assert!(cut.iter().all(|&line| !base::is_tie(&drawn, line)));
}

#[test]
fn proposed_areas_hang_together_and_are_alike_in_size() {
    for seed in 0..6 {
        let text = synthetic(180, 6, seed).expect("sizes");
        let grid = parse_grid(&text, "made").expect("sound");
        let base = BaseCase::of_file(&grid).expect("flow");
        for (count, weight) in [(2, Weight::Flow), (5, Weight::Flow), (6, Weight::Susceptance)] {
            let made = propose(&grid, &base, count, weight).expect("areas");
            let drawn = with_areas(&grid, &made.area_of_bus, count);
            for area in 0..count {
                let inside = |bus: usize| drawn.buses[bus].area == area;
                let pieces = crate::case::network::pieces(180, &drawn.lines, inside, |l| l.closed);
                assert_eq!(pieces.len(), 1, "area {area} of {count}, seed {seed}");
                let share = pieces[0].len() as f64 * count as f64 / 180.0;
                assert!(
                    (0.4..=1.9).contains(&share),
                    "{share} of its size, {count} areas, seed {seed}"
                );
            }
        }
    }
}

#[test]
fn a_stopped_division_keeps_what_is_finished() {
    let division = divide(&builtin_grid(), &Settings::default(), &mut |_| false).expect("a result");
    assert!(division.stopped && !division.choices.best.is_empty());
    assert_eq!(division.choices.best[0].kept.len(), 2);
    assert!(document(&division).stopped);
}

#[test]
fn page_is_whole_and_shows_caution_and_both_maps() {
    let division = divided(&builtin_grid(), &Settings::default());
    let page = page::page(&division, &document(&division));
    assert!(page.ends_with("</html>") && page.matches("<svg").count() == 2);
    for sentence in text::CAUTION {
        assert!(page.contains(sentence), "{sentence}");
    }
    assert!(!page.contains("<script") && !page.contains("http-equiv"));
}
