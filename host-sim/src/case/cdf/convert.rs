//! Records to a network: what the model cannot hold or the format lacks, by stated rules.
//!
//! Contract: generation equals load in the lossless model; every sentence in
//! `rules` says what was added, changed or left out, and why.
//! Sign: generation positive into the bus, load positive out of it.

use super::super::defaults;
use super::super::model::{Line, UnitKind};
use super::areas::join_pieces;
use super::flow::base_flows_pu;
use super::read::{BusRecord, Case};

/// A rating is at least this times the larger of the base flow and the floor.
const RATING_FACTOR: f64 = 1.5;
/// The floor of the ratings as a share of the largest base flow.
const RATING_FLOOR: f64 = 0.05;
/// Reactance that stands in for a branch that has none, in pu.
const BUS_TIE_PU: f64 = 0.0001;
/// The base flow is one dense solve; beyond this it takes too long and too much memory.
const BUSES_MAX: usize = 2000;
/// Generation above or below this is a unit, in MW.
const SOME_MW: f64 = 1e-6;
/// Kind of every unit: its ramp lies between steam and water.
pub(super) const KIND: UnitKind = UnitKind::Gas;

/// A network ready to be written.
#[derive(Debug)]
pub(super) struct Network {
    pub title: String,
    pub base_mva: f64,
    pub areas: Vec<String>,
    pub buses: Vec<NetworkBus>,
    pub lines: Vec<Line>,
    pub units: Vec<NetworkUnit>,
    pub rules: Vec<String>,
}

/// A bus ready to be written.
#[derive(Debug)]
pub(super) struct NetworkBus {
    pub name: String,
    pub label: String,
    pub area: String,
    pub load_mw: f64,
}

/// A unit ready to be written.
#[derive(Debug)]
pub(super) struct NetworkUnit {
    pub name: String,
    pub bus: String,
    pub base_mw: f64,
    /// Whether it is generation inside a load, which nobody dispatches.
    pub fixed: bool,
}

/// Apply the rules, or say why no network comes of it.
pub(super) fn convert(mut case: Case) -> Result<Network, String> {
    if case.buses.is_empty() {
        return Err("the file has no bus".to_owned());
    }
    if case.buses.len() > BUSES_MAX {
        return Err(format!(
            "the file has {} buses; the importer holds {BUSES_MAX}",
            case.buses.len()
        ));
    }
    let mut rules = std::mem::take(&mut case.notes);
    let mut lines = convert_lines(&case, &mut rules);
    turn_negatives(&mut case.buses, &mut rules);
    balance(&mut case.buses, &mut rules);
    let injection_pu: Vec<f64> =
        case.buses.iter().map(|bus| (bus.generation_mw - bus.load_mw) / case.base_mva).collect();
    rate(&mut lines, &case, &injection_pu, &mut rules)?;
    let mut area_of: Vec<i64> = case.buses.iter().map(|bus| bus.area).collect();
    rules.extend(join_pieces(&mut area_of, &lines, |bus| name_of(&case.buses[bus])));
    let units = convert_units(&case.buses, &mut rules);
    rules.push(
        "the format states no frequency: 60 Hz, since it comes from North America".to_owned(),
    );
    rules.push(
        "the format knows no sheddable load: add `[[feeder]]` entries for rung shed to have something to open"
            .to_owned(),
    );
    let mut numbers = area_of.clone();
    numbers.sort_unstable();
    numbers.dedup();
    let area_name = |number: &i64| format!("Area {number}");
    Ok(Network {
        title: if case.title.is_empty() { "Imported grid".to_owned() } else { case.title.clone() },
        base_mva: case.base_mva,
        areas: numbers.iter().map(area_name).collect(),
        buses: case
            .buses
            .iter()
            .zip(&area_of)
            .map(|(bus, area)| NetworkBus {
                name: name_of(bus),
                label: bus.label.clone(),
                area: area_name(area),
                load_mw: bus.load_mw.max(0.0),
            })
            .collect(),
        lines,
        units,
        rules,
    })
}

/// A count with its noun.
fn counted(count: usize, one: &str, many: &str) -> String {
    format!("{count} {}", if count == 1 { one } else { many })
}

/// Buses are called by their numbers.
fn name_of(bus: &BusRecord) -> String {
    format!("B{}", bus.number)
}

fn convert_lines(case: &Case, rules: &mut Vec<String>) -> Vec<Line> {
    let mut lines: Vec<Line> = Vec::with_capacity(case.branches.len());
    let (mut loops, mut zeros, mut parallel) = (0, 0, 0);
    for branch in &case.branches {
        if branch.from == branch.to {
            loops += 1;
            continue;
        }
        let plain =
            format!("{}-{}", name_of(&case.buses[branch.from]), name_of(&case.buses[branch.to]));
        let twins =
            lines.iter().filter(|line| (line.from, line.to) == (branch.from, branch.to)).count();
        parallel += usize::from(twins > 0);
        zeros += usize::from(branch.reactance_pu == 0.0);
        lines.push(Line {
            name: if twins == 0 { plain } else { format!("{plain} #{}", twins + 1) },
            from: branch.from,
            to: branch.to,
            reactance_pu: if branch.reactance_pu == 0.0 { BUS_TIE_PU } else { branch.reactance_pu },
            rating_mw: branch.rating_mw,
            rating_short_mw: None,
            rating_short_min: None,
            metered: true,
            closed: true,
            schedule_mw: None,
        });
    }
    remark(case, &lines, [loops, zeros, parallel], rules);
    lines
}

/// Say what of the branches was read otherwise than it stands.
fn remark(
    case: &Case,
    lines: &[Line],
    [loops, zeros, parallel]: [usize; 3],
    rules: &mut Vec<String>,
) {
    let taps =
        case.branches.iter().filter(|branch| branch.ratio != 0.0 && branch.ratio != 1.0).count();
    let shifts = case.branches.iter().filter(|branch| branch.shift_deg != 0.0).count();
    let negatives = lines.iter().filter(|line| line.reactance_pu < 0.0).count();
    let mut say = |count: usize, sentence: &str| {
        if count > 0 {
            rules.push(format!("{}{sentence}", counted(count, "branch", "branches")));
        }
    };
    say(taps, " with a ratio other than 1: ignored, plain DC takes the reactance as it is");
    say(shifts, " with a phase shift: ignored, the model has no phase shifters");
    say(loops, " that would end at the same bus: left out");
    say(zeros, " without reactance: 0.0001 pu stands in");
    say(negatives, " with negative reactance: kept, allowed inside an area only");
    say(parallel, " beside another one: named with #2 and so on");
}

/// Negative generation becomes load; negative load becomes generation.
fn turn_negatives(buses: &mut [BusRecord], rules: &mut Vec<String>) {
    let (mut sinks, mut sinks_mw) = (0, 0.0);
    for bus in buses.iter_mut().filter(|bus| !bus.is_slack && bus.generation_mw < 0.0) {
        sinks += 1;
        sinks_mw -= bus.generation_mw;
        bus.load_mw -= bus.generation_mw;
        bus.generation_mw = 0.0;
    }
    if sinks > 0 {
        rules.push(format!(
            "{} with negative generation: {sinks_mw:.2} MW became load",
            counted(sinks, "bus", "buses")
        ));
    }
}

/// The slack bus generates what the others do not; losses have no place in the model.
fn balance(buses: &mut [BusRecord], rules: &mut Vec<String>) {
    let largest =
        (0..buses.len()).max_by(|&a, &b| buses[a].generation_mw.total_cmp(&buses[b].generation_mw));
    let marked = buses.iter().position(|bus| bus.is_slack);
    let Some(slack) = marked.or(largest) else {
        return;
    };
    let load_mw: f64 = buses.iter().map(|bus| bus.load_mw).sum();
    let others_mw: f64 = buses
        .iter()
        .enumerate()
        .filter(|&(index, _)| index != slack)
        .map(|(_, bus)| bus.generation_mw)
        .sum();
    let bus = &mut buses[slack];
    let before_mw = bus.generation_mw;
    bus.generation_mw = load_mw - others_mw;
    let which = if marked.is_some() {
        "the slack bus"
    } else {
        "no bus is marked as slack; the largest generator"
    };
    rules.push(format!(
        "{which}, {}, generates {:.3} MW instead of {before_mw} MW, so that generation equals load without losses",
        name_of(bus),
        bus.generation_mw
    ));
    if bus.generation_mw < 0.0 {
        bus.load_mw -= bus.generation_mw;
        bus.generation_mw = 0.0;
        rules.push(format!("that is negative, so it became load at {}", name_of(bus)));
    }
}

/// Give each line its own rating where it has a usable one, else the rule's.
fn rate(
    lines: &mut [Line],
    case: &Case,
    injection_pu: &[f64],
    rules: &mut Vec<String>,
) -> Result<(), String> {
    let flows_pu = base_flows_pu(injection_pu, lines)
        .ok_or("the network has no unique flow: it is in pieces, or reactances cancel")?;
    let largest_mw =
        flows_pu.iter().fold(0.0, |most: f64, flow| most.max(flow.abs())) * case.base_mva;
    let mut own = 0;
    for (line, flow_pu) in lines.iter_mut().zip(&flows_pu) {
        let flow_mw = flow_pu.abs() * case.base_mva;
        if line.rating_mw > flow_mw {
            own += 1;
            continue;
        }
        let exact_mw = RATING_FACTOR * flow_mw.max(RATING_FLOOR * largest_mw);
        // Rounded up to a tenth so that the base case never loads a line above the rule.
        line.rating_mw = ((exact_mw * 10.0 - 1e-6).ceil() / 10.0).max(0.1);
    }
    if own > 0 {
        rules.push(format!(
            "{} with a first rating above the base flow: kept, read as MW",
            counted(own, "branch", "branches")
        ));
    }
    let rest = lines.len() - own;
    if rest > 0 {
        rules.push(format!(
            "{} without such a rating: 1.5 times the larger of the base DC flow and 5 % of the largest \
             base DC flow ({largest_mw:.1} MW), rounded up to 0.1 MW",
            counted(rest, "branch", "branches")
        ));
    }
    Ok(())
}

fn convert_units(buses: &[BusRecord], rules: &mut Vec<String>) -> Vec<NetworkUnit> {
    let mut units = Vec::new();
    for bus in buses {
        if bus.generation_mw > SOME_MW {
            let name = format!("G{}", bus.number);
            units.push(NetworkUnit {
                name,
                bus: name_of(bus),
                base_mw: bus.generation_mw,
                fixed: false,
            });
        }
        if bus.load_mw < -SOME_MW {
            let name = format!("E{}", bus.number);
            units.push(NetworkUnit { name, bus: name_of(bus), base_mw: -bus.load_mw, fixed: true });
        }
    }
    let embedded = units.iter().filter(|unit| unit.fixed).count();
    if embedded > 0 {
        rules.push(format!(
            "{} with negative load: it became generation that the steward leaves alone",
            counted(embedded, "bus", "buses")
        ));
    }
    let usual = defaults::of_kind(KIND);
    rules.push(format!(
        "{} with what the format lacks: kind gas, range 50 to 120 % of the base point, emergency range 35 to 130 %, \
         no reserve, {:.0} %/min ramp, inertia {} s, droop 5 %; units without active power are left out",
        counted(units.len() - embedded, "unit", "units"),
        usual.ramp_percent_per_s * 60.0,
        usual.inertia_s,
    ));
    units
}
