//! The figures of a run, computed once for every format.
//!
//! Contract: [`Document`] is what `result.json` holds, field for field; the
//! terminal text and the page show the same numbers. Only [`Meta`] depends on
//! the clock or the machine.

use serde::Serialize;

use super::{Bundle, rung_word, scheme_word, verdict_word};
use crate::case::model::Grid;
use crate::judge::{Fact, Judgement, Outcome};
use crate::record::{FinalState, Recording, SaidVerdict, Scheme};

/// Version of the document's layout; raised when a field changes its meaning.
pub const SCHEMA: u32 = 1;

/// A unit counts as moved from this on, in MW: ten times what f32 set-points wander.
const MOVED_MW: f64 = 0.1;

/// Facts that depend on the clock or the machine.
#[derive(Clone, Debug, Default, PartialEq, Serialize)]
pub struct Meta {
    /// Version of this program.
    pub version: String,
    /// How long the run took, in s of wall clock.
    pub run_wall_s: f64,
    /// How long the judging took, in s of wall clock.
    pub judge_wall_s: f64,
}

/// One area's line in a report.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct AreaFigures {
    /// Name.
    pub name: String,
    /// Rung at the end.
    pub rung: &'static str,
    /// Lowest rung reached on the ladder.
    pub worst_rung: &'static str,
    /// Verdict at the end; none for a baseline.
    pub verdict: Option<&'static str>,
    /// Whether its steward was alive at the end.
    pub steward_alive: bool,
    /// Proofs announced.
    pub proofs: usize,
    /// Load shed at the end, in MW.
    pub shed_mw: f64,
    /// Largest deviation of one of its ties from schedule at the end, in MW.
    pub ties_off_schedule_mw: f64,
    /// Units whose set-point ended off their base point.
    pub units_moved: usize,
    /// Frame counters.
    pub frames: FrameFigures,
}

/// Frame counters of an area.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
pub struct FrameFigures {
    /// Sent by its steward.
    pub sent: u64,
    /// Lost on the way.
    pub lost: u64,
    /// Refused by its steward.
    pub refused: u64,
}

/// A value with its place and time.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Place {
    /// Name of the bus, line or area.
    pub name: String,
    /// Time in s.
    pub at_s: f64,
}

/// A proof as the report shows it.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct ProofFigures {
    /// Area that announced it.
    pub area: String,
    /// Time in s.
    pub at_s: f64,
    /// Rung proven impossible.
    pub rung: &'static str,
    /// Shortfall claimed in MW.
    pub claimed_mw: f64,
    /// Shortfall found again in f64, in MW.
    pub verified_mw: f64,
    /// Whether the host accepts it.
    pub accepted: bool,
}

/// A line of the story.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct EventFigures {
    /// Time in s.
    pub at_s: f64,
    /// What happened.
    pub text: String,
}

/// The judge's figures.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct JudgeFigures {
    /// Least rung per area, in the order of `areas`.
    pub least_rung: Vec<&'static str>,
    /// Cost of the final set-points.
    pub cost: f64,
    /// Cost of the optimum at the least rungs, where there is a reference.
    pub optimum_cost: Option<f64>,
    /// Load shed in MW.
    pub shed_mw: f64,
    /// Least load that has to be shed, in MW.
    pub least_shed_mw: f64,
    /// What one breaker may overshoot, in MW.
    pub breaker_slack_mw: f64,
    /// Settled facts.
    pub facts: Vec<Fact>,
    /// What has no reference.
    pub not_judged: Vec<String>,
}

/// The figures of one run under one scheme.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct RunFigures {
    /// Scheme that ran.
    pub scheme: &'static str,
    /// Kept or broken.
    pub outcome: Outcome,
    /// Limits that were broken.
    pub broken_by: Vec<String>,
    /// Whether the run was stopped before its end.
    pub stopped: bool,
    /// Time reached in s.
    pub duration_s: f64,
    /// Lowest frequency in Hz.
    pub lowest_frequency_hz: f64,
    /// Bus and time of it.
    pub lowest_frequency_at: Place,
    /// Highest frequency in Hz.
    pub highest_frequency_hz: f64,
    /// Bus and time of it.
    pub highest_frequency_at: Place,
    /// Steepest mean slope over 500 ms, in Hz/s, signed.
    pub steepest_hz_per_s: f64,
    /// Area and time of it.
    pub steepest_at: Place,
    /// Last time an area was outside 10 mHz, in s.
    pub settled_s: f64,
    /// Worst loading as a share of the continuous rating.
    pub worst_loading: f64,
    /// Line and time of it.
    pub worst_loading_at: Place,
    /// Time with any line above 100.1 % of its rating, in s.
    pub over_rating_s: f64,
    /// Load lost in black buses at the end, in MW.
    pub black_load_mw: f64,
    /// Areas in file order.
    pub areas: Vec<AreaFigures>,
    /// The judge's figures.
    pub judge: JudgeFigures,
}

/// Everything `result.json` holds.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Document {
    /// Version of the layout.
    pub schema: u32,
    /// Name of the play.
    pub play: String,
    /// Its sentence.
    pub title: String,
    /// Name of the grid.
    pub grid: String,
    /// Seed of every random stream.
    pub seed: u64,
    /// Controller tick in s.
    pub tick_s: f64,
    /// The run's figures.
    #[serde(flatten)]
    pub run: RunFigures,
    /// Proofs in order of time.
    pub proofs: Vec<ProofFigures>,
    /// The story in order of time.
    pub events: Vec<EventFigures>,
    /// Other schemes on the same play; empty unless compared.
    pub compare: Vec<RunFigures>,
    /// Facts of clock and machine.
    pub meta: Meta,
}

/// Gather the document of a bundle.
pub fn document(bundle: &Bundle) -> Document {
    let r = bundle.recording;
    Document {
        schema: SCHEMA,
        play: r.play.clone(),
        title: r.title.clone(),
        grid: bundle.grid.name.clone(),
        seed: r.seed,
        tick_s: r.tick_s,
        run: run_figures(bundle.grid, r, bundle.judgement),
        proofs: proofs(bundle.grid, r),
        events: r
            .story
            .iter()
            .map(|t| EventFigures { at_s: t.at_s, text: t.text.clone() })
            .collect(),
        compare: bundle.others.iter().map(|(r, j)| run_figures(bundle.grid, r, j)).collect(),
        meta: bundle.meta.clone(),
    }
}

fn name_of<T>(items: &[T], index: usize, name: impl Fn(&T) -> &str) -> String {
    items.get(index).map_or_else(|| format!("number {index}"), |item| name(item).to_owned())
}

/// Figures of one run.
pub fn run_figures(grid: &Grid, recording: &Recording, judgement: &Judgement) -> RunFigures {
    let e = &recording.extremes;
    let bus = |x: &crate::record::Extreme| Place {
        name: name_of(&grid.buses, x.index, |b| &b.name),
        at_s: x.at_s,
    };
    RunFigures {
        scheme: scheme_word(recording.scheme),
        outcome: judgement.outcome,
        broken_by: judgement.broken_by.clone(),
        stopped: recording.stopped,
        duration_s: recording.duration_s,
        lowest_frequency_hz: e.lowest_frequency_hz.value,
        lowest_frequency_at: bus(&e.lowest_frequency_hz),
        highest_frequency_hz: e.highest_frequency_hz.value,
        highest_frequency_at: bus(&e.highest_frequency_hz),
        steepest_hz_per_s: e.steepest_hz_per_s.value,
        steepest_at: Place {
            name: name_of(&grid.areas, e.steepest_hz_per_s.index, |a| &a.name),
            at_s: e.steepest_hz_per_s.at_s,
        },
        settled_s: e.settled_s,
        worst_loading: e.worst_loading.value,
        worst_loading_at: Place {
            name: name_of(&grid.lines, e.worst_loading.index, |l| &l.name),
            at_s: e.worst_loading.at_s,
        },
        over_rating_s: e.over_rating_s,
        black_load_mw: recording.end.black_load_mw,
        areas: (0..grid.areas.len()).map(|a| area_figures(grid, recording, a)).collect(),
        judge: JudgeFigures {
            least_rung: judgement.least_rung.iter().map(|r| rung_word(*r)).collect(),
            cost: judgement.cost,
            optimum_cost: judgement.optimum_cost,
            shed_mw: judgement.shed_mw,
            least_shed_mw: judgement.least_shed_mw,
            breaker_slack_mw: judgement.breaker_slack_mw,
            facts: judgement.facts.clone(),
            not_judged: judgement.not_judged.clone(),
        },
    }
}

fn area_figures(grid: &Grid, recording: &Recording, area: usize) -> AreaFigures {
    let end = &recording.end;
    let frames = recording.frames.get(area).copied().unwrap_or_default();
    let last: Option<SaidVerdict> =
        recording.series.verdict.get(area).and_then(|v| v.last()).copied();
    let inside = |bus: usize| grid.buses[bus].area == area;
    AreaFigures {
        name: grid.areas[area].name.clone(),
        rung: rung_word(end.rung.get(area).copied().unwrap_or(0)),
        worst_rung: rung_word(recording.worst_rung.get(area).copied().unwrap_or(0)),
        verdict: last.filter(|_| recording.scheme == Scheme::Steward).map(verdict_word),
        steward_alive: end.steward_alive.get(area).copied().unwrap_or(true),
        proofs: recording.proofs.iter().filter(|p| p.area == area).count(),
        shed_mw: grid
            .feeders
            .iter()
            .zip(&end.feeder_shed_mw)
            .filter(|(f, _)| inside(f.bus))
            .map(|(_, mw)| mw)
            .sum(),
        ties_off_schedule_mw: ties_off_schedule_mw(grid, end, area),
        units_moved: (0..grid.units.len())
            .filter(|&u| inside(grid.units[u].bus) && end.unit_in_service[u])
            .filter(|&u| (end.unit_setpoint_mw[u] - end.unit_base_mw[u]).abs() > MOVED_MW)
            .count(),
        frames: FrameFigures { sent: frames.sent, lost: frames.lost, refused: frames.refused },
    }
}

fn ties_off_schedule_mw(grid: &Grid, end: &FinalState, area: usize) -> f64 {
    (0..grid.lines.len())
        .filter(|&l| {
            let (a, b) = (grid.buses[grid.lines[l].from].area, grid.buses[grid.lines[l].to].area);
            a != b && (a == area || b == area) && end.line_closed[l]
        })
        .map(|l| (end.line_flow_mw[l] - end.schedule_mw[l]).abs())
        .fold(0.0, f64::max)
}

fn proofs(grid: &Grid, recording: &Recording) -> Vec<ProofFigures> {
    recording
        .proofs
        .iter()
        .map(|p| ProofFigures {
            area: name_of(&grid.areas, p.area, |a| &a.name),
            at_s: p.at_s,
            rung: rung_word(p.rung),
            claimed_mw: p.claimed_mw,
            verified_mw: p.verified_mw,
            accepted: p.accepted,
        })
        .collect()
}
