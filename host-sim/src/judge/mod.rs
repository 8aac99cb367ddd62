//! Holds the end of a run against an independent optimum of the whole grid.
//!
//! Contract: reads a grid, a play and a finished [`Recording`]; trusts nothing
//! that the stewards computed except what is metered at the end. All in f64,
//! solved by the interior-point library clarabel, which shares no code and no
//! method with the stewards' law.
//! Data flow: `topology` (who is alive, which pieces, which ties) -> `problem`
//! (the static programme at given rungs) -> `least` (smallest rungs that meet
//! every limit) -> `cost` -> `facts` (what must hold at rest) -> [`Judgement`].
//! Units: per unit on the grid's base inside, MW and Hz in the [`Judgement`].

mod cost;
mod facts;
mod least;
mod problem;
mod program;
mod setting;
mod topology;

#[cfg(test)]
mod tests;

use serde::Serialize;

use crate::case::model::{FeederKind, Grid, Play};
use crate::record::{Recording, Scheme};
use setting::{Setting, Sheds};
use topology::Topology;

/// Whether every limit held at the end.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum Outcome {
    /// Every settled fact holds.
    Kept,
    /// At least one does not; `broken_by` names it.
    Broken,
}

/// One thing that must hold at rest, with its worst value.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Fact {
    /// What is held against the limit.
    pub name: String,
    /// Worst value seen.
    pub worst: f64,
    /// Limit it has to meet.
    pub limit: f64,
    /// Unit of `worst` and `limit`.
    pub unit: String,
    /// Line, area or island of the worst value.
    #[serde(rename = "where")]
    pub where_: String,
    /// Whether the limit is met.
    pub met: bool,
}

/// What the judge says of a run.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Judgement {
    /// Kept or broken.
    pub outcome: Outcome,
    /// Sentences that name each broken limit, with numbers.
    pub broken_by: Vec<String>,
    /// Least rung of each area by the reference (the recorded one where `not_judged` says so).
    pub least_rung: Vec<u8>,
    /// Cost of the final set-points, in the stewards' objective.
    pub cost: f64,
    /// Cost of the optimum at the least rungs; none where there is no reference.
    pub optimum_cost: Option<f64>,
    /// Least load that has to be shed at the least rungs, in MW.
    pub least_shed_mw: f64,
    /// Load shed at the end, in MW.
    pub shed_mw: f64,
    /// Largest switched feeder among those shed, in MW: what one breaker may overshoot.
    pub breaker_slack_mw: f64,
    /// Settled facts.
    pub facts: Vec<Fact>,
    /// Sentences on what has no reference, and why.
    pub not_judged: Vec<String>,
    /// By how much some limit stays broken even at the lowest rungs allowed, in MW; none when a solution exists.
    pub beyond_mw: Option<f64>,
}

/// What the reference optimum says, where there is one.
#[derive(Clone, Debug, Default)]
struct Reference {
    least_rung: Option<Vec<u8>>,
    optimum_cost: Option<f64>,
    least_shed_mw: Vec<f64>,
    beyond_mw: Option<f64>,
}

/// Judge a run by its end.
///
/// Cost: one small programme per area and a few of the whole grid.
pub fn judge(grid: &Grid, play: &Play, recording: &Recording) -> Judgement {
    let topology = Topology::of(grid, recording);
    let mut not_judged = topology.remarks(grid, recording);
    if recording.stopped {
        not_judged.push(format!(
            "The run was stopped at {:.1} s: its end need not be at rest.",
            recording.duration_s
        ));
    }
    let final_rungs = final_rungs(grid, recording);
    let reference = if recording.scheme == Scheme::Steward {
        refer(grid, play, recording, &topology, &mut not_judged)
    } else {
        not_judged.push("Rungs, cost and proofs exist only with stewards.".to_owned());
        Reference::default()
    };
    let setting = Setting {
        grid,
        play,
        end: &recording.end,
        topology: &topology,
        rungs: &final_rungs,
        sheds: Sheds::AsTheyStand,
    };
    let cost = cost::of_recording(&setting);
    let found = facts::gather(&setting, recording, &reference, cost);
    let broken_by: Vec<String> = found.broken_by;
    Judgement {
        outcome: if broken_by.is_empty() { Outcome::Kept } else { Outcome::Broken },
        broken_by,
        least_rung: reference.least_rung.unwrap_or(final_rungs),
        cost,
        optimum_cost: reference.optimum_cost,
        least_shed_mw: reference.least_shed_mw.iter().sum(),
        shed_mw: recording.end.feeder_shed_mw.iter().sum(),
        breaker_slack_mw: breaker_slack_mw(grid, recording, None),
        facts: found.facts,
        not_judged,
        beyond_mw: reference.beyond_mw,
    }
}

/// Final rungs, 0 for every area of a baseline.
fn final_rungs(grid: &Grid, recording: &Recording) -> Vec<u8> {
    (0..grid.areas.len())
        .map(|a| match recording.scheme {
            Scheme::Steward => recording.end.rung.get(a).copied().unwrap_or(0),
            Scheme::Droop | Scheme::AreaControlError => 0,
        })
        .collect()
}

/// Largest switched feeder among those shed, in one area or in all, in MW.
fn breaker_slack_mw(grid: &Grid, recording: &Recording, area: Option<usize>) -> f64 {
    grid.feeders
        .iter()
        .zip(&recording.end.feeder_shed_mw)
        .filter(|(f, _)| f.kind == FeederKind::Switched)
        .filter(|(f, _)| area.is_none_or(|a| grid.buses[f.bus].area == a))
        .map(|(_, shed_mw)| *shed_mw)
        .fold(0.0, f64::max)
}

/// Find the least rungs and the optimum there; what fails is said, not raised.
fn refer(
    grid: &Grid,
    play: &Play,
    recording: &Recording,
    topology: &Topology,
    not_judged: &mut Vec<String>,
) -> Reference {
    let recorded = final_rungs(grid, recording);
    let setting =
        Setting { grid, play, end: &recording.end, topology, rungs: &recorded, sheds: Sheds::Free };
    let least_rung = match least::least_rungs(&setting) {
        Ok(least::Least::Rungs(rungs)) => rungs,
        Ok(least::Least::Beyond { short_mw, areas }) => {
            let who = areas.join(", ");
            not_judged.push(if short_mw.is_finite() {
                format!("No reference: even at the lowest rungs allowed to {who} some limit stays broken by {short_mw:.2} MW.")
            } else {
                format!("No reference: even at the lowest rungs allowed to {who} ranges and tie bands leave no point at all.")
            });
            return Reference { beyond_mw: Some(short_mw), ..Reference::default() };
        }
        Err(why) => {
            not_judged.push(format!("No reference: {why}."));
            return Reference::default();
        }
    };
    let mut reference = Reference { least_rung: Some(least_rung.clone()), ..Reference::default() };
    match cost::optimum(&Setting { rungs: &least_rung, ..setting }) {
        Ok(point) => reference.least_shed_mw = cost::area_sheds_mw(grid, &point),
        Err(why) => not_judged.push(format!("No reference for the load shed: {why}.")),
    }
    if topology.any_without_reference() {
        return reference;
    }
    // A breaker takes a whole feeder: the cost is held against the best that is
    // possible with the breakers where they stand; the shedding is judged apart.
    let standing = Setting { rungs: &least_rung, sheds: Sheds::SwitchedAsTheyStand, ..setting };
    match cost::optimum(&standing) {
        Ok(point) => reference.optimum_cost = Some(cost::of_point(&standing, &point)),
        Err(why) => not_judged.push(format!("No reference for the cost: {why}.")),
    }
    reference
}
