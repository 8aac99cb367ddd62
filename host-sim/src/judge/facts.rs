//! What must hold at rest, each with its worst value, its limit and its place.
//!
//! Contract: an outcome is `kept` exactly when every fact is met. Facts without
//! a reference (a cut area, a dead steward, a baseline's rungs) are left out,
//! and the judgement's `not_judged` says so.

use crate::case::model::FeederKind;
use crate::record::rung_word;
use crate::record::{Recording, Scheme};

use super::setting::Setting;
use super::topology::BusRole;
use super::{Fact, Reference, breaker_slack_mw};

/// Rest means less than this off nominal: 1 mHz is 1 MW or less in a grid of 1 GW/Hz.
const REST_HZ: f64 = 1e-3;

/// A tie is on schedule within this: well above metering in f32, well below any trade.
const TIE_MW: f64 = 0.5;

/// A line is within its rating up to 100.1 % of it (f32 set-points on a full line).
const RATING_SHARE: f64 = 1.001;

/// Cost may exceed the optimum by this share, or by `COST_FLOOR` where it is near zero.
const COST_SHARE: f64 = 0.005;

/// See `COST_SHARE`.
const COST_FLOOR: f64 = 0.01;

/// Shed load may exceed the least by this share, or by `SHED_FLOOR_MW`.
const SHED_SHARE: f64 = 0.01;

/// See `SHED_SHARE`.
const SHED_FLOOR_MW: f64 = 0.1;

/// Facts and the sentences of those that are broken.
#[derive(Clone, Debug, Default)]
pub(super) struct Found {
    pub(super) facts: Vec<Fact>,
    pub(super) broken_by: Vec<String>,
}

impl Found {
    fn add(&mut self, fact: Fact, broken: impl FnOnce(&Fact) -> String) {
        if !fact.met {
            self.broken_by.push(broken(&fact));
        }
        self.facts.push(fact);
    }
}

/// A fact whose worst value may reach its limit.
fn fact(name: &str, worst: f64, limit: f64, unit: &str, where_: &str) -> Fact {
    Fact {
        name: name.to_owned(),
        worst,
        limit,
        unit: unit.to_owned(),
        where_: where_.to_owned(),
        met: worst <= limit,
    }
}

/// Gather every fact that can be judged.
pub(super) fn gather(
    setting: &Setting,
    recording: &Recording,
    reference: &Reference,
    cost: f64,
) -> Found {
    let mut found = Found::default();
    frequency(setting, &mut found);
    ties(setting, &mut found);
    ratings(setting, &mut found);
    if recording.scheme != Scheme::Steward {
        return found;
    }
    rungs(setting, reference, &mut found);
    costs(reference, cost, &mut found);
    sheds(setting, recording, reference, &mut found);
    proofs(setting, recording, &mut found);
    found
}

/// Of the candidates, the one with the largest value; NaN counts as largest.
fn worst_of<T>(candidates: impl Iterator<Item = (f64, T)>) -> Option<(f64, T)> {
    candidates.max_by(|a, b| a.0.total_cmp(&b.0))
}

fn frequency(setting: &Setting, found: &mut Found) {
    let end = setting.end;
    let islands = end
        .island_freq_dev_hz
        .iter()
        .zip(&end.island_can_regulate)
        .enumerate()
        .filter(|(_, (_, can))| **can)
        .map(|(i, (dev_hz, _))| (dev_hz.abs(), i));
    let Some((worst_hz, island)) = worst_of(islands) else {
        return;
    };
    let place = match (0..setting.grid.buses.len()).find(|&b| end.bus_island[b] == Some(island)) {
        Some(bus) => format!("island of {}", setting.grid.buses[bus].name),
        None => format!("island {island}"),
    };
    let mut f = fact("frequency off nominal", worst_hz * 1e3, REST_HZ * 1e3, "mHz", &place);
    f.met = worst_hz < REST_HZ;
    found.add(f, |f| {
        format!(
            "Frequency is {:.2} mHz off nominal in the {} (limit {:.0} mHz).",
            f.worst, f.where_, f.limit
        )
    });
}

/// Whether a closed tie has a flow somebody agreed on.
fn has_schedule(setting: &Setting, line: usize) -> bool {
    setting.topology.is_live_tie(setting.grid, setting.end, line)
}

fn ties(setting: &Setting, found: &mut Found) {
    let (grid, end) = (setting.grid, setting.end);
    let open = setting.open_ties();
    for (is_open, name) in [(false, "tie off schedule"), (true, "tie off the agreed flow")] {
        let off = (0..grid.lines.len())
            .filter(|&l| has_schedule(setting, l) && open[l] == is_open)
            .map(|l| {
                let wanted = if is_open { end.agreed_mw[l] } else { end.schedule_mw[l] };
                ((end.line_flow_mw[l] - wanted).abs(), (l, wanted))
            });
        let Some((worst, (line, wanted))) = worst_of(off) else {
            continue;
        };
        let f = fact(name, worst, TIE_MW, "MW", &grid.lines[line].name);
        let flow = end.line_flow_mw[line];
        found.add(f, |f| {
            format!(
                "Tie {} carries {flow:.2} MW, {:.2} MW off the {} of {wanted:.2} MW (limit {TIE_MW} MW).",
                f.where_,
                f.worst,
                if is_open { "agreed flow" } else { "schedule" },
            )
        });
    }
}

fn ratings(setting: &Setting, found: &mut Found) {
    let (grid, end) = (setting.grid, setting.end);
    let loading = (0..grid.lines.len())
        .filter(|&l| end.line_closed[l] && grid.lines[l].rating_mw.is_finite())
        .map(|l| (end.line_flow_mw[l].abs() / grid.lines[l].rating_mw, l));
    let loaded: Vec<(f64, usize)> = loading.collect();
    let over = loaded.iter().filter(|l| l.0 > RATING_SHARE).count();
    let Some((worst, line)) = worst_of(loaded.into_iter()) else {
        return;
    };
    let f = fact("line loading", worst * 100.0, RATING_SHARE * 100.0, "%", &grid.lines[line].name);
    let (flow, rating) = (end.line_flow_mw[line].abs(), grid.lines[line].rating_mw);
    found.add(f, |f| {
        let others = match over {
            0 | 1 => String::new(),
            n => format!("; {} more above rating", n - 1),
        };
        format!(
            "Line {} carries {flow:.2} MW, {:.1} % of its rating of {rating:.0} MW{others}.",
            f.where_, f.worst
        )
    });
}

fn rungs(setting: &Setting, reference: &Reference, found: &mut Found) {
    let Some(least) = &reference.least_rung else {
        return;
    };
    for (a, area) in setting.grid.areas.iter().enumerate() {
        if setting.topology.without_reference(a) {
            continue;
        }
        let (is, should) = (setting.rungs[a], least[a]);
        let mut f = fact("rung", f64::from(is), f64::from(should), "rung", &area.name);
        f.met = is == should;
        found.add(f, |f| {
            format!(
                "{} ends at rung {}, its least rung is {}.",
                f.where_,
                rung_word(is),
                rung_word(should)
            )
        });
    }
}

fn costs(reference: &Reference, cost: f64, found: &mut Found) {
    let Some(optimum) = reference.optimum_cost else {
        return;
    };
    let limit = optimum + (COST_SHARE * optimum.abs()).max(COST_FLOOR);
    found.add(fact("cost of the set-points", cost, limit, "cost", "whole grid"), |f| {
        format!(
            "The set-points cost {:.4}, the optimum {optimum:.4} (limit {:.4}).",
            f.worst, f.limit
        )
    });
}

fn sheds(setting: &Setting, recording: &Recording, reference: &Reference, found: &mut Found) {
    if reference.least_shed_mw.is_empty() {
        return;
    }
    let (grid, end) = (setting.grid, setting.end);
    for (a, area) in grid.areas.iter().enumerate() {
        let shed_of = |kind: FeederKind| -> f64 {
            grid.feeders
                .iter()
                .zip(&end.feeder_shed_mw)
                .filter(|(f, _)| f.kind == kind && grid.buses[f.bus].area == a)
                .filter(|(f, _)| setting.topology.role[f.bus] != BusRole::Outside)
                .map(|(_, mw)| *mw)
                .sum()
        };
        let shed = shed_of(FeederKind::Continuous) + shed_of(FeederKind::Switched);
        let at_shed = setting.rungs[a] >= 3;
        if setting.topology.without_reference(a) || (!at_shed && shed < SHED_FLOOR_MW) {
            continue;
        }
        let least = reference.least_shed_mw[a];
        let breaker = breaker_slack_mw(grid, recording, Some(a));
        let limit = least + (SHED_SHARE * least).max(SHED_FLOOR_MW) + breaker;
        found.add(fact("load shed", shed, limit, "MW", &area.name), |f| {
            format!(
                "{} sheds {:.2} MW, the least is {least:.2} MW (limit {:.2} MW).",
                f.where_, f.worst, f.limit
            )
        });
    }
}

fn proofs(setting: &Setting, recording: &Recording, found: &mut Found) {
    let refused: Vec<_> = recording.proofs.iter().filter(|p| !p.accepted).collect();
    let place = match refused.first() {
        Some(p) => format!("{} at {:.1} s", setting.grid.areas[p.area].name, p.at_s),
        None => "all".to_owned(),
    };
    found.add(
        fact("proofs refused by the host", refused.len() as f64, 0.0, "proofs", &place),
        |f| {
            format!(
                "{:.0} of {} proofs did not stand up on the host, first that of {}.",
                f.worst,
                recording.proofs.len(),
                f.where_
            )
        },
    );
}
