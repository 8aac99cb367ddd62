//! The imperfections: what each one changes, in which unit, and how far it is tried.
//!
//! Contract: at its least value a knob changes nothing; more is worse. Random
//! parts (signs of errors) are drawn from the seed by name, so the same seed gives
//! the same error at every size.

use rand::rngs::ChaCha8Rng;
use rand::{Rng, SeedableRng};
use serde::Serialize;

use super::meddle::Meter;
use crate::case::model::{Grid, Play};

/// An imperfection.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Knob {
    /// Delay of the frames between stewards.
    LinkDelay,
    /// Delay of the frames between stewards and of those to and from the plant.
    PlantDelay,
    /// Share of frames lost, plant frames included.
    Loss,
    /// Controller tick.
    Tick,
    /// Lag added to every unit.
    ActuatorLag,
    /// Every unit delivers too much or too little, by random sign.
    ActuatorGain,
    /// Every reactance in the charters is off, by random sign.
    Sensitivity,
    /// Every power meter is off by a share of its reading, by random sign.
    MeterClass,
    /// Readings are refreshed only so often.
    MeterScan,
    /// Noise on every frequency reading.
    FrequencyNoise,
}

/// A run's inputs with imperfections put in.
#[derive(Clone, Debug)]
pub struct Inputs {
    /// Grid of the plant.
    pub grid: Grid,
    /// Grid the charters are made from.
    pub chartered: Grid,
    /// The play.
    pub play: Play,
    /// What happens to measurements on their way.
    pub meter: Meter,
}

impl Knob {
    /// All of them, in the order of the table.
    pub const ALL: [Knob; 10] = [
        Knob::LinkDelay,
        Knob::PlantDelay,
        Knob::Loss,
        Knob::Tick,
        Knob::ActuatorLag,
        Knob::ActuatorGain,
        Knob::Sensitivity,
        Knob::MeterClass,
        Knob::MeterScan,
        Knob::FrequencyNoise,
    ];

    /// Word of the knob, as on the command line.
    pub fn word(self) -> &'static str {
        match self {
            Knob::LinkDelay => "link-delay",
            Knob::PlantDelay => "plant-delay",
            Knob::Loss => "loss",
            Knob::Tick => "tick",
            Knob::ActuatorLag => "actuator-lag",
            Knob::ActuatorGain => "actuator-gain",
            Knob::Sensitivity => "sensitivity",
            Knob::MeterClass => "meter-class",
            Knob::MeterScan => "meter-scan",
            Knob::FrequencyNoise => "frequency-noise",
        }
    }

    /// Unit of its value.
    pub fn unit(self) -> &'static str {
        match self {
            Knob::LinkDelay
            | Knob::PlantDelay
            | Knob::Tick
            | Knob::ActuatorLag
            | Knob::MeterScan => "s",
            Knob::Loss | Knob::ActuatorGain | Knob::Sensitivity | Knob::MeterClass => "%",
            Knob::FrequencyNoise => "mHz",
        }
    }

    /// What it does, for the report.
    pub fn sentence(self) -> &'static str {
        match self {
            Knob::LinkDelay => "delay of frames between stewards",
            Knob::PlantDelay => "delay of all frames, those to and from the plant too",
            Knob::Loss => "share of all frames lost",
            Knob::Tick => "controller tick, iterations per tick unchanged",
            Knob::ActuatorLag => "lag added to every unit",
            Knob::ActuatorGain => "every unit delivers so much too much or too little",
            Knob::Sensitivity => "every reactance in the charters off by so much",
            Knob::MeterClass => "every power meter off by so much of its reading",
            Knob::MeterScan => "readings refreshed only so often, statuses at once",
            Knob::FrequencyNoise => "noise on every frequency reading, up to so much either way",
        }
    }

    /// Least and largest value tried.
    pub fn range(self, play: &Play) -> (f64, f64) {
        match self {
            Knob::LinkDelay => (0.0, 10.0),
            Knob::PlantDelay => (0.0, 4.0),
            Knob::Loss => (0.0, 95.0),
            Knob::Tick => (play.run.tick_s, 40.0 * play.run.tick_s),
            Knob::ActuatorLag => (0.0, 30.0),
            Knob::ActuatorGain => (0.0, 50.0),
            Knob::Sensitivity => (0.0, 90.0),
            Knob::MeterClass => (0.0, 20.0),
            Knob::MeterScan => (0.0, 20.0),
            Knob::FrequencyNoise => (0.0, 500.0),
        }
    }

    /// Put a value in.
    pub fn apply(self, value: f64, seed: u64, inputs: &mut Inputs) {
        let play = &mut inputs.play;
        let ticks = |s: f64, tick_s: f64| (s / tick_s).round().clamp(0.0, 60_000.0) as u16;
        match self {
            Knob::LinkDelay => play.links.delay_ticks = ticks(value, play.run.tick_s),
            Knob::PlantDelay => {
                play.links.delay_ticks = ticks(value, play.run.tick_s);
                play.links.plant_too |= value > 0.0;
            }
            Knob::Loss => {
                play.links.loss = value / 100.0;
                play.links.plant_too |= value > 0.0;
            }
            Knob::Tick => {
                // A whole number of plant steps makes a tick.
                let steps = (value / play.run.plant_step_s).round().max(1.0);
                play.run.tick_s = steps * play.run.plant_step_s;
            }
            Knob::ActuatorLag => inputs.grid.units.iter_mut().for_each(|u| u.lag_s += value),
            Knob::ActuatorGain => {
                let mut signs = Signs::new(seed, "actuators");
                inputs
                    .grid
                    .units
                    .iter_mut()
                    .for_each(|u| u.gain_error = signs.next() * value / 100.0);
            }
            Knob::Sensitivity => {
                let mut signs = Signs::new(seed, "reactances");
                for line in &mut inputs.chartered.lines {
                    line.reactance_pu *= 1.0 + signs.next() * value / 100.0;
                }
            }
            Knob::MeterClass => inputs.meter.class_share = value / 100.0,
            Knob::MeterScan => inputs.meter.scan_ticks = u32::from(ticks(value, play.run.tick_s)),
            Knob::FrequencyNoise => inputs.meter.noise_hz = value / 1000.0,
        }
    }
}

/// A stream of +1 and -1.
pub struct Signs(ChaCha8Rng);

impl Signs {
    /// The stream of a seed and a name.
    pub fn new(seed: u64, name: &str) -> Self {
        let salt =
            name.bytes().fold(seed, |h, b| h.wrapping_mul(0x0000_0100_0000_01b3) ^ u64::from(b));
        Self(ChaCha8Rng::seed_from_u64(salt))
    }

    /// The next sign.
    #[allow(clippy::should_implement_trait, reason = "a stream without an end")]
    pub fn next(&mut self) -> f64 {
        if self.0.next_u32() & 1 == 0 { 1.0 } else { -1.0 }
    }

    /// Evenly from -1 up to 1.
    pub fn even(&mut self) -> f64 {
        f64::from(self.0.next_u32()) / 2_147_483_648.0 - 1.0
    }
}
