//! Reading and checking: what is right passes, what is wrong is found at its place.

mod grids;
mod limits;
mod plays;
mod robust;

use super::{Problems, parse_grid};

/// A small grid that passes: two areas, two ties, one unit of most kinds.
const SMALL: &str = include_str!("small.grid.toml");

/// The small grid with a piece of its text replaced.
fn changed(from: &str, to: &str) -> String {
    assert!(SMALL.contains(from), "the small grid holds {from:?}");
    SMALL.replacen(from, to, 1)
}

/// Whether a problem with this title stands on a line with this text.
fn has(problems: &Problems, text: &str, on_line: &str, title: &str) -> bool {
    problems.list().iter().any(|problem| {
        let line = text.lines().nth(problems.line_of(problem) - 1);
        problem.title.contains(title) && line.is_some_and(|line| line.contains(on_line))
    })
}

/// Assert that a changed small grid has exactly one problem, with this title on this line.
#[track_caller]
fn one_problem(from: &str, to: &str, on_line: &str, title: &str) {
    let text = changed(from, to);
    let problems = parse_grid(&text, "small.grid.toml").expect_err("the change is wrong");
    assert_eq!(problems.list().len(), 1, "exactly one problem:\n{problems}");
    assert!(has(&problems, &text, on_line, title), "{title:?} on {on_line:?}:\n{problems}");
}

/// Assert that a changed small grid has a problem with this title on this line, among others.
#[track_caller]
fn a_problem(from: &str, to: &str, on_line: &str, title: &str) {
    let text = changed(from, to);
    let problems = parse_grid(&text, "small.grid.toml").expect_err("the change is wrong");
    assert!(has(&problems, &text, on_line, title), "{title:?} on {on_line:?}:\n{problems}");
}
