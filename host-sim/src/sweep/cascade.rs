//! One outage followed through the stages of the DC model until nothing trips.
//!
//! Contract: a stage is islands, rebalancing by the scheme, flows; every line
//! above its rating then opens at once, and the next stage begins. A line is
//! above its rating beyond 100.1 % of it and [`SLACK_MW`], the same for every
//! scheme. Each stage opens a line or is the last, so there is an end.
//! What a static cascade leaves out: time. A scheme is taken to have finished
//! before a line trips on heat; the stewards' closed loop shows how long it takes.

use std::rc::Rc;

use super::Balancing;
use super::balance;
use super::equilibrium;
use super::outage::Outage;
use super::prepare::Prepared;
use super::redispatch;
use super::state::{Network, State};
use crate::grid::dc::DcError;

/// Loading above which a line opens, share of the rating.
pub const OVER_SHARE: f64 = 1.001;
/// And by at least this much in MW: what a steward need not prove (see `equilibrium`).
pub const SLACK_MW: f64 = 0.11;

/// A stage as it ended.
#[derive(Clone, Debug, PartialEq)]
pub struct Stage {
    /// Injection per bus in MW.
    pub injection_mw: Vec<f64>,
    /// Flow per line in MW.
    pub flow_mw: Vec<f64>,
    /// Lines that open because of it.
    pub opened: Vec<usize>,
    /// Load lost so far, in MW.
    pub load_lost_mw: f64,
}

/// The end of a cascade.
pub struct Ended<'a> {
    /// Where it came to rest.
    pub state: State<'a>,
    /// Stages in order; the last one opens nothing.
    pub stages: Vec<Stage>,
    /// Lowest rung each area went to (0 for schemes without rungs).
    pub rung: Vec<u8>,
    /// Whether limits were missed even at the lowest rungs in some stage.
    pub beyond: bool,
}

impl Ended<'_> {
    /// Lines that opened after the outage.
    pub fn followed(&self) -> usize {
        self.stages.iter().map(|s| s.opened.len()).sum()
    }
}

/// Lines in service after an outage.
pub fn closed_after(case: &Prepared, outage: Outage) -> Vec<bool> {
    let mut closed: Vec<bool> = case.grid.lines.iter().map(|l| l.closed).collect();
    outage.lines().into_iter().for_each(|l| closed[l] = false);
    closed
}

/// Follow an outage; `first` is the network after it.
///
/// Errors: a failed solve of the network.
pub fn follow<'a>(
    case: &'a Prepared,
    first: Rc<Network>,
    outage: Outage,
    scheme: Balancing,
) -> Result<Ended<'a>, DcError> {
    let mut state = State::base(case, first);
    state.closed = closed_after(case, outage);
    if let Some(unit) = outage.unit() {
        state.unit_in[unit] = false;
        state.output_mw[unit] = 0.0;
    }
    let mut rung = vec![0; case.grid.areas.len()];
    let mut beyond = false;
    let mut stages = Vec::new();
    for _ in 0..=case.grid.lines.len() {
        state.find_islands();
        if let Some(rest) = rebalance(&mut state, scheme)? {
            rung.iter_mut().zip(&rest.rung).for_each(|(worst, now)| *worst = (*worst).max(*now));
            beyond |= rest.beyond;
        }
        state.find_flows()?;
        let opened = overloaded(&state);
        stages.push(Stage {
            injection_mw: state.injection_mw(),
            flow_mw: state.flow_mw.clone(),
            opened: opened.clone(),
            load_lost_mw: state.load_lost_mw(),
        });
        if opened.is_empty() {
            break;
        }
        opened.into_iter().for_each(|l| state.closed[l] = false);
        state.network = Rc::new(Network::new(&case.grid, &state.closed)?);
    }
    Ok(Ended { state, stages, rung, beyond })
}

fn rebalance(state: &mut State, scheme: Balancing) -> Result<Option<equilibrium::Rest>, DcError> {
    match scheme {
        Balancing::Steward => return equilibrium::settle(state).map(Some),
        Balancing::AreaControlError => balance::area_control_error(state),
        Balancing::Droop => {
            let base: Vec<f64> = state.case.grid.units.iter().map(|u| u.base_mw).collect();
            state.relief_mw.fill(0.0);
            balance::droop(state, &base);
        }
        Balancing::Proportional => balance::proportional(state),
        Balancing::Redispatch5 | Balancing::Redispatch15 => {
            let minutes = if scheme == Balancing::Redispatch5 { 5.0 } else { 15.0 };
            balance::area_control_error(state);
            redispatch::redispatch(state, minutes)?;
        }
    }
    Ok(None)
}

/// Lines above their rating.
pub fn overloaded(state: &State) -> Vec<usize> {
    let lines = &state.case.grid.lines;
    (0..lines.len())
        .filter(|&l| state.closed[l])
        .filter(|&l| {
            let over_mw = state.flow_mw[l].abs() - lines[l].rating_mw;
            over_mw > (OVER_SHARE - 1.0) * lines[l].rating_mw && over_mw > SLACK_MW
        })
        .collect()
}
