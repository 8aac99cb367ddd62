//! What runs today: droop in the units, and integration of the area control error.
//!
//! Contract: one integrator per area, sampled every `cycle_s`, held in between.
//! ACE = (net interchange - schedule) + beta df, all ties out of the area
//! positive; the area's request goes down by gain * cycle * ACE and is divided
//! among its units by participation, inside their normal ranges. It knows no
//! line limits and sheds no load. Droop alone needs no code here: leave the
//! set-points where they are.
//!
//! Data flow: [`Measured`] -> ACE -> request per area -> set-points per unit.
//! Source: tie-line bias control after N. Cohn, "Control of Generation and
//! Power Flow on Interconnected Systems", 1966, from memory.

use crate::case::model::{Grid, Unit, UnitStatus};

/// How an area's request is divided among its units.
#[derive(Clone, Debug, PartialEq)]
pub enum Participation {
    /// By droop gain, 1/R on the nameplate: units without governor take no part.
    Droop,
    /// By ramp limit, at most the nameplate per cycle (so a battery does not take all).
    Ramp,
    /// By given weights, one per unit of the grid; missing or negative ones are 0.
    Given(Vec<f64>),
}

/// Settings of the scheme, the same for every area.
#[derive(Clone, Debug, PartialEq)]
pub struct Settings {
    /// Time between two samples in s; 4 s is usual.
    pub cycle_s: f64,
    /// Integral gain in MW/s per MW of area control error.
    pub gain_per_s: f64,
    /// How the request is divided.
    pub participation: Participation,
}

impl Default for Settings {
    fn default() -> Self {
        Self { cycle_s: 4.0, gain_per_s: 0.05, participation: Participation::Droop }
    }
}

/// What the control rooms see at a sample; every slice in the grid's order.
#[derive(Clone, Copy, Debug)]
pub struct Measured<'a> {
    /// Flow per line in MW, positive from `from` to `to`; only ties are read.
    pub line_flow_mw: &'a [f64],
    /// Agreed flow per line in MW; only ties are read. An open tie keeps its schedule.
    pub schedule_mw: &'a [f64],
    /// Frequency deviation per area in Hz.
    pub area_freq_dev_hz: &'a [f64],
    /// Units in service.
    pub unit_in_service: &'a [bool],
    /// Base point per unit in MW.
    pub unit_base_mw: &'a [f64],
}

/// A tie as one area sees it.
#[derive(Clone, Copy, Debug)]
struct Tie {
    line: usize,
    /// +1 where the line's direction leads out of the area.
    out: f64,
}

/// The integrators of all areas.
#[derive(Clone, Debug)]
pub struct AreaControlError {
    gain_mw_per_mw: f64,
    beta_mw_per_hz: Vec<f64>,
    ties: Vec<Vec<Tie>>,
    units: Vec<Member>,
    request_mw: Vec<f64>,
    ace_mw: Vec<f64>,
}

/// A unit as its area's control room knows it.
#[derive(Clone, Debug)]
struct Member {
    area: usize,
    weight: f64,
    min_mw: f64,
    max_mw: f64,
}

impl AreaControlError {
    /// Prepare the integrators at rest.
    ///
    /// The frequency bias of an area is its natural answer: droop and damping of
    /// its units in service at the start, and the damping of its loads.
    pub fn new(grid: &Grid, settings: &Settings) -> Self {
        let mut ties = vec![Vec::new(); grid.areas.len()];
        for (line, data) in grid.lines.iter().enumerate() {
            let (from, to) = (grid.buses[data.from].area, grid.buses[data.to].area);
            if from != to {
                ties[from].push(Tie { line, out: 1.0 });
                ties[to].push(Tie { line, out: -1.0 });
            }
        }
        let members = grid.units.iter().enumerate().map(|(unit, data)| Member {
            area: grid.buses[data.bus].area,
            weight: weight(settings, unit, data),
            min_mw: data.min_mw,
            max_mw: data.max_mw,
        });
        Self {
            gain_mw_per_mw: settings.gain_per_s * settings.cycle_s,
            beta_mw_per_hz: natural_bias_mw_per_hz(grid),
            ties,
            units: members.collect(),
            request_mw: vec![0.0; grid.areas.len()],
            ace_mw: vec![0.0; grid.areas.len()],
        }
    }

    /// Frequency bias of each area in MW/Hz, positive.
    pub fn beta_mw_per_hz(&self) -> &[f64] {
        &self.beta_mw_per_hz
    }

    /// Area control error of each area at the last sample, in MW.
    pub fn ace_mw(&self) -> &[f64] {
        &self.ace_mw
    }

    /// What each area asks of its units together beyond their base points, in MW.
    pub fn request_mw(&self) -> &[f64] {
        &self.request_mw
    }

    /// Take a sample and give the set-points in force until the next one, in MW.
    ///
    /// A unit that takes no part gets its base point. An area whose sample is no
    /// number keeps its request. A request that its units cannot follow stops
    /// where they do, so that nothing winds up.
    /// Shapes: one set-point per unit of the grid.
    pub fn cycle(&mut self, measured: &Measured<'_>) -> Vec<f64> {
        let mut setpoint_mw = measured.unit_base_mw.to_vec();
        for area in 0..self.request_mw.len() {
            let ace_mw = self.sample_mw(area, measured);
            if ace_mw.is_finite() {
                self.ace_mw[area] = ace_mw;
                self.request_mw[area] -= self.gain_mw_per_mw * ace_mw;
            }
            self.request_mw[area] = self.divide(area, measured, &mut setpoint_mw);
        }
        setpoint_mw
    }

    fn sample_mw(&self, area: usize, measured: &Measured<'_>) -> f64 {
        let ties = self.ties[area].iter();
        let deviation_mw: f64 = ties
            .map(|tie| tie.out * (measured.line_flow_mw[tie.line] - measured.schedule_mw[tie.line]))
            .sum();
        deviation_mw + self.beta_mw_per_hz[area] * measured.area_freq_dev_hz[area]
    }

    /// Divide an area's request; what it comes to within the units' ranges.
    ///
    /// A unit at the end of its range leaves its part to the others; each pass
    /// takes out at least one unit, so there are at most as many as units.
    fn divide(&self, area: usize, measured: &Measured<'_>, setpoint_mw: &mut [f64]) -> f64 {
        let takes_part = |&unit: &usize| {
            let member = &self.units[unit];
            member.area == area && member.weight > 0.0 && measured.unit_in_service[unit]
        };
        let mut free: Vec<usize> = (0..self.units.len()).filter(takes_part).collect();
        let mut left_mw = self.request_mw[area];
        let mut given_mw = 0.0;
        while !free.is_empty() {
            let total: f64 = free.iter().map(|&unit| self.units[unit].weight).sum();
            let part = |unit: usize| {
                let member = &self.units[unit];
                let base_mw = measured.unit_base_mw[unit];
                let wanted_mw = base_mw + left_mw * member.weight / total;
                let within_mw = wanted_mw.min(member.max_mw).max(member.min_mw);
                (wanted_mw, within_mw, within_mw - base_mw)
            };
            let parts: Vec<_> = free.iter().map(|&unit| part(unit)).collect();
            let excess_mw: f64 = parts.iter().map(|(wanted, within, _)| wanted - within).sum();
            // Only units limited in the direction of the common excess are final
            // (those limited the other way may come free again).
            let is_final = |&(wanted, within, _): &(f64, f64, f64)| {
                wanted != within && (wanted > within) == (excess_mw > 0.0)
            };
            let finish = excess_mw == 0.0 || !parts.iter().any(is_final);
            let mut next = Vec::new();
            for (&unit, part) in free.iter().zip(&parts) {
                setpoint_mw[unit] = part.1;
                if finish || is_final(part) {
                    given_mw += part.2;
                    left_mw -= part.2;
                } else {
                    next.push(unit);
                }
            }
            free = next;
        }
        given_mw
    }
}

/// Weight of a unit in its area's request.
fn weight(settings: &Settings, unit: usize, data: &Unit) -> f64 {
    if data.status != UnitStatus::Available {
        return 0.0;
    }
    let weight = match &settings.participation {
        Participation::Droop => droop_mw_per_hz(data, 1.0),
        Participation::Ramp => data.ramp_mw_per_s.min(data.rating_mva / settings.cycle_s),
        Participation::Given(weights) => weights.get(unit).copied().unwrap_or(0.0),
    };
    if weight.is_finite() { weight.max(0.0) } else { 0.0 }
}

/// 1/R of a unit in MW per Hz; 0 without governor.
fn droop_mw_per_hz(unit: &Unit, nominal_hz: f64) -> f64 {
    match unit.droop_percent {
        Some(percent) if percent > 0.0 => unit.rating_mva * 100.0 / (percent * nominal_hz),
        _ => 0.0,
    }
}

/// beta = sum of 1/R + D per area, in MW/Hz.
fn natural_bias_mw_per_hz(grid: &Grid) -> Vec<f64> {
    let mut beta_mw_per_hz = vec![0.0; grid.areas.len()];
    for bus in &grid.buses {
        beta_mw_per_hz[bus.area] +=
            bus.damping_mw_per_hz + bus.load_mw * bus.load_damping / grid.nominal_hz;
    }
    for unit in &grid.units {
        if unit.status != UnitStatus::Off {
            beta_mw_per_hz[grid.buses[unit.bus].area] += droop_mw_per_hz(unit, grid.nominal_hz)
                + unit.damping_pu * unit.rating_mva / grid.nominal_hz;
        }
    }
    beta_mw_per_hz
}

#[cfg(test)]
mod tests;
