//! The closed loop in virtual time: plant, links, stewards (or a baseline), record.
//!
//! Contract: everything that passes between plant and steward, or between
//! stewards, passes as sealed frames over a [`crate::link::Link`]; no struct
//! crosses. The run is a function of grid, play and scheme alone: no clock is
//! read, and the same seed gives the same record.
//!
//! Order of a tick: events due; measurements out; frames delivered; every node
//! ticks; orders and status in; a sample; the plant's steps. A neighbour's
//! frame of this tick therefore arrives in the next one at the earliest.

mod balance;
mod crew;
mod desk;
mod ramps;
mod recorder;
mod seat;
mod tell;

use crate::case::model::{Event, Grid, Happening, Play, UnitStatus};
use crate::charter::{CharterError, compile, schedules_mw};
use crate::plant::{Plant, PlantError};
use crate::record::{Recording, Scheme};
use balance::Balance;
use crew::Crew;
use ramps::Ramps;
use recorder::Recorder;
use thiserror::Error;

pub use balance::{GAINS_TRIED_PER_S, TUNED_GAIN_PER_S, TUNING_PLAYS, tune};
pub use seat::{Gone, HostNode, InProcess, Seat, SeatCounts, Source, Staff};

/// Why a rehearsal could not run.
#[derive(Debug, Error)]
pub enum RehearsalError {
    /// The plant could not be set up.
    #[error("the plant can not be set up: {0}")]
    Plant(#[from] PlantError),
    /// A charter could not be made.
    #[error("{0}")]
    Charter(#[from] CharterError),
    /// A steward refused its charter.
    #[error("the steward of {area} refuses its charter: {why:?}")]
    Refused {
        /// Name of the area.
        area: String,
        /// Its reason.
        why: hedgerow_protocol::message::Refusal,
    },
    /// The seat of an area could not be filled.
    #[error("{area}: {why}")]
    Seat {
        /// Name of the area.
        area: String,
        /// Why not.
        why: Box<dyn std::error::Error + Send + Sync>,
    },
}

/// A seat that was left empty in mid-run, though no event of the play says so.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Lost {
    /// Index of the area.
    pub area: usize,
    /// Tick at which it was missed.
    pub tick: u32,
    /// Why, in words.
    pub why: String,
}

/// A run whose seats may have been boards.
#[derive(Clone, Debug, PartialEq)]
pub struct Attended {
    /// The record.
    pub recording: Recording,
    /// Seats that were left empty.
    pub lost: Vec<Lost>,
}

/// Run a play on a grid under a scheme.
///
/// `watch` is told the share done, 0 to 1, once per tick; when it returns
/// false the run stops and what is finished is returned with `stopped` set.
///
/// Errors: [`RehearsalError`].
pub fn rehearse(
    grid: &Grid,
    play: &Play,
    scheme: Scheme,
    watch: &mut dyn FnMut(f64) -> bool,
) -> Result<Recording, RehearsalError> {
    rehearse_with_gain(grid, play, scheme, TUNED_GAIN_PER_S, watch)
}

/// The same with a stated gain of the area control error scheme, per s.
///
/// Errors: [`RehearsalError`].
pub fn rehearse_with_gain(
    grid: &Grid,
    play: &Play,
    scheme: Scheme,
    gain_per_s: f64,
    watch: &mut dyn FnMut(f64) -> bool,
) -> Result<Recording, RehearsalError> {
    Ok(Loop::new(grid, play, scheme, gain_per_s, Box::new(InProcess))?.run(watch).recording)
}

/// Run a play under stewards that sit where `staff` puts them.
///
/// The loop is that of [`rehearse`]; a seat that is lost stays empty, and its
/// area goes on by the rules of a steward that has died.
/// Errors: [`RehearsalError`], before the first tick.
pub fn attend(
    grid: &Grid,
    play: &Play,
    staff: Box<dyn Staff>,
    watch: &mut dyn FnMut(f64) -> bool,
) -> Result<Attended, RehearsalError> {
    Ok(Loop::new(grid, play, Scheme::Steward, TUNED_GAIN_PER_S, staff)?.run(watch))
}

/// Who sets the set-points.
enum Helm {
    Stewards(Box<Crew>),
    Baseline(Balance),
}

struct Loop<'g> {
    grid: &'g Grid,
    play: &'g Play,
    plant: Plant,
    helm: Helm,
    ramps: Ramps,
    recorder: Recorder,
    next_event: usize,
    steps_per_tick: u32,
}

impl<'g> Loop<'g> {
    fn new(
        grid: &'g Grid,
        play: &'g Play,
        scheme: Scheme,
        gain_per_s: f64,
        staff: Box<dyn Staff>,
    ) -> Result<Self, RehearsalError> {
        let plant = Plant::new(grid, play.run.plant_step_s)?;
        let schedules = schedules_mw(grid)?;
        let helm = match scheme {
            Scheme::Steward => {
                let areas = compile(grid, play)?;
                Helm::Stewards(Box::new(Crew::new(grid, play, areas, staff)?))
            }
            Scheme::Droop | Scheme::AreaControlError => {
                Helm::Baseline(Balance::new(grid, scheme, gain_per_s))
            }
        };
        let ramps = Ramps::new(grid, schedules);
        let mut recorder = Recorder::new(grid, play, scheme, &plant);
        if let Helm::Baseline(balance) = &helm
            && let Some(text) = balance.sentence(gain_per_s)
        {
            recorder.tell(0.0, text);
        }
        let steps = (play.run.tick_s / play.run.plant_step_s).round().max(1.0) as u32;
        Ok(Self { grid, play, plant, helm, ramps, recorder, next_event: 0, steps_per_tick: steps })
    }

    fn run(mut self, watch: &mut dyn FnMut(f64) -> bool) -> Attended {
        let ticks = (self.play.run.duration_s / self.play.run.tick_s).round() as u32;
        for tick in 0..ticks {
            self.tick(tick);
            if !watch(f64::from(tick + 1) / f64::from(ticks)) {
                return self.finish(true);
            }
        }
        self.finish(false)
    }

    fn tick(&mut self, tick: u32) {
        let now_s = f64::from(tick) * self.play.run.tick_s;
        self.run_events(tick, now_s);
        self.ramps.pass(self.play.run.tick_s);
        self.hold_base_points();
        match &mut self.helm {
            Helm::Stewards(crew) => {
                crew.exchange(tick, &mut self.plant, &self.ramps, &mut self.recorder);
            }
            Helm::Baseline(balance) => {
                balance.cycle(self.grid, now_s, &mut self.plant, &self.ramps);
            }
        }
        let crew = match &self.helm {
            Helm::Stewards(crew) => Some(crew.as_ref()),
            Helm::Baseline(_) => None,
        };
        self.recorder.sample(self.grid, now_s, &self.plant, &self.ramps, crew);
        for _ in 0..self.steps_per_tick {
            self.plant.step();
            self.recorder.step(self.grid, &self.plant);
        }
    }

    /// Units that nobody moves follow their base points.
    fn hold_base_points(&mut self) {
        let baseline = matches!(self.helm, Helm::Baseline(_));
        for (unit, u) in self.grid.units.iter().enumerate() {
            let unmoved =
                u.status == UnitStatus::Fixed || (baseline && u.status == UnitStatus::Available);
            if unmoved {
                self.plant.set_unit_setpoint_mw(unit, self.ramps.base_mw(unit));
            }
        }
    }

    fn run_events(&mut self, tick: u32, now_s: f64) {
        // Half a tick of slack, so that 10.0 s is tick 100 whatever the rounding.
        let until = now_s + 0.5 * self.play.run.tick_s;
        while let Some(event) = self.play.events.get(self.next_event).filter(|e| e.at_s < until) {
            self.next_event += 1;
            self.run_event(tick, now_s, event);
        }
    }

    fn run_event(&mut self, tick: u32, now_s: f64, event: &Event) {
        match &event.what {
            Happening::LineTrip { .. }
            | Happening::LineClose { .. }
            | Happening::LoadStep { .. }
            | Happening::UnitTrip { .. }
            | Happening::UnitReturn { .. } => match self.plant.apply(&event.what) {
                Ok(told) => told.into_iter().for_each(|text| self.recorder.tell(now_s, text)),
                Err(refused) => self.recorder.tell(now_s, refused.to_string()),
            },
            what => {
                self.recorder.tell(now_s, tell::sentence(self.grid, what));
                self.ramps.order(what);
                if let Helm::Stewards(crew) = &mut self.helm {
                    crew.order(tick, what, self.play.run.tick_s);
                }
            }
        }
    }

    fn finish(mut self, stopped: bool) -> Attended {
        let lost = match &mut self.helm {
            Helm::Stewards(crew) => std::mem::take(&mut crew.lost),
            Helm::Baseline(_) => Vec::new(),
        };
        let crew = match &self.helm {
            Helm::Stewards(crew) => Some(crew.as_ref()),
            Helm::Baseline(_) => None,
        };
        let recording = self.recorder.finish(self.grid, &self.plant, &self.ramps, crew, stopped);
        Attended { recording, lost }
    }
}
