//! The least rungs at which every limit can be met.
//!
//! Contract: an area is short when it cannot meet its limits at `keep` alone,
//! with every tie at schedule. Short areas go down together until the whole
//! grid is feasible, then each climbs as far as it can; the others stay at `keep`.
//! Feasible means that the smallest possible worst violation is below half of
//! what a steward must prove before it gives ground.

use super::problem::{Scope, Slack, build};
use super::setting::Setting;

/// What was found.
#[derive(Clone, Debug, PartialEq)]
pub(super) enum Least {
    /// Least rung per area.
    Rungs(Vec<u8>),
    /// Not even the lowest allowed rungs meet every limit.
    Beyond {
        /// Violation that remains, in MW.
        short_mw: f64,
        /// Names of the areas that were let down.
        areas: Vec<String>,
    },
}

/// Smallest worst violation in pu; infinite when what can not give (ranges, bands,
/// schedules) leaves no point at all.
///
/// Errors: the solver's sentence.
pub(super) fn violation_pu(setting: &Setting, scope: Scope) -> Result<f64, String> {
    let (program, unknowns) = build(setting, scope, Slack::Elastic);
    let Some(x) = program.solve_if_feasible()? else { return Ok(f64::INFINITY) };
    Ok(unknowns.violation.map_or(0.0, |z| x[z].max(0.0)))
}

fn limit_pu(setting: &Setting) -> f64 {
    setting.pu(setting.play.steward.proof_threshold_mw) / 2.0
}

fn feasible(setting: &Setting, rungs: &[u8]) -> Result<bool, String> {
    Ok(violation_pu(&Setting { rungs, ..*setting }, Scope::Whole)? < limit_pu(setting))
}

/// Areas that cannot meet their limits at `keep` alone.
pub(super) fn short_areas(setting: &Setting) -> Result<Vec<usize>, String> {
    let keep = vec![0; setting.grid.areas.len()];
    let at_keep = Setting { rungs: &keep, ..*setting };
    let mut short = Vec::new();
    for area in 0..setting.grid.areas.len() {
        if !setting.topology.without_reference(area)
            && violation_pu(&at_keep, Scope::Area(area))? >= limit_pu(setting)
        {
            short.push(area);
        }
    }
    Ok(short)
}

/// Find the least rungs; areas without a reference keep the recorded one.
///
/// Errors: the solver's sentence.
pub(super) fn least_rungs(setting: &Setting) -> Result<Least, String> {
    let short = short_areas(setting)?;
    let lowest = |area: usize| setting.grid.areas[area].lowest_rung.min(3);
    let mut rungs: Vec<u8> = (0..setting.grid.areas.len())
        .map(|a| if setting.topology.without_reference(a) { setting.rungs[a] } else { 0 })
        .collect();
    let mut found = false;
    for rung in u8::from(!short.is_empty())..=3 {
        short.iter().for_each(|&a| rungs[a] = rung.min(lowest(a)));
        found = feasible(setting, &rungs)?;
        if found || short.is_empty() {
            break;
        }
    }
    if !found {
        let short_pu = violation_pu(&Setting { rungs: &rungs, ..*setting }, Scope::Whole)?;
        let all = (0..rungs.len()).collect();
        let named = if short.is_empty() { &all } else { &short };
        return Ok(Least::Beyond {
            short_mw: short_pu * setting.grid.base_mva,
            areas: named.iter().map(|&a| setting.grid.areas[a].name.clone()).collect(),
        });
    }
    for &area in &short {
        while rungs[area] > 0 {
            rungs[area] -= 1;
            if !feasible(setting, &rungs)? {
                rungs[area] += 1;
                break;
            }
        }
    }
    Ok(Least::Rungs(rungs))
}
