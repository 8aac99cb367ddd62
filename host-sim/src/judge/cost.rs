//! The stewards' objective, evaluated at the optimum and at the end of a run.
//!
//! Contract: one formula for both, so that they can be compared: units by the
//! square of what they left their base point, sheds by price and square, ties
//! that are open to help by price and square at both ends.
//! Units: pu on the grid's base in, a bare number out.

use crate::case::model::Grid;

use super::least::violation_pu;
use super::problem::{Scope, Slack, build};
use super::setting::{Setting, TIE_CURVATURE};
use super::topology::is_tie;

/// A point of the programme, or of a run, in pu.
#[derive(Clone, Debug, Default, PartialEq)]
pub(super) struct Point {
    /// Set-point per unit; none where it cannot be moved.
    pub(super) unit: Vec<Option<f64>>,
    /// Load taken off per feeder.
    pub(super) shed: Vec<f64>,
    /// Deviation per tie that is open.
    pub(super) dt: Vec<Option<f64>>,
    /// Mid-angle deviation per meshed tie that is open.
    pub(super) mid: Vec<Option<f64>>,
}

/// Least slack that keeps an interior for the solver, in pu: 1e-7 of 100 MVA is 10 W.
const INTERIOR_PU: f64 = 1e-7;

/// Solve for the optimum at the setting's rungs.
///
/// Where the limits can only be met within the stewards' proof threshold, the
/// rows are relaxed by exactly what is missing.
/// Errors: the solver's sentence.
pub(super) fn optimum(setting: &Setting) -> Result<Point, String> {
    let missing = violation_pu(setting, Scope::Whole)?;
    let tries = if missing > INTERIOR_PU {
        [missing + INTERIOR_PU, missing + 10.0 * INTERIOR_PU]
    } else {
        [0.0, 2.0 * INTERIOR_PU]
    };
    let mut last = String::new();
    for by in tries {
        let (program, unknowns) = build(setting, Scope::Whole, Slack::By(by));
        match program.solve() {
            Ok(x) => {
                let stands = &setting.end.feeder_shed_mw;
                let pick = |v: &Vec<Option<usize>>| -> Vec<Option<f64>> {
                    v.iter().map(|i| i.map(|i| x[i])).collect()
                };
                let shed = pick(&unknowns.shed);
                return Ok(Point {
                    unit: pick(&unknowns.unit),
                    shed: (0..shed.len())
                        .map(|f| shed[f].unwrap_or_else(|| setting.given_shed_pu(f, stands[f])))
                        .collect(),
                    dt: pick(&unknowns.dt),
                    mid: pick(&unknowns.mid),
                });
            }
            Err(why) => last = why,
        }
    }
    Err(last)
}

/// Cost of a point.
pub(super) fn of_point(setting: &Setting, point: &Point) -> f64 {
    let grid = setting.grid;
    let units: f64 = (0..grid.units.len())
        .filter_map(|u| {
            let off = point.unit[u]? - setting.unit_origin_pu(u);
            Some(0.5 * grid.units[u].cost_per_pu2 * off * off)
        })
        .sum();
    let sheds: f64 =
        grid.feeders.iter().zip(&point.shed).map(|(f, s)| f.price_per_pu * s + 0.5 * s * s).sum();
    let price = setting.play.steward.tie_price_per_pu;
    let square = |v: f64| 0.5 * TIE_CURVATURE * v * v;
    let ties: f64 =
        point.dt.iter().flatten().map(|dt| 2.0 * (price * dt.abs() + square(*dt))).sum();
    let mids: f64 = point.mid.iter().flatten().map(|mu| 2.0 * square(*mu)).sum();
    units + sheds + ties + mids
}

/// Cost of the final set-points of a run, at the rungs of the setting.
pub(super) fn of_recording(setting: &Setting) -> f64 {
    let (grid, end) = (setting.grid, setting.end);
    let (_, unknowns) = build(setting, Scope::Whole, Slack::By(0.0));
    let open = setting.open_ties();
    let dt = (0..grid.lines.len())
        .map(|l| open[l].then(|| setting.pu(end.line_flow_mw[l] - end.schedule_mw[l])))
        .collect();
    let point = Point {
        unit: (0..grid.units.len())
            .map(|u| unknowns.unit[u].map(|_| setting.pu(end.unit_setpoint_mw[u])))
            .collect(),
        shed: end.feeder_shed_mw.iter().map(|mw| setting.pu(*mw)).collect(),
        dt,
        mid: mid_deviations(setting, &open),
    };
    of_point(setting, &point)
}

/// Load shed per area at a point, in MW.
pub(super) fn area_sheds_mw(grid: &Grid, point: &Point) -> Vec<f64> {
    let mut out = vec![0.0; grid.areas.len()];
    for (f, shed) in grid.feeders.iter().zip(&point.shed) {
        out[grid.buses[f.bus].area] += shed * grid.base_mva;
    }
    out
}

/// Bus angles that the metered flows imply, in rad; the first bus of each tree is 0.
fn metered_angles(setting: &Setting) -> Vec<f64> {
    let grid = setting.grid;
    let mut angle: Vec<Option<f64>> = vec![None; grid.buses.len()];
    for root in 0..grid.buses.len() {
        if angle[root].is_some() {
            continue;
        }
        angle[root] = Some(0.0);
        // Each pass reaches at least one more bus, or there is none left to reach.
        for _ in 0..grid.buses.len() {
            let mut reached = false;
            for (line, l) in
                grid.lines.iter().enumerate().filter(|(i, _)| setting.end.line_closed[*i])
            {
                let drop = l.reactance_pu * setting.pu(setting.end.line_flow_mw[line]);
                match (angle[l.from], angle[l.to]) {
                    (Some(a), None) => angle[l.to] = Some(a - drop),
                    (None, Some(a)) => angle[l.from] = Some(a + drop),
                    _ => continue,
                }
                reached = true;
            }
            if !reached {
                break;
            }
        }
    }
    angle.into_iter().map(|a| a.unwrap_or(0.0)).collect()
}

/// Mid-angle deviations of the open meshed ties, with the best angle reference of each group.
fn mid_deviations(setting: &Setting, open: &[bool]) -> Vec<Option<f64>> {
    let (grid, topology) = (setting.grid, setting.topology);
    let angle = metered_angles(setting);
    let off = |l: usize| {
        0.5 * (angle[grid.lines[l].from] + angle[grid.lines[l].to]) - topology.base_mid_angle[l]
    };
    let held = |l: usize| topology.meshed[l] && topology.is_live_tie(grid, setting.end, l);
    let group = |l: usize| topology.angle_group[grid.buses[grid.lines[l].from].area];
    (0..grid.lines.len())
        .map(|line| {
            if !(is_tie(grid, line) && open[line] && held(line)) {
                return None;
            }
            let peers: Vec<usize> =
                (0..grid.lines.len()).filter(|&l| held(l) && group(l) == group(line)).collect();
            // Closed ties hold the reference; without any, it is the one of least cost.
            let closed: Vec<usize> = peers.iter().copied().filter(|&l| !open[l]).collect();
            let by = if closed.is_empty() { &peers } else { &closed };
            let weight = |l: usize| grid.lines[l].reactance_pu.powi(-2);
            let total: f64 = by.iter().map(|&l| weight(l)).sum();
            let kappa = -by.iter().map(|&l| weight(l) * off(l)).sum::<f64>() / total;
            Some((off(line) + kappa) / grid.lines[line].reactance_pu)
        })
        .collect()
}
