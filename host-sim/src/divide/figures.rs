//! The division as one document: what JSON, the page and the terminal show.
//!
//! Contract: names instead of indices, units in the names; numbers that are not
//! finite become `null`. The same grid and settings give the same document.

use serde::Serialize;

use super::outages::{Effect, OutageRow};
use super::price::{ClosedTie, OpenedTie, SideOfTie};
use super::propose::{METHOD, Weight};
use super::{Certainty, Choice, Division, FULL};
use crate::case::fits_largest_steward;
use crate::grid::graph::TreeCount;

/// Version of the layout.
pub const SCHEMA: u32 = 1;

/// Everything that is said of a division.
#[derive(Clone, Debug, Serialize)]
pub struct Document {
    /// Version of the layout.
    pub schema: u32,
    /// Name of the grid.
    pub grid: String,
    /// `kept`, or `broken` where a line is above its rating after switching.
    pub outcome: &'static str,
    /// Whether it was stopped before its end.
    pub stopped: bool,
    /// How the areas were proposed; none = the file's.
    pub proposed_by: Option<String>,
    /// Power base in MVA.
    pub base_mva: f64,
    /// The areas.
    pub areas: Vec<AreaFigures>,
    /// Ties in service before.
    pub ties: Vec<String>,
    /// Number of trees of ties; null where it is too large to count exactly.
    pub trees: Option<f64>,
    /// Natural logarithm of that number.
    pub trees_log: f64,
    /// What is claimed of the first choice, in a sentence.
    pub certainty: String,
    /// `enumerated`, `proven`, `bounded` or `best-found`.
    pub certainty_word: &'static str,
    /// No choice has a worst loading below this.
    pub bound: f64,
    /// Worst loading that the quick search alone found.
    pub quick_loading: f64,
    /// Trees with every line within its rating; null where not all were evaluated.
    pub trees_within_ratings: Option<u64>,
    /// Worst loading before switching.
    pub worst_loading_before: f64,
    /// The line that has it.
    pub worst_line_before: Option<String>,
    /// Choices, best first; the first one is taken.
    pub choices: Vec<ChoiceFigures>,
    /// Opened ties.
    pub opened: Vec<OpenedFigures>,
    /// Closed ties.
    pub closed: Vec<ClosedFigures>,
    /// Lines whose outage did not split the network before and does now.
    pub lost_to_n1: Vec<String>,
    /// Bridges before.
    pub bridges_before: usize,
    /// Bridges after.
    pub bridges_after: usize,
    /// Pockets that reach over an area's border (0 by construction).
    pub leaks: usize,
    /// Pockets of the divided grid.
    pub pockets: Vec<PocketFigures>,
    /// Outages in the table after which a line is above its rating, before the division.
    pub overloading_before: usize,
    /// The same after it, the rest of the grid apart.
    pub overloading_after: usize,
    /// Outages, largest effect outside before the division first.
    pub outages: Vec<OutageFigures>,
    /// Internal lines left out of the table.
    pub outages_left_out: usize,
    /// Outages of the divided grid solved again from scratch.
    pub outages_solved_again: usize,
    /// Largest flow change outside that those show, in MW.
    pub outside_again_mw: f64,
    /// Areas too large for the largest steward, one sentence each.
    pub too_large: Vec<String>,
    /// What this does not study.
    pub caution: Vec<&'static str>,
}

/// An area.
#[derive(Clone, Debug, Serialize)]
pub struct AreaFigures {
    /// Name.
    pub name: String,
    /// Buses.
    pub buses: usize,
    /// Load in MW.
    pub load_mw: f64,
    /// Generation less load in MW.
    pub surplus_mw: f64,
    /// Ties closed before.
    pub ties_before: usize,
    /// Ties closed after.
    pub ties_after: usize,
}

/// A pocket: joined to the rest by bridges only.
#[derive(Clone, Debug, Serialize)]
pub struct PocketFigures {
    /// Its area.
    pub area: String,
    /// Lines in it.
    pub lines: usize,
    /// Buses in it.
    pub buses: usize,
}

/// A choice of ties.
#[derive(Clone, Debug, Serialize)]
pub struct ChoiceFigures {
    /// Ties left open.
    pub opened: Vec<String>,
    /// Ties kept closed.
    pub kept: Vec<String>,
    /// Worst loading after switching.
    pub worst_loading: f64,
    /// The line that has it.
    pub worst_line: Option<String>,
}

/// An opened tie.
#[derive(Clone, Debug, Serialize)]
pub struct OpenedFigures {
    /// Name.
    pub line: String,
    /// Flow before in MW.
    pub flow_before_mw: f64,
    /// Angle between its ends before, in degrees.
    pub angle_before_deg: f64,
    /// Angle standing across it, in degrees.
    pub angle_after_deg: f64,
}

/// A closed tie and what its trip would split.
#[derive(Clone, Debug, Serialize)]
pub struct ClosedFigures {
    /// Name.
    pub line: String,
    /// Flow before in MW.
    pub flow_before_mw: f64,
    /// Flow after in MW.
    pub flow_after_mw: f64,
    /// Loading after.
    pub loading: f64,
    /// MW that each side would be out of balance by.
    pub imbalance_mw: f64,
    /// The two sides.
    pub sides: Vec<SideFigures>,
}

/// One side of a closed tie.
#[derive(Clone, Debug, Serialize)]
pub struct SideFigures {
    /// Its areas.
    pub areas: Vec<String>,
    /// Load in MW.
    pub load_mw: f64,
    /// Generation less load in MW.
    pub surplus_mw: f64,
    /// Stored kinetic energy in MW s.
    pub inertia_mws: f64,
    /// Reserve kept free above in MW.
    pub reserve_up_mw: f64,
    /// Room upward in the normal ranges in MW.
    pub room_up_mw: f64,
    /// Room downward in MW.
    pub room_down_mw: f64,
    /// Largest unit in service.
    pub largest_unit: Option<String>,
    /// Its base point in MW.
    pub largest_unit_mw: Option<f64>,
    /// Whether the room covers the surplus or deficit.
    pub can_balance: bool,
}

/// What an outage does to one network; null = it splits it.
#[derive(Clone, Debug, Serialize)]
pub struct EffectFigures {
    /// Largest flow change outside the area in MW.
    pub outside_mw: f64,
    /// The line that has it.
    pub outside_line: Option<String>,
    /// Worst loading within reach.
    pub worst_loading: f64,
    /// The line that has it.
    pub worst_line: Option<String>,
}

/// One outage before and after.
#[derive(Clone, Debug, Serialize)]
pub struct OutageFigures {
    /// Line that goes out.
    pub line: String,
    /// Its area.
    pub area: String,
    /// Pocket that it stays in after the division, counted from 1; null for a bridge.
    pub pocket: Option<usize>,
    /// Its flow before, in MW.
    pub flow_before_mw: f64,
    /// Its flow after, in MW.
    pub flow_after_mw: f64,
    /// Effect before the division.
    pub before: Option<EffectFigures>,
    /// Effect after.
    pub after: Option<EffectFigures>,
}

/// Gather the document.
pub fn document(division: &Division) -> Document {
    let grid = &division.grid;
    let choices = &division.choices;
    let (worst_loading_before, worst_line) = division.before.worst(grid);
    let (trees, trees_log) = match choices.trees {
        TreeCount::Exact(count) => (Some(count as f64), (count as f64).ln()),
        TreeCount::Logarithm(log) => (None, log),
    };
    let (certainty_word, certainty) = certainty(division);
    let names = |lines: &[usize]| lines.iter().map(|&line| grid.lines[line].name.clone()).collect();
    Document {
        schema: SCHEMA,
        grid: grid.name.clone(),
        outcome: outcome(division),
        stopped: division.stopped,
        proposed_by: division.proposal.as_ref().map(|proposal| {
            let weight = match proposal.weight {
                Weight::Flow => "base flow",
                Weight::Susceptance => "susceptance",
            };
            let tried =
                if division.both_tried { " (the better of flow and susceptance)" } else { "" };
            format!("{METHOD}; lines weighted by {weight}{tried}")
        }),
        base_mva: grid.base_mva,
        areas: (0..grid.areas.len()).map(|area| area_figures(division, area)).collect(),
        ties: names(&choices.ties),
        trees,
        trees_log,
        certainty,
        certainty_word,
        bound: choices.bound,
        quick_loading: choices.quick_loading,
        trees_within_ratings: choices.within_ratings,
        worst_loading_before,
        worst_line_before: worst_line.map(|line| grid.lines[line].name.clone()),
        choices: choices.best.iter().map(|choice| choice_figures(division, choice)).collect(),
        opened: division.price.opened.iter().map(|tie| opened_figures(division, tie)).collect(),
        closed: division.price.closed.iter().map(|tie| closed_figures(division, tie)).collect(),
        lost_to_n1: names(&division.price.lost_to_n1),
        bridges_before: division.outages.bridges_before.len(),
        bridges_after: division.outages.bridges_after.len(),
        leaks: division.outages.leaks,
        pockets: pocket_figures(division),
        overloading_before: overloading(division, |row| row.before.as_ref()),
        overloading_after: overloading(division, |row| row.after.as_ref()),
        outages: division.outages.rows.iter().map(|row| outage_figures(division, row)).collect(),
        outages_left_out: division.outages.left_out,
        outages_solved_again: division.outages.solved_again,
        outside_again_mw: division.outages.outside_again_mw,
        too_large: fits_largest_steward(grid).err().unwrap_or_default(),
        caution: super::text::CAUTION.to_vec(),
    }
}

fn pocket_figures(division: &Division) -> Vec<PocketFigures> {
    let pockets = division.outages.pockets.iter();
    pockets
        .map(|pocket| PocketFigures {
            area: division.grid.areas[pocket.area].name.clone(),
            lines: pocket.lines,
            buses: pocket.buses,
        })
        .collect()
}

/// Outages after which a line in reach is above its rating.
fn overloading(division: &Division, pick: fn(&OutageRow) -> Option<&Effect>) -> usize {
    let rows = division.outages.rows.iter();
    rows.filter(|row| pick(row).is_some_and(|effect| effect.worst_loading > FULL)).count()
}

/// `kept` where no line is above its rating after switching.
pub fn outcome(division: &Division) -> &'static str {
    match division.choices.best.first() {
        Some(choice) if choice.worst_loading <= FULL => "kept",
        _ => "broken",
    }
}

fn certainty(division: &Division) -> (&'static str, String) {
    let choices = &division.choices;
    let best = choices.best.first().map_or(0.0, |choice| choice.worst_loading);
    match choices.certainty {
        Certainty::Enumerated => (
            "enumerated",
            format!("optimum: all {} trees of ties were evaluated", choices.evaluated),
        ),
        Certainty::Proven => (
            "proven",
            "optimum: proven by branch and bound, no other tree of ties has a lower worst loading"
                .to_owned(),
        ),
        Certainty::Bounded => (
            "bounded",
            format!(
                "best found: at most {:.1} % above the optimum, since no tree of ties can have a worst loading below {:.1} %",
                100.0 * (best / choices.bound - 1.0),
                100.0 * choices.bound
            ),
        ),
        Certainty::BestFound => {
            ("best-found", "best found: how far it is from the optimum is not known".to_owned())
        }
    }
}

fn area_figures(division: &Division, area: usize) -> AreaFigures {
    let grid = &division.grid;
    let here = |bus: &usize| grid.buses[*bus].area == area;
    let ties = |closed: &[bool]| {
        let all = division.choices.ties.iter().filter(|&&line| closed[line]);
        all.filter(|&&line| here(&grid.lines[line].from) || here(&grid.lines[line].to)).count()
    };
    let buses: Vec<usize> = (0..grid.buses.len()).filter(here).collect();
    AreaFigures {
        name: grid.areas[area].name.clone(),
        buses: buses.len(),
        load_mw: buses.iter().fold(0.0, |sum, &bus| sum + grid.buses[bus].load_mw),
        surplus_mw: buses.iter().fold(0.0, |sum, &bus| sum + division.before.injection_mw[bus]),
        ties_before: ties(&division.before.closed),
        ties_after: ties(&division.after.closed),
    }
}

fn name(division: &Division, line: Option<usize>) -> Option<String> {
    line.map(|line| division.grid.lines[line].name.clone())
}

fn choice_figures(division: &Division, choice: &Choice) -> ChoiceFigures {
    let names =
        |lines: &[usize]| lines.iter().filter_map(|&line| name(division, Some(line))).collect();
    ChoiceFigures {
        opened: names(&choice.opened),
        kept: names(&choice.kept),
        worst_loading: choice.worst_loading,
        worst_line: name(division, choice.worst_line),
    }
}

fn opened_figures(division: &Division, tie: &OpenedTie) -> OpenedFigures {
    OpenedFigures {
        line: division.grid.lines[tie.line].name.clone(),
        flow_before_mw: tie.flow_before_mw,
        angle_before_deg: tie.angle_before_deg,
        angle_after_deg: tie.angle_after_deg,
    }
}

fn closed_figures(division: &Division, tie: &ClosedTie) -> ClosedFigures {
    ClosedFigures {
        line: division.grid.lines[tie.line].name.clone(),
        flow_before_mw: tie.flow_before_mw,
        flow_after_mw: tie.flow_after_mw,
        loading: tie.loading,
        imbalance_mw: tie.flow_after_mw.abs(),
        sides: tie.sides.iter().map(|side| side_figures(division, side)).collect(),
    }
}

fn side_figures(division: &Division, side: &SideOfTie) -> SideFigures {
    let grid = &division.grid;
    SideFigures {
        areas: side.areas.iter().map(|&area| grid.areas[area].name.clone()).collect(),
        load_mw: side.load_mw,
        surplus_mw: side.surplus_mw,
        inertia_mws: side.inertia_mws,
        reserve_up_mw: side.reserve_up_mw,
        room_up_mw: side.room_up_mw,
        room_down_mw: side.room_down_mw,
        largest_unit: side.largest_unit.map(|unit| grid.units[unit].name.clone()),
        largest_unit_mw: side.largest_unit.map(|unit| grid.units[unit].base_mw),
        can_balance: side.can_balance(),
    }
}

fn outage_figures(division: &Division, row: &OutageRow) -> OutageFigures {
    let effect = |effect: &Effect| EffectFigures {
        outside_mw: effect.outside_mw,
        outside_line: name(division, effect.outside_line),
        worst_loading: effect.worst_loading,
        worst_line: name(division, effect.worst_line),
    };
    OutageFigures {
        line: division.grid.lines[row.line].name.clone(),
        area: division.grid.areas[row.area].name.clone(),
        pocket: division.outages.pocket_of_line[row.line].map(|pocket| pocket + 1),
        flow_before_mw: division.before.flow_mw[row.line],
        flow_after_mw: division.after.flow_mw[row.line],
        before: row.before.as_ref().map(effect),
        after: row.after.as_ref().map(effect),
    }
}
