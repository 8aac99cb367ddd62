//! Errors between the plant's meters and a steward's ear, and charters that are off.
//!
//! Contract: a frame from the plant is opened, its readings are changed, and it
//! is sealed again with its own header; anything else passes untouched. The
//! steward, its charter format and the loop are those of every other run.

use super::knob::Signs;
use crate::case::model::{Grid, Play};
use crate::charter::{Area, compile};
use crate::rehearsal::{Gone, InProcess, RehearsalError, Seat, SeatCounts, Source, Staff};
use hedgerow_protocol::auth::{Key, REHEARSAL_KEY};
use hedgerow_protocol::cobs;
use hedgerow_protocol::frame;
use hedgerow_protocol::limits::{FRAME_MAX, WIRE_MAX};
use hedgerow_protocol::message::packed::pack_readings;
use hedgerow_protocol::message::{Measurements, Message, Reading, Readings};

/// Errors of an area's meters.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Meter {
    /// Every power meter reads so much of its reading too high or too low.
    pub class_share: f64,
    /// Readings are refreshed every so many ticks; 0 or 1 = always.
    pub scan_ticks: u32,
    /// Frequency readings are off by up to this, drawn anew each tick, in Hz.
    pub noise_hz: f64,
}

impl Meter {
    fn is_exact(&self) -> bool {
        *self == Meter { scan_ticks: self.scan_ticks.min(1), ..Meter::default() }
    }
}

/// Seats stewards whose charters come from another grid and whose meters err.
pub struct Meddled {
    areas: Vec<Area>,
    meter: Meter,
    seed: u64,
}

impl Meddled {
    /// Charters from `chartered`, meters as given.
    ///
    /// Errors: a grid without charters.
    pub fn new(
        chartered: &Grid,
        play: &Play,
        meter: Meter,
        seed: u64,
    ) -> Result<Self, RehearsalError> {
        Ok(Self { areas: compile(chartered, play)?, meter, seed })
    }
}

impl Staff for Meddled {
    fn seat(
        &mut self,
        area: &Area,
        name: &str,
        boot: u32,
    ) -> Result<Box<dyn Seat>, RehearsalError> {
        let chartered = self.areas.get(area.index).unwrap_or(area);
        let inner = InProcess.seat(chartered, name, boot)?;
        if self.meter.is_exact() {
            return Ok(inner);
        }
        Ok(Box::new(MeddledSeat {
            inner,
            meter: self.meter,
            key: Key::new(&REHEARSAL_KEY),
            fixed_seed: self.seed,
            name: name.to_owned(),
            noise: Signs::new(self.seed, &format!("frequency of {name}")),
            scanned: None,
            ticks: 0,
        }))
    }
}

/// Readings of one message, in the order they stand there.
#[derive(Clone, Debug, Default)]
struct Lists([Vec<Reading>; 6]);

struct MeddledSeat {
    inner: Box<dyn Seat>,
    meter: Meter,
    key: Key,
    fixed_seed: u64,
    name: String,
    noise: Signs,
    scanned: Option<Lists>,
    ticks: u32,
}

impl MeddledSeat {
    /// The frame with its readings changed; none if it is no whole measurement.
    fn changed(&mut self, wire: &[u8]) -> Option<Vec<u8>> {
        let mut coded = wire.split_last()?.1.to_vec();
        let len = cobs::decode_in_place(&mut coded)?;
        let (header, message) = frame::open(coded.get(..len)?, &self.key).ok()?;
        let Message::Measurements(measured) = message else { return None };
        let lists = self.read(&measured);
        let mut bytes: [Vec<u8>; 6] = Default::default();
        for (bytes, list) in bytes.iter_mut().zip(&lists.0) {
            bytes.resize(list.len() * 5, 0);
            pack_readings(list.iter().copied(), bytes)?;
        }
        let [freq, line, tie, output, shed, feeder] = &bytes;
        let changed = Message::Measurements(Measurements {
            freq_dev_hz: Readings(freq),
            line_flow_mw: Readings(line),
            tie_flow_mw: Readings(tie),
            output_mw: Readings(output),
            shed_mw: Readings(shed),
            feeder_load_mw: Readings(feeder),
            ..measured
        });
        let (mut raw, mut out) = (vec![0; FRAME_MAX], vec![0; WIRE_MAX]);
        let sealed = frame::seal(&header, &changed, &self.key, &mut raw, &mut out).ok()?;
        Some(sealed.to_vec())
    }

    /// What the meters say: scanned, off by their class, with noise on frequency.
    fn read(&mut self, m: &Measurements<'_>) -> Lists {
        let due = self.meter.scan_ticks < 2 || self.ticks.is_multiple_of(self.meter.scan_ticks);
        self.ticks = self.ticks.wrapping_add(1);
        let now = || {
            let lists = [
                m.freq_dev_hz,
                m.line_flow_mw,
                m.tie_flow_mw,
                m.output_mw,
                m.shed_mw,
                m.feeder_load_mw,
            ];
            Lists(lists.map(|l| l.iter().collect()))
        };
        let scanned = match self.scanned.take() {
            Some(kept) if !due => kept,
            _ => now(),
        };
        self.scanned = Some(scanned.clone());
        let mut lists = scanned;
        // The same meter errs the same way for the whole run.
        let mut signs = Signs::new(self.fixed_seed, &self.name);
        for list in lists.0.iter_mut().skip(1) {
            for reading in list {
                reading.value *= (1.0 + signs.next() * self.meter.class_share) as f32;
            }
        }
        for reading in &mut lists.0[0] {
            reading.value += (self.noise.even() * self.meter.noise_hz) as f32;
        }
        lists
    }
}

impl Seat for MeddledSeat {
    fn hear(&mut self, source: Source, wire: &[u8]) {
        match source {
            Source::Plant => match self.changed(wire) {
                Some(changed) => self.inner.hear(source, &changed),
                None => self.inner.hear(source, wire),
            },
            Source::Neighbour => self.inner.hear(source, wire),
        }
    }

    fn begin(&mut self, tick: u32) -> Result<(), Gone> {
        self.inner.begin(tick)
    }

    fn finish(&mut self, tick: u32, out: &mut dyn FnMut(u8, &[u8])) -> Result<(), Gone> {
        self.inner.finish(tick, out)
    }

    fn counts(&self) -> SeatCounts {
        self.inner.counts()
    }
}
