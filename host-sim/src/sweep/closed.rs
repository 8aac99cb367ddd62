//! One outage in the whole loop: plant, links, stewards or a baseline.
//!
//! Contract: the same loop and stewards as `rehearse`; the play is made here and
//! can be had with [`play`], so that one outage can be rehearsed and looked at.
//! Nothing trips on heat in the plant: lines above their rating at the end are
//! counted instead.

use super::outage::Outage;
use super::prepare::Prepared;
use super::row::{End, Row, rounded};
use super::{Balancing, SweepError};
use crate::case::defaults;
use crate::case::model::{Event, Happening, Play, Run};
use crate::record::{Recording, Scheme};
use crate::rehearsal::rehearse;

/// When the outage happens, s: late enough for the stewards to know their loads.
pub const OUTAGE_AT_S: f64 = 5.0;

/// Length and steps of the runs.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ClosedLoop {
    /// Length of each run in s.
    pub duration_s: f64,
    /// Controller tick in s.
    pub tick_s: f64,
    /// Plant step in s.
    pub plant_step_s: f64,
    /// Seed of the links' faults.
    pub seed: u64,
}

impl Default for ClosedLoop {
    fn default() -> Self {
        Self {
            duration_s: 60.0,
            tick_s: defaults::TICK_S,
            plant_step_s: defaults::PLANT_STEP_S,
            seed: defaults::SEED,
        }
    }
}

/// The play of an outage.
pub fn play(case: &Prepared, outage: Outage, setting: &ClosedLoop) -> Play {
    let happening = |what| Event { at_s: OUTAGE_AT_S, what };
    let mut events: Vec<Event> =
        outage.lines().into_iter().map(|line| happening(Happening::LineTrip { line })).collect();
    events.extend(outage.unit().map(|unit| happening(Happening::UnitTrip { unit })));
    Play {
        name: "sweep".to_owned(),
        title: format!("Outage of {}", outage.name(&case.grid)),
        run: Run {
            duration_s: setting.duration_s,
            tick_s: setting.tick_s,
            plant_step_s: setting.plant_step_s,
            seed: setting.seed,
        },
        steward: defaults::steward(case.grid.base_mva),
        links: defaults::links(),
        events,
    }
}

/// The closed-loop scheme of a static one.
///
/// Errors: a scheme that exists only in the static mode.
pub fn loop_scheme(scheme: Balancing) -> Result<Scheme, SweepError> {
    match scheme {
        Balancing::Steward => Ok(Scheme::Steward),
        Balancing::AreaControlError => Ok(Scheme::AreaControlError),
        Balancing::Droop => Ok(Scheme::Droop),
        Balancing::Proportional | Balancing::Redispatch5 | Balancing::Redispatch15 => {
            Err(SweepError::Asked(format!(
                "scheme {} exists only in the static mode: leave out --closed-loop, or choose steward, area-control-error or droop",
                scheme.word()
            )))
        }
    }
}

/// Run an outage to its end and take its figures.
///
/// Errors: a loop that can not start.
pub fn run(
    case: &Prepared,
    outage: Outage,
    scheme: Balancing,
    setting: &ClosedLoop,
) -> Result<Row, SweepError> {
    let play = play(case, outage, setting);
    let recording = rehearse(&case.grid, &play, loop_scheme(scheme)?, &mut |_| true)
        .map_err(|e| SweepError::Loop(format!("{}: {e}", outage.name(&case.grid))))?;
    Ok(row(case, outage, scheme, &recording))
}

/// The figures of a recording.
pub fn row(case: &Prepared, outage: Outage, scheme: Balancing, recording: &Recording) -> Row {
    let grid = &case.grid;
    let end = &recording.end;
    let mut lost_mw: Vec<f64> = grid
        .buses
        .iter()
        .zip(&end.bus_island)
        .map(|(bus, island)| if island.is_none() { bus.load_mw.max(0.0) } else { 0.0 })
        .collect();
    for (f, shed) in grid.feeders.iter().zip(&end.feeder_shed_mw) {
        if end.bus_island[f.bus].is_some() {
            lost_mw[f.bus] += shed;
        }
    }
    let over = (0..grid.lines.len()).filter(|&l| {
        let over_mw = end.line_flow_mw[l].abs() - grid.lines[l].rating_mw;
        end.line_closed[l]
            && over_mw > (super::cascade::OVER_SHARE - 1.0) * grid.lines[l].rating_mw
            && over_mw > super::cascade::SLACK_MW
    });
    let figures = End {
        grid,
        base_flow_mw: &case.base_flow_mw,
        output_mw: &end.unit_output_mw,
        unit_in: &end.unit_in_service,
        flow_mw: &end.line_flow_mw,
        lost_mw,
        followed: Vec::new(),
    };
    let freq = end.island_freq_dev_hz.iter().copied();
    Row {
        lines_over_rating: over.count(),
        rung: recording.worst_rung.iter().copied().max().unwrap_or(0),
        freq_rest_dev_mhz: rounded(
            1e3 * freq.fold(0.0, |m, f| if f.abs() > f64::abs(m) { f } else { m }),
        ),
        freq_lowest_hz: Some(rounded(recording.extremes.lowest_frequency_hz.value)),
        time_back_s: Some(rounded((recording.extremes.settled_s - OUTAGE_AT_S).max(0.0))),
        proofs: (scheme == Balancing::Steward).then_some(recording.proofs.len()),
        ..figures.row(case.form, case.factor, scheme, outage)
    }
}
