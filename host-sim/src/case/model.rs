//! The validated grid and play: plain data with indices instead of names.
//!
//! Contract: a value of [`Grid`] or [`Play`] obtained from the parser has
//! passed every check of `case::validate`; nothing downstream checks again.
//! Buses, lines, units and feeders keep the order of the file.
//!
//! Sign: injection into a bus positive; flow positive from `from` to `to`;
//! tie flow positive out of the area that looks at it.

use serde::Serialize;

/// A grid run as several areas.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Grid {
    /// Name shown in reports.
    pub name: String,
    /// Power base in MVA of every per-unit figure.
    pub base_mva: f64,
    /// Nominal frequency in Hz.
    pub nominal_hz: f64,
    /// Areas in file order.
    pub areas: Vec<Area>,
    /// Buses in file order.
    pub buses: Vec<Bus>,
    /// Lines in file order; a line whose ends lie in two areas is a tie.
    pub lines: Vec<Line>,
    /// Generating units and storages in file order.
    pub units: Vec<Unit>,
    /// Sheddable loads in file order.
    pub feeders: Vec<Feeder>,
}

/// One area: what one steward looks after.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Area {
    /// Name, unique in the grid.
    pub name: String,
    /// Lowest rung this area may go to: 0 `keep`, 1 `lean`, 2 `stretch`, 3 `shed`.
    pub lowest_rung: u8,
}

/// A node of the network.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Bus {
    /// Name, unique in the grid.
    pub name: String,
    /// Index of its area.
    pub area: usize,
    /// Load at nominal frequency, in MW, feeders included.
    pub load_mw: f64,
    /// Frequency dependence of the load: per cent of load per per cent of frequency.
    pub load_damping: f64,
    /// Further damping at this bus in MW per Hz (motors, or a test system's figure).
    pub damping_mw_per_hz: f64,
    /// Place on the drawn map, in any unit.
    pub position: Option<(f64, f64)>,
}

/// A line or transformer.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Line {
    /// Name, unique in the grid.
    pub name: String,
    /// Index of the bus at the sending end.
    pub from: usize,
    /// Index of the bus at the receiving end.
    pub to: usize,
    /// Series reactance in pu on the grid's base.
    pub reactance_pu: f64,
    /// Continuous rating in MW; infinite where the file gives none (internal lines only).
    pub rating_mw: f64,
    /// Short-time rating in MW.
    pub rating_short_mw: Option<f64>,
    /// For how long the short-time rating may be used, in minutes.
    pub rating_short_min: Option<f64>,
    /// Whether somebody measures its flow.
    pub metered: bool,
    /// Whether it is in service at the start.
    pub closed: bool,
    /// Agreed flow in MW from `from` to `to` (ties only); none = the base-case flow.
    pub schedule_mw: Option<f64>,
}

/// What drives a unit.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum UnitKind {
    /// Steam turbine.
    Steam,
    /// Gas turbine or engine.
    Gas,
    /// Water turbine.
    Hydro,
    /// Wind park behind converters.
    Wind,
    /// Solar park behind converters.
    Solar,
    /// Battery behind converters.
    Battery,
}

/// Whether the operator offers the unit to the steward.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum UnitStatus {
    /// The steward may move it.
    Available,
    /// In service, output left alone.
    Fixed,
    /// Not in service.
    Off,
}

/// What an actuator does when its steward falls silent.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum OnSilence {
    /// Keep the last set-point.
    Last,
    /// Return to the base point on its ramp.
    Schedule,
    /// Go to zero on its ramp.
    Zero,
}

/// A generating unit or storage.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Unit {
    /// Name, unique in the grid.
    pub name: String,
    /// Index of its bus.
    pub bus: usize,
    /// Kind, which sets the defaults of the file.
    pub kind: UnitKind,
    /// Operator's status at the start.
    pub status: UnitStatus,
    /// Nameplate in MVA: base of inertia, droop and damping.
    pub rating_mva: f64,
    /// Base point in MW.
    pub base_mw: f64,
    /// Normal range, lower end, in MW.
    pub min_mw: f64,
    /// Normal range, upper end, in MW.
    pub max_mw: f64,
    /// Emergency range, lower end, in MW.
    pub emergency_min_mw: f64,
    /// Emergency range, upper end, in MW.
    pub emergency_max_mw: f64,
    /// Part of the normal range kept free above, in MW (spent from `stretch` on).
    pub reserve_up_mw: f64,
    /// Part of the normal range kept free below, in MW.
    pub reserve_down_mw: f64,
    /// Ramp limit in MW per second; infinite for none.
    pub ramp_mw_per_s: f64,
    /// Curvature of the cost of leaving the base point, per pu squared.
    pub cost_per_pu2: f64,
    /// Inertia constant in s on the nameplate; 0 for a converter.
    pub inertia_s: f64,
    /// Droop in per cent on the nameplate; none = no governor.
    pub droop_percent: Option<f64>,
    /// Damping in pu power per pu frequency on the nameplate.
    pub damping_pu: f64,
    /// First-order lag of turbine and governor in s; 0 = follows at once.
    pub lag_s: f64,
    /// Energy of a storage in MWh when full; none for others.
    pub energy_mwh: Option<f64>,
    /// Energy at the start as a share of full, 0 to 1.
    pub energy_start: f64,
    /// Whether an island can live on it.
    pub forms_grid: bool,
    /// Whether it may be taken off at `stretch`.
    pub may_trip: bool,
    /// Output over set-point minus one: 0.02 = delivers 2 % too much (plant only).
    pub gain_error: f64,
    /// Output less set-point, standing, in MW (plant only).
    pub bias_mw: f64,
    /// What it does when its steward falls silent.
    pub on_silence: OnSilence,
}

/// How a feeder sheds.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum FeederKind {
    /// Any part of the load can be taken off.
    Continuous,
    /// A breaker that takes off all the load it carries now.
    Switched,
}

/// Who puts a shed feeder back.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum Restore {
    /// The operator's order.
    Operator,
    /// The steward, as soon as the load fits again.
    Automatic,
}

/// A sheddable part of a bus's load.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Feeder {
    /// Name, unique in the grid.
    pub name: String,
    /// Index of its bus.
    pub bus: usize,
    /// Load that opening it takes off, in MW; part of the bus's load.
    pub load_mw: f64,
    /// Continuous or switched.
    pub kind: FeederKind,
    /// Who restores it.
    pub restore: Restore,
    /// Price of shed load per pu, against the units' cost.
    pub price_per_pu: f64,
}

/// A scenario: what happens to a grid, and under which settings.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Play {
    /// Short name (file stem or the built-in's name).
    pub name: String,
    /// One sentence on what it shows.
    pub title: String,
    /// Lengths, steps and seed.
    pub run: Run,
    /// The stewards' settings.
    pub steward: StewardSettings,
    /// The links between stewards, and between plant and stewards.
    pub links: Links,
    /// Timed events in order of time.
    pub events: Vec<Event>,
}

/// `[run]` of a play.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Run {
    /// Length in s.
    pub duration_s: f64,
    /// Controller tick in s.
    pub tick_s: f64,
    /// Plant step in s; a whole number of steps makes a tick.
    pub plant_step_s: f64,
    /// Seed of every random stream.
    pub seed: u64,
}

/// `[steward]` of a play; defaults in `case::defaults`.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct StewardSettings {
    /// Iterations of the law per tick.
    pub iterations: u16,
    /// Iterations of the shadow per tick.
    pub shadow_iterations: u16,
    /// Low-pass time of the load estimates in s.
    pub filter_s: f64,
    /// How long estimates stay frozen after a known event, in s.
    pub event_freeze_s: f64,
    /// How far a tie may leave schedule from `lean` on, in MW.
    pub tie_band_mw: f64,
    /// Price of a tie deviation per pu, at each end.
    pub tie_price_per_pu: f64,
    /// Violation that must be proven before the steward gives ground, in MW.
    pub proof_threshold_mw: f64,
    /// Assumed damping of the area's load in per cent per per cent (any value >= 0 gives the same rest point).
    pub assumed_load_damping: f64,
    /// Help radius in areas.
    pub help_hops: u8,
}

/// `[links]` of a play: faults on the frames, as middleware.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Links {
    /// Fixed delay between stewards, in ticks.
    pub delay_ticks: u16,
    /// Extra delay drawn per frame from 0 to this, in ticks.
    pub jitter_ticks: u16,
    /// Chance that a frame is lost, 0 to 1.
    pub loss: f64,
    /// Chance that a frame arrives twice.
    pub duplicate: f64,
    /// Chance that a frame is overtaken by the next one.
    pub reorder: f64,
    /// Chance that one bit of a frame is flipped.
    pub corrupt: f64,
    /// Whether the faults also hit the frames between plant and stewards.
    pub plant_too: bool,
}

/// Something that happens at a time.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Event {
    /// Time in s from the start of the run.
    pub at_s: f64,
    /// What happens.
    pub what: Happening,
}

/// What can happen in a play. Indices point into the grid.
#[derive(Clone, Debug, PartialEq, Serialize)]
#[serde(rename_all = "kebab-case")]
#[allow(missing_docs, reason = "each variant's sentence explains its fields")]
pub enum Happening {
    /// A line opens.
    LineTrip { line: usize },
    /// A line is put back (refused outside the synchronism window).
    LineClose { line: usize },
    /// The load of a bus changes by this much, in MW.
    LoadStep { bus: usize, mw: f64 },
    /// A unit's breaker opens.
    UnitTrip { unit: usize },
    /// A tripped unit comes back at zero output and may be moved again.
    UnitReturn { unit: usize },
    /// A tie's agreed flow goes to a new value, ramped over a time.
    Schedule { line: usize, mw: f64, ramp_s: f64 },
    /// A unit's base point goes to a new value, ramped over a time.
    BasePoint { unit: usize, mw: f64, ramp_s: f64 },
    /// The board of an area dies.
    StewardDies { area: usize },
    /// A new board takes the area over (fresh boot, same charter).
    StewardReturns { area: usize },
    /// No frame passes between two areas for a time.
    LinkOutage { areas: (usize, usize), for_s: f64 },
    /// The operator allows an area's feeders back.
    RestoreLoad { area: usize },
}
