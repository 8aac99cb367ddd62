//! Writes the record of a run: samples per tick, extremes per plant step, the story.

use super::balance::area_freq_dev_hz;
use super::crew::Crew;
use super::ramps::Ramps;
use crate::case::model::{Grid, Play, UnitStatus};
use crate::plant::Plant;
use crate::record::{
    CheckedProof, Extreme, Extremes, FinalState, FrameCounts, Recording, SaidVerdict, Scheme,
    Series, Told,
};
use hedgerow_protocol::message::Verdict;
use std::collections::VecDeque;

/// Loading above which a line counts as over its rating: 0.1 % is metering, not heat.
const OVER_RATING: f64 = 1.001;
/// Band inside which frequency counts as settled, Hz.
const SETTLED_HZ: f64 = 0.01;
/// Window of the steepest slope, s.
const SLOPE_WINDOW_S: f64 = 0.5;

/// Writes a [`Recording`].
pub struct Recorder {
    recording: Recording,
    nominal_hz: f64,
    step_s: f64,
    /// Area frequencies of the last window, oldest first.
    window: VecDeque<Vec<f64>>,
    window_len: usize,
}

impl Recorder {
    /// An empty record.
    pub fn new(grid: &Grid, play: &Play, scheme: Scheme, plant: &Plant) -> Self {
        let (areas, lines, units, feeders) =
            (grid.areas.len(), grid.lines.len(), grid.units.len(), grid.feeders.len());
        let at = |value: f64| Extreme { value, index: 0, at_s: 0.0 };
        let series = Series {
            area_freq_dev_hz: vec![Vec::new(); areas],
            line_flow_mw: vec![Vec::new(); lines],
            unit_output_mw: vec![Vec::new(); units],
            unit_setpoint_mw: vec![Vec::new(); units],
            feeder_shed_mw: vec![Vec::new(); feeders],
            schedule_mw: vec![Vec::new(); lines],
            rung: vec![Vec::new(); areas],
            verdict: vec![Vec::new(); areas],
            proven_mw: vec![Vec::new(); areas],
            times_s: Vec::new(),
        };
        let extremes = Extremes {
            lowest_frequency_hz: at(grid.nominal_hz),
            highest_frequency_hz: at(grid.nominal_hz),
            steepest_hz_per_s: at(0.0),
            worst_loading: at(0.0),
            over_rating_s: 0.0,
            settled_s: 0.0,
        };
        let recording = Recording {
            scheme,
            play: play.name.clone(),
            title: play.title.clone(),
            seed: play.run.seed,
            duration_s: 0.0,
            tick_s: play.run.tick_s,
            stopped: false,
            series,
            extremes,
            worst_rung: vec![0; areas],
            frames: vec![FrameCounts::default(); areas],
            proofs: Vec::new(),
            story: Vec::new(),
            end: end_of(grid, plant, None),
        };
        let step_s = play.run.plant_step_s;
        Self {
            recording,
            nominal_hz: grid.nominal_hz,
            step_s,
            window: VecDeque::new(),
            window_len: (SLOPE_WINDOW_S / step_s).round().max(1.0) as usize,
        }
    }

    /// Add a sentence to the story.
    pub fn tell(&mut self, at_s: f64, text: String) {
        self.recording.story.push(Told { at_s, text });
    }

    /// Add a checked proof, and say so.
    pub fn proof(&mut self, grid: &Grid, proof: CheckedProof) {
        let rung = super::tell::rung_word(proof.rung);
        let name = &grid.areas[proof.area].name;
        let verdict = if proof.accepted { "holds" } else { "does NOT hold" };
        self.tell(
            proof.at_s,
            format!(
                "{name} proves {rung} impossible, short by {:.2} MW; re-checked: {verdict} ({:.2} MW)",
                proof.claimed_mw, proof.verified_mw
            ),
        );
        self.recording.proofs.push(proof);
    }

    /// Take a sample.
    pub fn sample(
        &mut self,
        grid: &Grid,
        now_s: f64,
        plant: &Plant,
        ramps: &Ramps,
        crew: Option<&Crew>,
    ) {
        let series = &mut self.recording.series;
        series.times_s.push(now_s);
        push_each(&mut series.area_freq_dev_hz, &area_freq_dev_hz(grid, plant));
        push_each(&mut series.line_flow_mw, plant.line_flow_mw());
        push_each(&mut series.unit_output_mw, plant.unit_output_mw());
        push_each(&mut series.unit_setpoint_mw, plant.unit_reference_mw());
        push_each(&mut series.feeder_shed_mw, plant.feeder_shed_mw());
        for (line, values) in series.schedule_mw.iter_mut().enumerate() {
            values.push(ramps.schedule_mw(line));
        }
        for area in 0..grid.areas.len() {
            let report = crew.map(|crew| crew.report(area));
            let rung = report.map_or(0, |report| report.rung.number());
            series.rung[area].push(rung);
            series.verdict[area].push(report.map_or(SaidVerdict::Working, |r| said(r.verdict)));
            series.proven_mw[area].push(report.map_or(0.0, |report| report.proven_mw));
            let worst = &mut self.recording.worst_rung[area];
            *worst = (*worst).max(rung);
        }
    }

    /// A step of the plant has been made.
    pub fn step(&mut self, grid: &Grid, plant: &Plant) {
        let now_s = plant.time_s();
        let extremes = &mut self.recording.extremes;
        let buses = plant.bus_freq_dev_hz().iter().zip(plant.bus_island()).enumerate();
        for (index, (&freq, _)) in buses.filter(|(_, (_, island))| island.is_some()) {
            let value = self.nominal_hz + freq;
            if value < extremes.lowest_frequency_hz.value {
                extremes.lowest_frequency_hz = Extreme { value, index, at_s: now_s };
            }
            if value > extremes.highest_frequency_hz.value {
                extremes.highest_frequency_hz = Extreme { value, index, at_s: now_s };
            }
        }
        let mut over = false;
        for (index, (line, &flow)) in grid.lines.iter().zip(plant.line_flow_mw()).enumerate() {
            let value = flow.abs() / line.rating_mw;
            over |= value > OVER_RATING;
            if value > extremes.worst_loading.value {
                extremes.worst_loading = Extreme { value, index, at_s: now_s };
            }
        }
        if over {
            extremes.over_rating_s += self.step_s;
        }
        let areas = area_freq_dev_hz(grid, plant);
        if areas.iter().any(|freq| freq.abs() > SETTLED_HZ) {
            extremes.settled_s = now_s;
        }
        self.note_slopes(now_s, areas);
        self.recording.duration_s = now_s;
    }

    fn note_slopes(&mut self, now_s: f64, areas: Vec<f64>) {
        if self.window.len() == self.window_len {
            if let Some(oldest) = self.window.pop_front() {
                for (index, (new, old)) in areas.iter().zip(&oldest).enumerate() {
                    let value = (new - old) / SLOPE_WINDOW_S;
                    let steepest = &mut self.recording.extremes.steepest_hz_per_s;
                    if value.abs() > steepest.value.abs() {
                        *steepest = Extreme { value, index, at_s: now_s };
                    }
                }
                self.window.push_back(areas);
            }
        } else {
            self.window.push_back(areas);
        }
    }

    /// Close the record.
    pub fn finish(
        mut self,
        grid: &Grid,
        plant: &Plant,
        ramps: &Ramps,
        crew: Option<&Crew>,
        stopped: bool,
    ) -> Recording {
        self.recording.stopped = stopped;
        self.recording.end = end_of(grid, plant, Some((ramps, crew)));
        if let Some(crew) = crew {
            let frames = (0..grid.areas.len()).map(|area| crew.frames(area));
            self.recording.frames = frames.collect();
        }
        self.recording
    }
}

fn push_each(series: &mut [Vec<f64>], values: &[f64]) {
    for (values, &value) in series.iter_mut().zip(values) {
        values.push(value);
    }
}

fn said(verdict: Verdict) -> SaidVerdict {
    match verdict {
        Verdict::Settled => SaidVerdict::Settled,
        Verdict::Working => SaidVerdict::Working,
        Verdict::Impossible => SaidVerdict::Impossible,
        Verdict::Blind => SaidVerdict::Blind,
    }
}

fn end_of(grid: &Grid, plant: &Plant, helm: Option<(&Ramps, Option<&Crew>)>) -> FinalState {
    let crew = helm.and_then(|(_, crew)| crew);
    let alive = |area: usize| crew.is_none_or(|crew| crew.is_alive(area));
    let schedule_mw: Vec<f64> = (0..grid.lines.len())
        .map(|line| helm.map_or(0.0, |(ramps, _)| ramps.schedule_mw(line)))
        .collect();
    let base =
        |unit: usize| helm.map_or(grid.units[unit].base_mw, |(ramps, _)| ramps.base_mw(unit));
    let black = grid.buses.iter().zip(plant.bus_island()).zip(plant.bus_load_mw());
    FinalState {
        bus_island: plant.bus_island().to_vec(),
        island_freq_dev_hz: island_freq_dev_hz(plant),
        island_can_regulate: island_can_regulate(grid, plant, &alive),
        bus_load_mw: plant.bus_load_mw().to_vec(),
        line_closed: plant.line_closed().to_vec(),
        unit_in_service: plant.unit_in_service().to_vec(),
        unit_base_mw: (0..grid.units.len()).map(base).collect(),
        unit_setpoint_mw: plant.unit_reference_mw().to_vec(),
        unit_output_mw: plant.unit_output_mw().to_vec(),
        feeder_shed_mw: plant.feeder_shed_mw().to_vec(),
        feeder_locked: locked(grid, crew),
        line_flow_mw: plant.line_flow_mw().to_vec(),
        agreed_mw: agreed_mw(&schedule_mw, crew),
        schedule_mw,
        rung: (0..grid.areas.len())
            .map(|area| crew.map_or(0, |crew| crew.report(area).rung.number()))
            .collect(),
        steward_alive: (0..grid.areas.len()).map(alive).collect(),
        black_load_mw: black
            .filter(|((_, island), _)| island.is_none())
            .map(|((bus, _), _)| bus.load_mw)
            .fold(0.0, |sum, load_mw| sum + load_mw),
    }
}

fn island_freq_dev_hz(plant: &Plant) -> Vec<f64> {
    let mut sums = vec![[0.0_f64; 4]; plant.island_count()];
    let values = plant.bus_freq_dev_hz().iter().zip(plant.bus_inertia());
    for (island, (&freq, &inertia)) in plant.bus_island().iter().zip(values) {
        if let Some(island) = *island {
            let [weighted, weight, plain, count] = &mut sums[island];
            *weighted += inertia * freq;
            *weight += inertia;
            *plain += freq;
            *count += 1.0;
        }
    }
    let mean = |[weighted, weight, plain, count]: [f64; 4]| {
        if weight > 0.0 { weighted / weight } else { plain / f64::max(count, 1.0) }
    };
    sums.into_iter().map(mean).collect()
}

/// An island can regulate when it holds a unit that a live controller may move.
fn island_can_regulate(grid: &Grid, plant: &Plant, alive: &dyn Fn(usize) -> bool) -> Vec<bool> {
    let mut able = vec![false; plant.island_count()];
    for (unit, &on) in grid.units.iter().zip(plant.unit_in_service()) {
        let movable = on
            && unit.status == UnitStatus::Available
            && unit.min_mw < unit.max_mw
            && alive(grid.buses[unit.bus].area);
        if let (true, Some(island)) = (movable, plant.bus_island()[unit.bus]) {
            able[island] = true;
        }
    }
    able
}

fn locked(grid: &Grid, crew: Option<&Crew>) -> Vec<bool> {
    let mut out = vec![false; grid.feeders.len()];
    for area in crew.iter().flat_map(|crew| crew.areas()) {
        let report = crew.map(|crew| crew.report(area.index));
        for (place, &feeder) in area.feeders.iter().enumerate() {
            out[feeder] = report.is_some_and(|report| report.feeder_locked[place]);
        }
    }
    out
}

/// Flow both ends last agreed on: schedule, or the mean of the two ends' deviations while both hold the tie open.
fn agreed_mw(schedule_mw: &[f64], crew: Option<&Crew>) -> Vec<f64> {
    let mut out = schedule_mw.to_vec();
    let mut ends = vec![Vec::new(); schedule_mw.len()];
    for area in crew.iter().flat_map(|crew| crew.areas()) {
        let Some(report) = crew.map(|crew| crew.report(area.index)) else { continue };
        for (place, &line) in area.ties.iter().enumerate() {
            if report.tie_open[place] {
                ends[line].push(report.tie_deviation_mw[place]);
            }
        }
    }
    for (agreed, ends) in out.iter_mut().zip(&ends) {
        if let [one, other] = ends[..] {
            *agreed += 0.5 * (one + other);
        }
    }
    out
}
