//! The cases: grids, disturbances, links; and how one is run.

use hedgerow::case::model::{Event, Grid, Happening, Links, Play, Run};
use hedgerow::case::{builtin_play, parse_grid};
use hedgerow::grid::dc::DcNetwork;
use hedgerow::grid::graph::{blocks, components};
use hedgerow::judge::{Judgement, Outcome, judge};
use hedgerow::link::FAULTLESS;
use hedgerow::record::{CheckedProof, Recording, Scheme};
use hedgerow::rehearsal::rehearse;

const GRID: &str = include_str!("../../data/39bus_closed_loop.grid.toml");
/// The disturbance comes at this time, s.
const AT_S: f64 = 1.0;
/// Time back to `keep` after the disturbance is taken away, s.
const BACK_S: f64 = 120.0;
/// Buses of the load steps: one in each area of the three.
const STEP_BUSES: [&str; 3] = ["8", "20", "27"];
/// Sizes of the load steps, MW.
const STEPS_MW: [f64; 3] = [50.0, 150.0, 400.0];
/// Tie lines that the exact division leaves open, by ends.
const OPENED: [(&str, &str); 2] = [("1", "39"), ("14", "15")];
/// Buses of the second area in the division in two; the others are the first.
const SOUTH_WEST: [&str; 14] =
    ["4", "5", "6", "7", "8", "9", "10", "11", "12", "13", "14", "31", "32", "39"];

/// One of the four grids.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Shape {
    pub areas: usize,
    pub divided: bool,
}

pub const SHAPES: [Shape; 4] = [
    Shape { areas: 3, divided: false },
    Shape { areas: 2, divided: false },
    Shape { areas: 3, divided: true },
    Shape { areas: 2, divided: true },
];

impl Shape {
    pub fn word(self) -> String {
        format!("{}{}", if self.divided { "divided-" } else { "meshed-" }, self.areas)
    }

    pub fn grid(self) -> Grid {
        let mut grid = parse_grid(GRID, "39bus_closed_loop.grid.toml").expect("the grid is right");
        if self.areas == 2 {
            merge_areas(&mut grid);
        }
        if self.divided {
            divide(&mut grid);
        }
        grid
    }
}

fn merge_areas(grid: &mut Grid) {
    grid.areas.truncate(2);
    for bus in &mut grid.buses {
        bus.area = usize::from(SOUTH_WEST.contains(&bus.name.as_str()));
    }
}

/// Open the ties, and rate every line 1.3 times its divided base flow (at least 130 MW):
/// the base case is then within ratings, and schedules are the divided flows.
fn divide(grid: &mut Grid) {
    let is_opened =
        |a: &str, b: &str| OPENED.iter().any(|&(x, y)| (a, b) == (x, y) || (a, b) == (y, x));
    let names: Vec<String> = grid.buses.iter().map(|bus| bus.name.clone()).collect();
    for line in &mut grid.lines {
        line.closed = !is_opened(&names[line.from], &names[line.to]);
    }
    let closed: Vec<bool> = grid.lines.iter().map(|line| line.closed).collect();
    let mut injection: Vec<f64> = grid.buses.iter().map(|bus| -bus.load_mw).collect();
    for unit in &grid.units {
        injection[unit.bus] += unit.base_mw;
    }
    let out = injection.iter().sum::<f64>() / injection.len() as f64;
    injection.iter_mut().for_each(|p| *p -= out);
    let flows = DcNetwork::new(grid, &closed).and_then(|dc| dc.flows_mw(&injection));
    let flows = flows.expect("a divided grid has a DC flow").flow_mw;
    for (line, flow) in grid.lines.iter_mut().zip(flows) {
        line.rating_mw = 1.3 * flow.abs().max(grid.base_mva);
    }
}

/// What goes wrong, and how it is taken away again.
#[derive(Clone, Debug)]
pub struct Disturbance {
    pub name: String,
    pub size_mw: f64,
    pub happens: Happening,
    pub ends: Happening,
}

/// Every single-line outage that does not island, every unit trip, nine load steps.
pub fn disturbances(grid: &Grid) -> Vec<Disturbance> {
    let mut out = Vec::new();
    let ends: Vec<(usize, usize)> = grid.lines.iter().map(|line| (line.from, line.to)).collect();
    let closed: Vec<bool> = grid.lines.iter().map(|line| line.closed).collect();
    let bridges = blocks(grid.buses.len(), &ends, &closed).is_bridge;
    assert_eq!(components(grid.buses.len(), &ends, &closed).1, 1);
    for (line, l) in grid.lines.iter().enumerate() {
        if l.closed && !bridges[line] {
            let (a, b) = (&grid.buses[l.from].name, &grid.buses[l.to].name);
            out.push(Disturbance {
                name: format!("line {a}-{b}"),
                size_mw: 0.0,
                happens: Happening::LineTrip { line },
                ends: Happening::LineClose { line },
            });
        }
    }
    for (unit, u) in grid.units.iter().enumerate().filter(|(_, u)| u.energy_mwh.is_none()) {
        out.push(Disturbance {
            name: format!("unit {}", grid.buses[u.bus].name),
            size_mw: u.base_mw,
            happens: Happening::UnitTrip { unit },
            ends: Happening::UnitReturn { unit },
        });
    }
    for bus_name in STEP_BUSES {
        let bus = grid.buses.iter().position(|bus| bus.name == bus_name).expect("a bus");
        for mw in STEPS_MW {
            out.push(Disturbance {
                name: format!("load {bus_name} {mw:+.0}"),
                size_mw: mw,
                happens: Happening::LoadStep { bus, mw },
                ends: Happening::LoadStep { bus, mw: -mw },
            });
        }
    }
    out
}

/// How one case ended.
#[derive(Clone, Debug)]
pub struct Ended {
    pub kept: bool,
    /// Whether the independent solver finds a solution on any rung.
    pub possible: bool,
    /// Whether a steward proved `shed` itself impossible.
    pub said_exhausted: bool,
    pub why: Vec<String>,
    pub rungs: Vec<u8>,
    pub least: Vec<u8>,
    pub shed_mw: f64,
    pub least_shed_mw: f64,
    pub lowest_hz: f64,
    pub settled_s: f64,
    /// A proof for a rung on which the independent solver finds a solution.
    pub false_proofs: usize,
    /// After the disturbance is gone: back at `keep`, judged kept, one climb per rung.
    pub back: Result<(), String>,
}

impl Ended {
    pub fn passes(&self) -> bool {
        let rests = if self.possible { self.kept } else { self.said_exhausted };
        rests && self.false_proofs == 0 && self.back.is_ok()
    }
}

/// Run a case: to rest, and once more with the disturbance taken away.
pub fn run(grid: &Grid, disturbance: &Disturbance, links: &Links) -> Ended {
    let ramps: f64 = grid.units.iter().map(|u| u.ramp_mw_per_s.min(u.rating_mva)).sum();
    let horizon_s = (disturbance.size_mw / ramps * 1.0 + 60.0).clamp(120.0, 300.0);
    let event = |at_s: f64, what: &Happening| Event { at_s, what: what.clone() };
    let mut play = play(links);
    play.run.duration_s = AT_S + horizon_s;
    play.events = vec![event(AT_S, &disturbance.happens)];
    let (recording, judgement) = judged(grid, &play);
    let possible = judgement.beyond_mw.is_none();
    let is_false = |proof: &&CheckedProof| {
        let least = judgement.least_rung[proof.area];
        !proof.accepted || (proof.rung >= least && (possible || proof.rung < 3))
    };
    let false_proofs = recording.proofs.iter().filter(is_false).count();
    play.run.duration_s += BACK_S;
    play.events.push(event(AT_S + horizon_s, &disturbance.ends));
    let (after, after_judgement) = judged(grid, &play);
    Ended {
        // A cut area has no reference for its rung; its limits are judged all the same.
        kept: judgement.outcome == Outcome::Kept && possible,
        why: judgement.broken_by.iter().chain(&judgement.not_judged).cloned().collect(),
        rungs: recording.end.rung.clone(),
        least: judgement.least_rung.clone(),
        shed_mw: judgement.shed_mw,
        least_shed_mw: judgement.least_shed_mw,
        lowest_hz: recording.extremes.lowest_frequency_hz.value,
        settled_s: recording.extremes.settled_s,
        possible,
        said_exhausted: recording.proofs.iter().any(|proof| proof.rung == 3),
        false_proofs,
        back: back(&after, &after_judgement, AT_S + horizon_s),
    }
}

fn judged(grid: &Grid, play: &Play) -> (Recording, Judgement) {
    let recording = rehearse(grid, play, Scheme::Steward, &mut |_| true).expect("it runs");
    let judgement = judge(grid, play, &recording);
    (recording, judgement)
}

fn back(after: &Recording, judgement: &Judgement, gone_s: f64) -> Result<(), String> {
    if after.end.rung.iter().any(|&rung| rung != 0) {
        return Err(format!("still at {:?}", after.end.rung));
    }
    if judgement.outcome != Outcome::Kept {
        return Err(judgement.broken_by.join(" "));
    }
    for (area, rungs) in after.series.rung.iter().enumerate() {
        let after_it = rungs.iter().zip(&after.series.times_s).filter(|(_, t)| **t > gone_s);
        let after_it: Vec<u8> = after_it.map(|(rung, _)| *rung).collect();
        for rung in 0..3 {
            let climbs = after_it.windows(2).filter(|w| w[0] == rung + 1 && w[1] == rung).count();
            if climbs > 1 {
                return Err(format!("area {area} climbed to {rung} {climbs} times"));
            }
        }
    }
    Ok(())
}

fn play(links: &Links) -> Play {
    let (_, builtin) = builtin_play("absorb").expect("a built-in play");
    Play {
        name: "39".to_owned(),
        title: String::new(),
        run: Run { duration_s: 0.0, tick_s: 0.1, plant_step_s: 0.01, seed: 39 },
        links: links.clone(),
        events: Vec::new(),
        ..builtin
    }
}

/// Links without a fault.
pub fn ideal() -> Links {
    FAULTLESS.clone()
}

/// 20 % loss, 5 ticks of delay, duplication and reordering.
pub fn hostile() -> Links {
    Links {
        delay_ticks: 5,
        jitter_ticks: 0,
        loss: 0.2,
        duplicate: 0.1,
        reorder: 0.1,
        corrupt: 0.0,
        plant_too: false,
    }
}
