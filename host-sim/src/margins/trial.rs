//! One run with imperfections, held against the run without.
//!
//! Contract: a trial is kept when, over the last tenth of the run, every area's
//! frequency stays within [`REST_HZ`]; at the end no line is above its rating by
//! more than metering and delivery errors explain; no area is on a deeper rung
//! than without imperfection; and no more load is shed than that and one feeder.
//! The first limit that is broken is named.

use super::MarginsError;
use super::knob::{Inputs, Knob};
use super::meddle::{Meddled, Meter};
use crate::case::model::{Grid, Play};
use crate::record::Recording;
use crate::rehearsal::attend;
use crate::report::rung_word;

/// Frequency counts as settled within this, in Hz.
pub const REST_HZ: f64 = 0.01;
/// Share of the run at its end that must be settled.
const TAIL_SHARE: f64 = 0.1;
/// Loading that counts as within the rating with exact meters.
const FULL: f64 = 1.001;

/// A play to be tried.
#[derive(Clone, Debug)]
pub struct Subject {
    /// The grid.
    pub grid: Grid,
    /// The play.
    pub play: Play,
    nominal: End,
}

/// What is compared.
#[derive(Clone, Debug, Default, PartialEq)]
struct End {
    rung: Vec<u8>,
    shed_mw: f64,
}

/// How a trial ended: kept, or the limit that was broken.
pub type Trial = Result<(), String>;

impl Subject {
    /// Run the play as it is; it must settle.
    ///
    /// Errors: a play that does not run or settle.
    pub fn new(grid: Grid, play: Play) -> Result<Self, MarginsError> {
        let mut subject = Self { grid, play, nominal: End::default() };
        let seed = subject.play.run.seed;
        let run = subject.run(&[], seed)?;
        subject.nominal =
            End { rung: run.end.rung.clone(), shed_mw: run.end.feeder_shed_mw.iter().sum() };
        match subject.judge(&run, &[]) {
            Ok(()) => Ok(subject),
            Err(why) => Err(MarginsError::Unsettled(why)),
        }
    }

    /// Run with imperfections.
    ///
    /// Errors: a run that can not start.
    pub fn trial(&self, knobs: &[(Knob, f64)], seed: u64) -> Result<Trial, MarginsError> {
        let run = self.run(knobs, seed)?;
        Ok(self.judge(&run, knobs))
    }

    /// The recording of a run with imperfections.
    ///
    /// Errors: a run that can not start.
    pub fn run(&self, knobs: &[(Knob, f64)], seed: u64) -> Result<Recording, MarginsError> {
        let mut inputs = Inputs {
            grid: self.grid.clone(),
            chartered: self.grid.clone(),
            play: self.play.clone(),
            meter: Meter::default(),
        };
        inputs.play.run.seed = seed;
        for &(knob, value) in knobs {
            knob.apply(value, seed, &mut inputs);
        }
        let words: Vec<String> =
            knobs.iter().map(|(k, v)| format!("{} {v} {}", k.word(), k.unit())).collect();
        let failed = |why| MarginsError::Run { what: words.join(", "), why };
        let staff =
            Meddled::new(&inputs.chartered, &inputs.play, inputs.meter, seed).map_err(failed)?;
        let attended = attend(&inputs.grid, &inputs.play, Box::new(staff), &mut |_| true);
        Ok(attended.map_err(|why| MarginsError::Run { what: words.join(", "), why })?.recording)
    }

    fn judge(&self, run: &Recording, knobs: &[(Knob, f64)]) -> Trial {
        self.settled(run)?;
        let explained: f64 = knobs
            .iter()
            .filter(|(k, _)| matches!(k, Knob::MeterClass | Knob::ActuatorGain | Knob::Sensitivity))
            .map(|(_, value)| value / 100.0)
            .sum();
        for (line, l) in self.grid.lines.iter().enumerate() {
            let loading = run.end.line_flow_mw[line].abs() / l.rating_mw;
            if run.end.line_closed[line] && loading > FULL + explained {
                return Err(format!("line {} at {:.1} % of its rating", l.name, 100.0 * loading));
            }
        }
        for (area, (is, was)) in run.end.rung.iter().zip(&self.nominal.rung).enumerate() {
            if is > was {
                return Err(format!(
                    "{} on rung {} instead of {}",
                    self.grid.areas[area].name,
                    rung_word(*is),
                    rung_word(*was)
                ));
            }
        }
        let shed: f64 = run.end.feeder_shed_mw.iter().sum();
        let feeder = self.grid.feeders.iter().map(|f| f.load_mw).fold(0.0, f64::max);
        if shed > self.nominal.shed_mw + feeder {
            return Err(format!("{shed:.1} MW shed instead of {:.1} MW", self.nominal.shed_mw));
        }
        Ok(())
    }

    fn settled(&self, run: &Recording) -> Trial {
        let samples = run.series.times_s.len();
        let from = samples - ((samples as f64 * TAIL_SHARE).ceil() as usize).min(samples);
        for (area, freq) in run.series.area_freq_dev_hz.iter().enumerate() {
            let tail = freq.get(from..).unwrap_or_default();
            let worst = tail
                .iter()
                .fold(0.0_f64, |m, f| if f.is_finite() { m.max(f.abs()) } else { f64::INFINITY });
            if worst > REST_HZ {
                return Err(format!(
                    "frequency of {} still {:.1} mHz off",
                    self.grid.areas[area].name,
                    1e3 * worst
                ));
            }
        }
        Ok(())
    }
}
