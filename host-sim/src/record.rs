//! What a closed-loop run leaves behind: one sample per controller tick,
//! extremes at the plant's step, and everything that was said about it.
//!
//! Written by `rehearsal`, read by `report` and `judge`. Nothing in it depends
//! on wall-clock time. Shapes: the outer index of a series is the area, line,
//! unit or feeder in the grid's order; the inner one the sample (`times_s`).

use serde::Serialize;

/// Who balances the areas.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Scheme {
    /// Hedgerow's stewards.
    Steward,
    /// Governor droop alone.
    Droop,
    /// Droop with integration of the area control error.
    AreaControlError,
}

/// One sample per tick of everything that is drawn.
#[derive(Clone, Debug, Default, PartialEq, Serialize)]
pub struct Series {
    /// Sample times in s.
    pub times_s: Vec<f64>,
    /// Frequency deviation per area, in Hz (inertia-weighted over the area's live machine buses).
    pub area_freq_dev_hz: Vec<Vec<f64>>,
    /// Flow per line in MW, positive from `from` to `to`; 0 while open.
    pub line_flow_mw: Vec<Vec<f64>>,
    /// Output per unit in MW.
    pub unit_output_mw: Vec<Vec<f64>>,
    /// Set-point in force per unit in MW.
    pub unit_setpoint_mw: Vec<Vec<f64>>,
    /// Load taken off per feeder in MW.
    pub feeder_shed_mw: Vec<Vec<f64>>,
    /// Agreed flow per line in MW (0 for lines that are no ties).
    pub schedule_mw: Vec<Vec<f64>>,
    /// Rung per area (0 to 3); all 0 for the baselines.
    pub rung: Vec<Vec<u8>>,
    /// Verdict per area.
    pub verdict: Vec<Vec<SaidVerdict>>,
    /// Proven shortfall per area in MW; negative or zero = nothing proven.
    pub proven_mw: Vec<Vec<f64>>,
}

/// The detector's word as received by the host.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum SaidVerdict {
    /// Limits met and nothing left to do.
    Settled,
    /// On the way.
    Working,
    /// Proven that this rung cannot meet the limits.
    Impossible,
    /// Data missing or stale: no verdict, no move.
    Blind,
}

/// A value with where and when it was seen.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Extreme {
    /// The value, in the unit of the field that holds it.
    pub value: f64,
    /// Index of the bus or line.
    pub index: usize,
    /// Time in s.
    pub at_s: f64,
}

/// Extremes over the run, at the plant's step.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Extremes {
    /// Lowest frequency in Hz and its bus (live buses only).
    pub lowest_frequency_hz: Extreme,
    /// Highest frequency in Hz and its bus.
    pub highest_frequency_hz: Extreme,
    /// Steepest mean slope of an area's frequency over 500 ms, in Hz/s, signed; index = area.
    pub steepest_hz_per_s: Extreme,
    /// Worst loading (|flow| over continuous rating) and its line.
    pub worst_loading: Extreme,
    /// Total time with any line above 100.1 % of its rating, in s.
    pub over_rating_s: f64,
    /// Last time any live area was outside 10 mHz, in s; 0 if never.
    pub settled_s: f64,
}

/// Counters of one area's frames, as the links and the steward saw them.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize)]
pub struct FrameCounts {
    /// Sent by the area's steward.
    pub sent: u64,
    /// Lost on the way to it or from it.
    pub lost: u64,
    /// Refused by its steward (length, checksum, tag, range).
    pub refused: u64,
}

/// A proof as rebuilt and checked on the host.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct CheckedProof {
    /// Area that proved it.
    pub area: usize,
    /// Time in s.
    pub at_s: f64,
    /// Rung proven impossible.
    pub rung: u8,
    /// Shortfall claimed by the steward in MW.
    pub claimed_mw: f64,
    /// Shortfall recomputed in f64 from charter and line status, in MW.
    pub verified_mw: f64,
    /// Whether the host accepts it (verified > 0).
    pub accepted: bool,
}

/// A line of the story: what happened, to whom, when.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Told {
    /// Time in s.
    pub at_s: f64,
    /// Sentence, e.g. `line A3-A7 opens`.
    pub text: String,
}

/// State at rest, at the end of the run.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct FinalState {
    /// Island of each bus (islands numbered from 0); none = black.
    pub bus_island: Vec<Option<usize>>,
    /// Frequency deviation of each island in Hz.
    pub island_freq_dev_hz: Vec<f64>,
    /// Whether the island has a unit able to regulate.
    pub island_can_regulate: Vec<bool>,
    /// Load at each bus in MW before shedding, at nominal frequency (0 where black).
    pub bus_load_mw: Vec<f64>,
    /// Lines in service.
    pub line_closed: Vec<bool>,
    /// Units in service.
    pub unit_in_service: Vec<bool>,
    /// Base point of each unit at the end, in MW.
    pub unit_base_mw: Vec<f64>,
    /// Set-point of each unit in MW.
    pub unit_setpoint_mw: Vec<f64>,
    /// Output of each unit in MW.
    pub unit_output_mw: Vec<f64>,
    /// Load taken off per feeder in MW.
    pub feeder_shed_mw: Vec<f64>,
    /// Whether the feeder is held open for the operator.
    pub feeder_locked: Vec<bool>,
    /// Flow per line in MW.
    pub line_flow_mw: Vec<f64>,
    /// Schedule per line in MW (ties).
    pub schedule_mw: Vec<f64>,
    /// Flow both ends last agreed on, per line in MW (= schedule unless a tie is open to help).
    pub agreed_mw: Vec<f64>,
    /// Rung of each area.
    pub rung: Vec<u8>,
    /// Whether the area's steward was alive.
    pub steward_alive: Vec<bool>,
    /// Load lost for good because its bus is black, in MW.
    pub black_load_mw: f64,
}

/// A finished (or stopped) run.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Recording {
    /// Scheme that ran.
    pub scheme: Scheme,
    /// Name and sentence of the play.
    pub play: String,
    /// The play's sentence.
    pub title: String,
    /// Seed of the run.
    pub seed: u64,
    /// Time reached in s.
    pub duration_s: f64,
    /// Controller tick in s.
    pub tick_s: f64,
    /// Whether it was stopped before its end.
    pub stopped: bool,
    /// Samples.
    pub series: Series,
    /// Extremes.
    pub extremes: Extremes,
    /// Highest rung each area reached.
    pub worst_rung: Vec<u8>,
    /// Frame counters per area.
    pub frames: Vec<FrameCounts>,
    /// Every proof that was announced.
    pub proofs: Vec<CheckedProof>,
    /// The story in order of time: events, rung moves, proofs, islands, refusals.
    pub story: Vec<Told>,
    /// State at the end.
    pub end: FinalState,
}

/// Word of a rung.
pub fn rung_word(rung: u8) -> &'static str {
    match rung {
        0 => "keep",
        1 => "lean",
        2 => "stretch",
        _ => "shed",
    }
}
