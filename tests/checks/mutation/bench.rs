//! A small closed loop of our own: plant, nodes, and charters with a part taken out.
//!
//! Contract: bytes alone pass between plant and nodes, as in a rehearsal; what
//! is reported of a line, and what is in a charter, can be falsified.

use hedgerow::case::builtin_play;
use hedgerow::case::model::{Grid, Happening, Play};
use hedgerow::charter::{Area, compile};
use hedgerow::plant::Plant;
use hedgerow::rehearsal::HostNode;
use hedgerow_protocol::auth::{Key, REHEARSAL_KEY};
use hedgerow_protocol::charter::{self, CharterReader, CharterWriter, Settings};
use hedgerow_protocol::decoder::FrameDecoder;
use hedgerow_protocol::frame::{self, Header, PLANT};
use hedgerow_protocol::limits::{FRAME_MAX, WIRE_MAX};
use hedgerow_protocol::message::packed::{pack_bits, pack_readings};
use hedgerow_protocol::message::{Measurements, Message, Reading, Rung};

/// A change to the settings of a charter.
pub type Change = fn(&mut Settings);

/// Plant and nodes at work.
pub struct Bench {
    pub grid: Grid,
    pub areas: Vec<Area>,
    pub nodes: Vec<Box<HostNode>>,
    pub plant: Plant,
    /// Line that is reported closed whatever its breaker does.
    pub reported_closed: Option<usize>,
    key: Key,
    play: Play,
    tick: u32,
    counter: u32,
    mail: Vec<(u8, Vec<u8>)>,
}

impl Bench {
    /// A built-in play's grid at rest, with these settings changed in every charter.
    pub fn new(play: &str, change: Change) -> Self {
        let (grid, play) = builtin_play(play).expect("a built-in play");
        let areas = compile(&grid, &play).expect("charters");
        let key = Key::new(&REHEARSAL_KEY);
        let boot = |area: &Area| {
            let mut node = Box::new(HostNode::new(key.clone(), 1));
            node.load(&altered(&area.bytes, change)).expect("the charter is accepted");
            node
        };
        let nodes = areas.iter().map(boot).collect();
        let plant = Plant::new(&grid, play.run.plant_step_s).expect("a plant");
        let mail = Vec::new();
        let reported_closed = None;
        Self { grid, areas, nodes, plant, reported_closed, key, play, tick: 0, counter: 0, mail }
    }

    /// Go on to a time, with the play's events up to there.
    pub fn run_until(&mut self, until_s: f64) {
        while f64::from(self.tick) * self.play.run.tick_s < until_s {
            let now_s = f64::from(self.tick) * self.play.run.tick_s;
            let due = |at_s: f64| (at_s - now_s).abs() < 0.5 * self.play.run.tick_s;
            let events: Vec<Happening> =
                self.play.events.iter().filter(|e| due(e.at_s)).map(|e| e.what.clone()).collect();
            events.iter().for_each(|what| self.happen(what));
            self.step();
        }
    }

    /// Let something happen to the plant.
    pub fn happen(&mut self, what: &Happening) {
        self.plant.apply(what).expect("the plant obeys");
    }

    /// Rung of an area.
    pub fn rung(&self, area: usize) -> Rung {
        self.nodes[area].steward().rung()
    }

    /// Largest loading of a closed line, share of its rating, and its name.
    pub fn worst_loading(&self) -> (f64, &str) {
        let flows = self.plant.line_flow_mw().iter().zip(&self.grid.lines);
        flows
            .map(|(flow, line)| (flow.abs() / line.rating_mw, line.name.as_str()))
            .fold((0.0, ""), |worst, this| if this.0 > worst.0 { this } else { worst })
    }

    /// Largest frequency deviation of a bus, Hz.
    pub fn worst_freq_dev_hz(&self) -> f64 {
        self.plant.bus_freq_dev_hz().iter().fold(0.0, |most, dev| dev.abs().max(most))
    }

    /// One tick: measurements and mail in, orders and mail out, the plant's steps.
    pub fn step(&mut self) {
        for area in 0..self.areas.len() {
            let wire = self.measured(area);
            self.nodes[area].receive(&wire);
        }
        for (to, wire) in std::mem::take(&mut self.mail) {
            self.nodes[usize::from(to) - 1].receive(&wire);
        }
        let Self { nodes, mail, .. } = self;
        let mut to_plant = vec![Vec::new(); nodes.len()];
        for (node, out) in nodes.iter_mut().zip(&mut to_plant) {
            node.tick(self.tick, &mut |to, wire| match to {
                PLANT => out.extend_from_slice(wire),
                _ => mail.push((to, wire.to_vec())),
            });
        }
        for (area, bytes) in to_plant.iter().enumerate() {
            self.obey(area, bytes);
        }
        self.tick += 1;
        let steps = (self.play.run.tick_s / self.play.run.plant_step_s).round() as u32;
        (0..steps).for_each(|_| self.plant.step());
    }

    /// Frames that wait for a node, from its neighbours.
    pub fn mail_for(&self, area: usize) -> Vec<Vec<u8>> {
        let to = self.areas[area].address();
        self.mail.iter().filter(|mail| mail.0 == to).map(|mail| mail.1.clone()).collect()
    }

    /// The measurements of an area, sealed.
    pub fn measured(&mut self, area: usize) -> Vec<u8> {
        let mut room = [[0; 5 * 96]; 6];
        let mut bits = [[0; 16]; 3];
        let [freq, lines, ties, outputs, sheds, loads] = &mut room;
        let [line_bits, tie_bits, unit_bits] = &mut bits;
        let (a, plant, grid) = (&self.areas[area], &self.plant, &self.grid);
        let fresh = |mw: f64| Reading::fresh(mw as f32);
        let flow = plant.line_flow_mw();
        let ends = a.ties.iter().zip(&a.from_end);
        let export = ends.map(|(&tie, &from)| fresh(if from { flow[tie] } else { -flow[tie] }));
        let closed =
            |line: &usize| plant.line_closed()[*line] || self.reported_closed == Some(*line);
        let message = Message::Measurements(Measurements {
            tick: self.tick,
            freq_dev_hz: pack_readings(
                a.meters.iter().map(|&bus| fresh(plant.bus_freq_dev_hz()[bus])),
                freq,
            )
            .expect("room"),
            line_flow_mw: pack_readings(a.lines.iter().map(|&line| fresh(flow[line])), lines)
                .expect("room"),
            tie_flow_mw: pack_readings(export, ties).expect("room"),
            output_mw: pack_readings(
                a.units.iter().map(|&unit| fresh(plant.unit_output_mw()[unit])),
                outputs,
            )
            .expect("room"),
            shed_mw: pack_readings(
                a.feeders.iter().map(|&f| fresh(plant.feeder_shed_mw()[f])),
                sheds,
            )
            .expect("room"),
            feeder_load_mw: pack_readings(
                a.feeders.iter().map(|&f| fresh(grid.feeders[f].load_mw)),
                loads,
            )
            .expect("room"),
            line_closed: pack_bits(a.lines.iter().map(closed), line_bits).expect("room"),
            tie_closed: pack_bits(a.ties.iter().map(closed), tie_bits).expect("room"),
            unit_in_service: pack_bits(
                a.units.iter().map(|&unit| plant.unit_in_service()[unit]),
                unit_bits,
            )
            .expect("room"),
        });
        self.counter += 1;
        let header = Header {
            id: message.id(),
            from: PLANT,
            to: a.address(),
            boot_id: 1,
            peer_boot_id: 1,
            counter: self.counter,
        };
        let (mut raw, mut wire) = (vec![0; FRAME_MAX], vec![0; WIRE_MAX]);
        frame::seal(&header, &message, &self.key, &mut raw, &mut wire).expect("it fits").to_vec()
    }

    /// Hand the orders among some bytes to the plant.
    fn obey(&mut self, area: usize, mut bytes: &[u8]) {
        let mut decoder = FrameDecoder::<WIRE_MAX>::new();
        while let Some(raw) = decoder.feed(&mut bytes) {
            let (_, message) = frame::open(raw, &self.key).expect("our own frames are sound");
            if let Message::Orders(orders) = message {
                for (&unit, mw) in self.areas[area].units.iter().zip(orders.setpoint_mw.iter()) {
                    self.plant.set_unit_setpoint_mw(unit, f64::from(mw));
                }
                for (&feeder, mw) in self.areas[area].feeders.iter().zip(orders.shed_mw.iter()) {
                    self.plant.set_feeder_shed_mw(feeder, f64::from(mw));
                }
            }
        }
    }
}

/// A charter with other settings, its checksum made anew.
fn altered(bytes: &[u8], change: Change) -> Vec<u8> {
    let (mut header, mut reader) = CharterReader::open(bytes).expect("a charter");
    change(&mut header.settings);
    let mut buffer = vec![0; bytes.len() + 16];
    let mut writer = CharterWriter::new(&mut buffer);
    writer.put(&header).expect("room");
    fn copy<'a, T: serde::Serialize + serde::Deserialize<'a>>(
        count: u8,
        reader: &mut CharterReader<'a>,
        writer: &mut CharterWriter<'_>,
    ) {
        for _ in 0..count {
            writer.put(&reader.take::<T>().expect("a record")).expect("room");
        }
    }
    copy::<charter::Line>(header.lines, &mut reader, &mut writer);
    copy::<charter::Tie>(header.ties, &mut reader, &mut writer);
    copy::<charter::Unit>(header.units, &mut reader, &mut writer);
    copy::<charter::Feeder>(header.feeders, &mut reader, &mut writer);
    copy::<charter::Meter>(header.meters, &mut reader, &mut writer);
    while !reader.is_done() {
        writer.put(&reader.take_finite().expect("a figure")).expect("room");
    }
    writer.finish().expect("room").to_vec()
}
