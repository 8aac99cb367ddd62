//! Areas, the ties to leave open so that they form a tree, and what that costs.
//!
//! Contract: the closed ties of every choice join all areas without a ring; the
//! dispatch stays; figures are those of the lossless DC model. What is claimed of
//! the choice (optimum, bound, best found) is said in [`Certainty`]. Budgets are
//! counted, never timed: the same grid gives the same division everywhere.
//!
//! Data flow: `Grid` -> `propose` (areas, if asked for) -> `problem` (quick
//! evaluation) -> `trees`, `local`, `relax`, `branch` (choice) -> `outages`,
//! `price` (what it does and costs) -> `figures` -> `file`, `page`, `text`.

pub mod base;
pub mod branch;
pub mod figures;
pub mod file;
pub mod local;
pub mod outages;
pub mod page;
pub mod price;
pub mod problem;
pub mod propose;
pub mod relax;
pub mod text;
pub mod trees;

#[cfg(test)]
mod tests;

use thiserror::Error;

use crate::case::model::Grid;
use crate::grid::dc::DcError;
use crate::grid::graph::{TreeCount, spanning_tree_count};

use base::{BaseCase, with_areas};
use local::Found;
use outages::Outages;
use price::Price;
use problem::TieProblem;
use propose::{Proposal, Weight};

/// What to divide, and how much work to put in.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Settings {
    /// Number of areas to propose; none = the file's areas.
    pub areas: Option<usize>,
    /// What makes a line worth keeping inside a proposed area; none = try both
    /// and take the areas whose best choice of ties loads the lines less.
    pub weight: Option<Weight>,
    /// Up to this many trees of ties, each is evaluated.
    pub trees_max: u128,
    /// Steps (a line times a tie) that the proof by splitting may take.
    pub work_max: u64,
    /// Outages that are looked at, those of the largest base flow first.
    pub outages_max: usize,
}

impl Default for Settings {
    /// Enumeration within about a second, splitting within a few, on 2000 buses.
    fn default() -> Self {
        Self {
            areas: None,
            weight: None,
            trees_max: 100_000,
            work_max: 1_500_000_000,
            outages_max: 4_000,
        }
    }
}

/// Choices that are listed at most.
pub const LISTED_CHOICES: usize = 20;

/// Guesses at a higher bound when splitting has not ended.
const GUESSES: u64 = 5;

/// A line counts as above its rating from here on.
pub const FULL: f64 = 1.001;

/// Why a grid could not be divided.
#[derive(Clone, Debug, Error, PartialEq)]
pub enum DivideError {
    /// There is nothing to divide.
    #[error("the grid has one area; ask for a proposal with `--areas 2` or more")]
    OneArea,
    /// The number of areas asked for makes no sense here.
    #[error("cannot make {wanted} areas of {buses} buses: from 2 up to a third of the buses")]
    Count {
        /// Areas asked for.
        wanted: usize,
        /// Buses of the grid that can be told apart.
        buses: usize,
    },
    /// The network equations have no solution.
    #[error(transparent)]
    Flow(#[from] DcError),
}

/// What is known about the choice that was made.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Certainty {
    /// Every tree of ties was evaluated.
    Enumerated,
    /// Splitting ended: no tree is better.
    Proven,
    /// The best found; no tree is better than the bound, which is above 0.
    Bounded,
    /// The best found, without a bound.
    BestFound,
}

/// One choice of ties to leave open.
#[derive(Clone, Debug, PartialEq)]
pub struct Choice {
    /// Lines left open, as indices of the grid.
    pub opened: Vec<usize>,
    /// Ties kept closed, as indices of the grid.
    pub kept: Vec<usize>,
    /// Worst loading of any line after switching.
    pub worst_loading: f64,
    /// The line that has it.
    pub worst_line: Option<usize>,
}

/// The choices and what is known of them.
#[derive(Clone, Debug, PartialEq)]
pub struct Choices {
    /// Ties in service before.
    pub ties: Vec<usize>,
    /// Number of trees of ties.
    pub trees: TreeCount,
    /// Trees evaluated for the list.
    pub evaluated: u64,
    /// Trees without a line above its rating, where all were evaluated.
    pub within_ratings: Option<u64>,
    /// The best ones, best first; the first one is taken.
    pub best: Vec<Choice>,
    /// What is claimed of the first one.
    pub certainty: Certainty,
    /// No choice has a worst loading below this.
    pub bound: f64,
    /// Worst loading that the quick search alone found.
    pub quick_loading: f64,
}

/// A divided grid with everything that is said about it.
#[derive(Clone, Debug)]
pub struct Division {
    /// The grid with its areas as divided (lines as in the file).
    pub grid: Grid,
    /// How the areas were proposed; none = the file's.
    pub proposal: Option<Proposal>,
    /// Whether the proposal is the better one of both weights.
    pub both_tried: bool,
    /// Flows before.
    pub before: BaseCase,
    /// Flows after.
    pub after: BaseCase,
    /// Ties to leave open.
    pub choices: Choices,
    /// Outages before and after.
    pub outages: Outages,
    /// What the division costs.
    pub price: Price,
    /// Whether the caller stopped it before its end.
    pub stopped: bool,
}

/// Divide a grid.
///
/// `go_on` is told what share is done and returns false to stop; what is finished is kept.
///
/// Errors: nothing to divide, an impossible number of areas, no flow solution.
pub fn divide(
    grid: &Grid,
    settings: &Settings,
    go_on: &mut dyn FnMut(f64) -> bool,
) -> Result<Division, DivideError> {
    let before = BaseCase::of_file(grid)?;
    let mut stopped = false;
    let mut watch = |share: f64| {
        stopped |= !go_on(share);
        !stopped
    };
    let (grid, proposal, choices) = match settings.areas {
        Some(count) => proposed(grid, &before, count, settings, &mut watch)?,
        None if grid.areas.len() < 2 => return Err(DivideError::OneArea),
        None => {
            let choices = choose(grid, &before, settings, &mut |share| watch(0.5 * share))?;
            (grid.clone(), None, choices)
        }
    };
    let mut closed = before.closed.clone();
    for &line in choices.best.first().map_or(&[][..], |choice| &choice.opened) {
        closed[line] = false;
    }
    let after = BaseCase::new(&grid, closed)?;
    let outages = outages::compare(&grid, &before, &after, settings.outages_max, &mut |share| {
        watch(0.5 + 0.5 * share)
    })?;
    let price = price::price(&grid, &before, &after);
    Ok(Division {
        both_tried: settings.weight.is_none(),
        grid,
        proposal,
        before,
        after,
        choices,
        outages,
        price,
        stopped,
    })
}

/// Propose areas and choose their ties; of two proposals the one that loads the lines less.
fn proposed(
    grid: &Grid,
    before: &BaseCase,
    count: usize,
    settings: &Settings,
    watch: &mut dyn FnMut(f64) -> bool,
) -> Result<(Grid, Option<Proposal>, Choices), DivideError> {
    let weights = match settings.weight {
        Some(weight) => vec![weight],
        None => vec![Weight::Flow, Weight::Susceptance],
    };
    let part = 0.5 / weights.len() as f64;
    let mut best: Option<(Grid, Option<Proposal>, Choices)> = None;
    for (tried, &weight) in weights.iter().enumerate() {
        let proposal = propose::propose(grid, before, count, weight)?;
        let drawn = with_areas(grid, &proposal.area_of_bus, proposal.area_count);
        let choices =
            choose(&drawn, before, settings, &mut |share| watch(part * (tried as f64 + share)))?;
        let loading =
            |choices: &Choices| choices.best.first().map_or(f64::INFINITY, |c| c.worst_loading);
        if best.as_ref().is_none_or(|known| loading(&choices) < loading(&known.2)) {
            best = Some((drawn, Some(proposal), choices));
        }
    }
    best.ok_or(DivideError::OneArea)
}

/// Choose the ties to leave open in a grid with areas.
///
/// Errors: a network without solution.
pub fn choose(
    grid: &Grid,
    before: &BaseCase,
    settings: &Settings,
    go_on: &mut dyn FnMut(f64) -> bool,
) -> Result<Choices, DivideError> {
    let problem = TieProblem::new(grid, before)?;
    let ends = problem.tie_areas();
    let trees = spanning_tree_count(grid.areas.len(), &ends, &vec![true; ends.len()]);
    let base_mw: Vec<f64> = problem.ties.iter().map(|tie| before.flow_mw[tie.line]).collect();
    let relaxed = relax::relax(&problem);
    let quick = local::search(&problem, &base_mw, &relaxed.flow_mw);
    let quick_loading = quick.first().map_or(0.0, |found| found.worst.loading);
    let mut choices = Choices {
        ties: problem.ties.iter().map(|tie| tie.line).collect(),
        trees,
        evaluated: 0,
        within_ratings: None,
        best: Vec::new(),
        certainty: match relaxed.bound > 0.0 {
            true => Certainty::Bounded,
            false => Certainty::BestFound,
        },
        bound: relaxed.bound,
        quick_loading,
    };
    let found = match trees {
        TreeCount::Exact(count) if count <= settings.trees_max => {
            enumerate(&problem, count, &mut choices, go_on).unwrap_or(quick)
        }
        TreeCount::Exact(_) | TreeCount::Logarithm(_) => {
            split(&problem, quick, &base_mw, settings, &mut choices, go_on)
        }
    };
    choices.best =
        found.iter().take(LISTED_CHOICES).map(|found| as_choice(&problem, found)).collect();
    Ok(choices)
}

/// Evaluate every tree; none if the caller stopped it.
fn enumerate(
    problem: &TieProblem,
    count: u128,
    choices: &mut Choices,
    go_on: &mut dyn FnMut(f64) -> bool,
) -> Option<Vec<Found>> {
    let mut best: Vec<Found> = Vec::new();
    let (mut evaluated, mut within) = (0_u64, 0);
    let ended = trees::each_tree(problem.surplus_mw.len(), &problem.tie_areas(), &mut |tree| {
        let worst = problem.worst(tree);
        evaluated += 1;
        within += u64::from(worst.loading <= FULL);
        // Trees come in a fixed order, so that the first of equals stays first.
        let place = best.partition_point(|known| known.worst.loading <= worst.loading);
        if place < LISTED_CHOICES {
            best.insert(place, Found { tree: tree.to_vec(), worst });
            best.truncate(LISTED_CHOICES);
        }
        go_on(evaluated as f64 / count as f64)
    });
    choices.evaluated = evaluated;
    if !ended && evaluated as u128 != count {
        return None;
    }
    choices.within_ratings = Some(within);
    choices.certainty = Certainty::Enumerated;
    choices.bound = best.first().map_or(0.0, |found| found.worst.loading);
    Some(best)
}

/// Prove or improve the quick search's best by splitting.
fn split(
    problem: &TieProblem,
    mut found: Vec<Found>,
    base_mw: &[f64],
    settings: &Settings,
    choices: &mut Choices,
    go_on: &mut dyn FnMut(f64) -> bool,
) -> Vec<Found> {
    let Some(start) = found.first().cloned() else {
        return found;
    };
    let outcome = branch::search(problem, start, base_mw, choices.bound, settings.work_max, go_on);
    let outcome = match outcome.finished {
        true => outcome,
        false => raise_bound(problem, outcome.best, base_mw, settings, choices, go_on),
    };
    let best = outcome.best.worst.loading;
    choices.certainty = match (outcome.finished, choices.bound > 0.0) {
        (true, _) => Certainty::Proven,
        (false, true) => Certainty::Bounded,
        (false, false) => Certainty::BestFound,
    };
    if outcome.finished {
        choices.bound = best;
    }
    found.retain(|known| known.tree != outcome.best.tree);
    found.insert(0, outcome.best);
    choices.evaluated = found.len() as u64;
    found
}

/// Raise the bound: a search for anything below a guess that ends without a find proves the guess.
///
/// Cost: as much again as the search itself, at most.
fn raise_bound(
    problem: &TieProblem,
    mut best: Found,
    base_mw: &[f64],
    settings: &Settings,
    choices: &mut Choices,
    go_on: &mut dyn FnMut(f64) -> bool,
) -> branch::Outcome {
    let work_max = settings.work_max / GUESSES;
    let (mut low, mut high) = (choices.bound, best.worst.loading);
    for _ in 0..GUESSES {
        let guess = if low > 0.0 { (low * high).sqrt() } else { 0.5 * high };
        let mut start = best.clone();
        start.worst.loading = guess;
        let outcome = branch::search(problem, start, base_mw, low, work_max, go_on);
        if outcome.best.worst.loading < guess {
            best = outcome.best;
            (low, high) = if outcome.finished {
                (best.worst.loading, low)
            } else {
                (low, best.worst.loading)
            };
        } else if outcome.finished {
            low = guess;
        } else {
            high = guess;
        }
        if low >= high {
            break;
        }
    }
    choices.bound = low;
    let finished = low >= best.worst.loading;
    branch::Outcome { best, finished }
}

fn as_choice(problem: &TieProblem, found: &Found) -> Choice {
    let line = |tie: usize| problem.ties[tie].line;
    Choice {
        opened: (0..problem.ties.len())
            .filter(|tie| found.tree.binary_search(tie).is_err())
            .map(line)
            .collect(),
        kept: found.tree.iter().map(|&tie| line(tie)).collect(),
        worst_loading: found.worst.loading,
        worst_line: found.worst.line,
    }
}
