//! The stewards of all areas with their links and the plant's desks.
//!
//! Contract: a dead board hears nothing and says nothing; what was sent to it is
//! lost. Actuators whose steward has been silent for [`SILENCE_S`] follow their
//! own rule of silence.

use super::desk::{Desk, Report};
use super::ramps::Ramps;
use super::recorder::Recorder;
use super::seat::{Gone, Seat, SeatCounts, Source, Staff};
use super::{Lost, RehearsalError, tell};
use crate::case::model::{Grid, Happening, OnSilence, Play, UnitStatus};
use crate::charter::{Area, proof};
use crate::link::{Counted, Direct, FAULTLESS, Faulty, Link, in_process};
use crate::plant::Plant;
use crate::record::{CheckedProof, FrameCounts};
use hedgerow_protocol::auth::{Key, REHEARSAL_KEY};
use hedgerow_protocol::message::{BasePoint, Message, Restore, Schedule};

/// Seconds of silence after which an actuator follows its own rule.
const SILENCE_S: f64 = 2.0;

type Wire = Counted<Faulty<Direct>>;

/// Everything of one area that is not the plant.
struct Post {
    area: Area,
    seat: Option<Box<dyn Seat>>,
    desk: Desk,
    to_steward: Wire,
    from_steward: Wire,
    boots: u32,
    /// Counts of boards that died.
    past: SeatCounts,
    silent_since: u32,
}

/// The stewards at work.
pub struct Crew {
    grid: Grid,
    posts: Vec<Post>,
    /// Link from each area to each neighbour.
    between: Vec<Vec<Option<Wire>>>,
    tick_s: f64,
    staff: Box<dyn Staff>,
    /// Seats that were left empty by themselves.
    pub lost: Vec<Lost>,
}

impl Crew {
    /// Boot a steward for every area with its charter.
    ///
    /// Errors: a steward refuses its charter.
    pub fn new(
        grid: &Grid,
        play: &Play,
        areas: Vec<Area>,
        mut staff: Box<dyn Staff>,
    ) -> Result<Self, RehearsalError> {
        let seed = play.run.seed;
        let plant_faults = if play.links.plant_too { &play.links } else { &FAULTLESS };
        let name = |index: usize| grid.areas[index].name.as_str();
        let mut between: Vec<Vec<Option<Wire>>> = Vec::new();
        for area in &areas {
            let link = |other: usize| {
                area.neighbour.contains(&other).then(|| {
                    let label = format!("{} > {}", name(area.index), name(other));
                    in_process(&play.links, seed, &label)
                })
            };
            between.push((0..grid.areas.len()).map(link).collect());
        }
        let posts = areas.into_iter().map(|area| {
            let label = name(area.index);
            let mut post = Post {
                desk: Desk::new(&area, Key::new(&REHEARSAL_KEY)),
                to_steward: in_process(plant_faults, seed, &format!("plant > {label}")),
                from_steward: in_process(plant_faults, seed, &format!("{label} > plant")),
                seat: None,
                boots: 0,
                past: SeatCounts::default(),
                silent_since: 0,
                area,
            };
            post.boot(label, staff.as_mut())?;
            Ok(post)
        });
        let posts = posts.collect::<Result<Vec<_>, RehearsalError>>()?;
        let (grid, tick_s) = (grid.clone(), play.run.tick_s);
        Ok(Self { grid, posts, between, tick_s, staff, lost: Vec::new() })
    }

    /// The areas with their places.
    pub fn areas(&self) -> impl Iterator<Item = &Area> {
        self.posts.iter().map(|post| &post.area)
    }

    /// What an area's steward last reported.
    pub fn report(&self, area: usize) -> &Report {
        &self.posts[area].desk.report
    }

    /// Whether an area's board is alive.
    pub fn is_alive(&self, area: usize) -> bool {
        self.posts[area].seat.is_some()
    }

    /// Frames of an area so far.
    pub fn frames(&self, area: usize) -> FrameCounts {
        let post = &self.posts[area];
        let own = post.seat.as_ref().map_or(SeatCounts::default(), |seat| seat.counts());
        let mut lost = post.to_steward.tally().lost + post.from_steward.tally().lost;
        for link in self.between[area].iter().flatten() {
            lost += link.tally().lost;
        }
        for links in &self.between {
            lost += links[area].as_ref().map_or(0, |link| link.tally().lost);
        }
        FrameCounts {
            sent: post.past.sent + own.sent,
            lost,
            refused: post.past.refused + own.refused,
        }
    }

    /// Pass an order of the operator on, or let a board die or return.
    pub fn order(&mut self, tick: u32, what: &Happening, tick_s: f64) {
        let ramp_ticks = |ramp_s: f64| (ramp_s / tick_s).round().max(0.0) as u32;
        match *what {
            Happening::Schedule { line, mw, ramp_s } => {
                for post in &mut self.posts {
                    let Some(tie) = post.area.ties.iter().position(|&tie| tie == line) else {
                        continue;
                    };
                    let export = if post.area.from_end[tie] { mw } else { -mw };
                    let message = Message::Schedule(Schedule {
                        tie: tie as u8,
                        export_mw: export as f32,
                        ramp_ticks: ramp_ticks(ramp_s),
                    });
                    post.send(tick, &message);
                }
            }
            Happening::BasePoint { unit, mw, ramp_s } => {
                for post in &mut self.posts {
                    if let Some(place) = post.area.units.iter().position(|&own| own == unit) {
                        let message = Message::BasePoint(BasePoint {
                            unit: place as u8,
                            base_mw: mw as f32,
                            ramp_ticks: ramp_ticks(ramp_s),
                        });
                        post.send(tick, &message);
                    }
                }
            }
            Happening::RestoreLoad { area } => {
                self.posts[area].send(tick, &Message::Restore(Restore { tick }));
            }
            Happening::StewardDies { area } => self.posts[area].die(),
            Happening::StewardReturns { area } => {
                let post = &mut self.posts[area];
                post.die();
                // A board that does not come back leaves its seat empty.
                if let Err(why) = post.boot(&self.grid.areas[area].name, self.staff.as_mut()) {
                    self.lost.push(Lost { area, tick, why: why.to_string() });
                }
            }
            Happening::LinkOutage { areas: (a, b), for_s } => {
                let span = tick..tick + ramp_ticks(for_s);
                for (from, to) in [(a, b), (b, a)] {
                    if let Some(link) = &mut self.between[from][to] {
                        link.inner_mut().silence(span.clone());
                    }
                }
            }
            _ => {}
        }
    }

    /// One tick of talk: measurements out, frames delivered, nodes tick, orders in.
    pub fn exchange(
        &mut self,
        tick: u32,
        plant: &mut Plant,
        ramps: &Ramps,
        recorder: &mut Recorder,
    ) {
        for post in &mut self.posts {
            let wire = post.desk.measure(&self.grid, &post.area, plant, tick);
            post.to_steward.send(tick, wire);
        }
        self.deliver(tick);
        self.act(tick, recorder);
        self.collect(tick, plant, recorder);
        self.mind_silence(tick, plant, ramps);
    }

    fn deliver(&mut self, tick: u32) {
        for (index, post) in self.posts.iter_mut().enumerate() {
            let Post { seat, to_steward, .. } = post;
            let mut hand = |source: Source, bytes: &[u8]| {
                if let Some(seat) = seat {
                    seat.hear(source, bytes);
                }
            };
            to_steward.receive(tick, &mut |bytes| hand(Source::Plant, bytes));
            for links in &mut self.between {
                if let Some(link) = &mut links[index] {
                    link.receive(tick, &mut |bytes| hand(Source::Neighbour, bytes));
                }
            }
        }
    }

    fn act(&mut self, tick: u32, recorder: &mut Recorder) {
        let mut gone: Vec<(usize, Gone)> = Vec::new();
        for (index, post) in self.posts.iter_mut().enumerate() {
            if let Some(Err(why)) = post.seat.as_mut().map(|seat| seat.begin(tick)) {
                gone.push((index, why));
            }
        }
        for (index, (post, links)) in self.posts.iter_mut().zip(&mut self.between).enumerate() {
            let Post { seat, from_steward, .. } = post;
            let Some(seat) = seat.as_mut().filter(|_| gone.iter().all(|(at, _)| *at != index))
            else {
                continue;
            };
            let done = seat.finish(tick, &mut |to, bytes| match usize::from(to).checked_sub(1) {
                None => from_steward.send(tick, bytes),
                Some(area) => {
                    if let Some(link) = links.get_mut(area).and_then(Option::as_mut) {
                        link.send(tick, bytes);
                    }
                }
            });
            if let Err(why) = done {
                gone.push((index, why));
            }
        }
        for (area, Gone(why)) in gone {
            self.posts[area].die();
            let name = &self.grid.areas[area].name;
            recorder
                .tell(f64::from(tick) * self.tick_s, format!("the board of {name} is gone: {why}"));
            self.lost.push(Lost { area, tick, why });
        }
    }

    fn collect(&mut self, tick: u32, plant: &mut Plant, recorder: &mut Recorder) {
        let now_s = f64::from(tick) * self.tick_s;
        let grid = &self.grid;
        for post in &mut self.posts {
            let mut proofs = Vec::new();
            let before = (post.desk.report.rung, post.desk.last_orders);
            let Post { area, desk, from_steward, .. } = post;
            from_steward
                .receive(tick, &mut |bytes| desk.read(area, grid, plant, bytes, &mut proofs));
            let name = &grid.areas[area.index].name;
            if desk.report.rung != before.0 {
                let (from, to) = (before.0.number(), desk.report.rung.number());
                let verb = if to > from { "gives ground" } else { "climbs" };
                let (from, to) = (tell::rung_word(from), tell::rung_word(to));
                recorder.tell(now_s, format!("{name} {verb}: {from} to {to}"));
            }
            if desk.last_orders != before.1 {
                post.silent_since = tick;
            }
            for heard in proofs {
                let verified = proof::verify(grid, area, &heard);
                recorder.proof(grid, checked(area, now_s, &heard, verified));
            }
        }
    }

    /// Actuators of a silent steward follow their own rule.
    fn mind_silence(&mut self, tick: u32, plant: &mut Plant, ramps: &Ramps) {
        for post in &self.posts {
            let silent_s = f64::from(tick.saturating_sub(post.silent_since)) * self.tick_s;
            if silent_s < SILENCE_S {
                continue;
            }
            for &unit in &post.area.units {
                let u = &self.grid.units[unit];
                let rule = (u.status == UnitStatus::Available).then_some(u.on_silence);
                match rule {
                    Some(OnSilence::Schedule) => {
                        plant.set_unit_setpoint_mw(unit, ramps.base_mw(unit));
                    }
                    Some(OnSilence::Zero) => plant.set_unit_setpoint_mw(unit, 0.0),
                    Some(OnSilence::Last) | None => {}
                }
            }
        }
    }
}

impl Post {
    /// Start a fresh board with the area's charter.
    fn boot(&mut self, name: &str, staff: &mut dyn Staff) -> Result<(), RehearsalError> {
        self.boots += 1;
        self.seat = Some(staff.seat(&self.area, name, self.boots)?);
        Ok(())
    }

    fn die(&mut self) {
        if let Some(seat) = self.seat.take() {
            let counts = seat.counts();
            self.past.sent += counts.sent;
            self.past.refused += counts.refused;
        }
    }

    fn send(&mut self, tick: u32, message: &Message<'_>) {
        let wire = self.desk.seal(&self.area, message);
        self.to_steward.send(tick, wire);
    }
}

fn checked(
    area: &Area,
    at_s: f64,
    heard: &proof::HeardProof,
    verified: Option<f64>,
) -> CheckedProof {
    let verified_mw = verified.unwrap_or(-1.0);
    CheckedProof {
        area: area.index,
        at_s,
        rung: heard.rung.number(),
        claimed_mw: heard.claimed_mw,
        verified_mw,
        accepted: verified_mw > 0.0,
    }
}
