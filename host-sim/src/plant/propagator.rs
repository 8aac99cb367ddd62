//! The equations of motion of one switch position, stepped exactly.
//!
//! Contract: built once per switch position and shared; holds no state. Buses
//! are inertial (angle and speed are states), damped (angle is a state) or
//! algebraic (angle eliminated). A unit that is free and has a lag adds a
//! state; a free unit without lag adds its droop to its bus's damping; a unit
//! at a limit is a constant injection.
//!
//! | code | symbol | meaning | shape | unit |
//! |---|---|---|---|---|
//! | state | x | angles of kept buses, speeds of inertial ones, outputs of lagged units | n | rad, rad/s, MW |
//! | `angle_map` | T | angles of algebraic buses from kept ones | na x nk | 1 |
//! | `injection_map` | Z | angles of algebraic buses from their injections | na x na | rad/MW |
//! | `response` | h phi1(hA) | state change from the derivative at the start | n x n | s |
//! | `ramp_response` | h phi2(hA) B | state change from a unit's change of reference | n x units | per MW |

use nalgebra::DMatrix;

use super::constants::Constants;
use super::dense::Square;
use super::exponential::phi_functions;
use super::topology::{Islands, Mode, Switches};

/// A bus whose damping would settle it within this share of a step is algebraic.
///
/// Below it the doublings of the exponential would cost more digits than the
/// damping is worth (at 10 ms and 20 GW/rad: 1.3 kW per Hz).
const SETTLES_AT_ONCE: f64 = 1e-6;

/// Scale of speeds and outputs against angles while exponentials are taken:
/// powers of two near the usual swing frequency (rad/s) and unit size (MW).
const SPEED_SCALE: f64 = 32.0;
const OUTPUT_SCALE: f64 = 128.0;

/// How a live line joins two buses.
#[derive(Clone, Copy, Debug)]
pub struct LiveLine {
    pub line: usize,
    pub from: usize,
    pub to: usize,
    /// MW per rad.
    pub susceptance: f64,
}

/// Equations of motion of one switch position.
#[derive(Clone, Debug)]
pub struct Propagator {
    pub islands: Islands,
    /// Inertia of every bus in MW s^2/rad.
    pub bus_inertia: Vec<f64>,
    /// Live buses with angle states, inertial ones first.
    pub kept: Vec<usize>,
    pub inertial_count: usize,
    /// Damping of the kept buses in MW s/rad, droop without lag included.
    pub damping: Vec<f64>,
    pub algebraic: Vec<usize>,
    /// Free units with a lag.
    pub lagged: Vec<usize>,
    /// Free units without one.
    pub instant: Vec<usize>,
    /// Units held at a limit.
    pub clipped: Vec<usize>,
    /// (unit, position of its bus among the algebraic ones)
    pub algebraic_units: Vec<(usize, usize)>,
    pub lines: Vec<LiveLine>,
    /// Position among the kept buses of each island's reference bus.
    pub reference: Vec<usize>,
    pub angle_map: Vec<f64>,
    pub injection_map: Vec<f64>,
    pub response: Vec<f64>,
    pub ramp_response: Vec<f64>,
}

impl Propagator {
    /// Number of states.
    pub fn size(&self) -> usize {
        self.kept.len() + self.inertial_count + self.lagged.len()
    }

    /// Column of the ramp response of a unit.
    pub fn ramp_column(&self, unit: usize) -> &[f64] {
        let size = self.size();
        &self.ramp_response[unit * size..(unit + 1) * size]
    }

    /// Build the equations; none if the network matrix is singular.
    pub fn new(constants: &Constants, switches: &Switches) -> Option<Self> {
        let mut propagator = Self::classify(constants, switches);
        let network = Reduced::new(&propagator)?;
        propagator.angle_map = network.angle_map.as_slice().to_vec();
        propagator.injection_map = network.injection_map.as_slice().to_vec();
        let equations = Equations::new(constants, &propagator, &network);
        equations.discretise(constants.step_s, &mut propagator);
        let finite = |values: &[f64]| values.iter().all(|value| value.is_finite());
        (finite(&propagator.response) && finite(&propagator.ramp_response)).then_some(propagator)
    }

    /// Sort buses, lines and units into their classes.
    fn classify(constants: &Constants, switches: &Switches) -> Self {
        let islands = switches.islands(constants);
        let bus_inertia = switches.inertia(constants, &islands);
        let lines = live_lines(constants, switches, &islands);
        let damping = bus_damping(constants, switches, &islands);
        let mut stiffness = vec![0.0; bus_inertia.len()];
        for line in &lines {
            stiffness[line.from] += line.susceptance.abs();
            stiffness[line.to] += line.susceptance.abs();
        }
        let is_inertial = |&bus: &usize| bus_inertia[bus] > 0.0;
        let threshold = SETTLES_AT_ONCE * constants.step_s;
        let is_damped = |&bus: &usize| damping[bus] > threshold * stiffness[bus];
        let live = (0..bus_inertia.len()).filter(|&bus| islands.of_bus[bus].is_some());
        let (mut kept, rest): (Vec<_>, Vec<_>) = live.partition(is_inertial);
        let inertial_count = kept.len();
        let (damped, algebraic): (Vec<_>, Vec<_>) = rest.into_iter().partition(is_damped);
        kept.extend(damped);
        let mut propagator = Self {
            damping: kept.iter().map(|&bus| damping[bus]).collect(),
            reference: reference_positions(&islands, &bus_inertia, &kept),
            islands,
            bus_inertia,
            kept,
            inertial_count,
            algebraic,
            lagged: Vec::new(),
            instant: Vec::new(),
            clipped: Vec::new(),
            algebraic_units: Vec::new(),
            lines,
            angle_map: Vec::new(),
            injection_map: Vec::new(),
            response: Vec::new(),
            ramp_response: Vec::new(),
        };
        propagator.sort_units(constants, switches);
        propagator
    }

    fn sort_units(&mut self, constants: &Constants, switches: &Switches) {
        for (unit, data) in switches.live_units(constants, &self.islands) {
            match switches.mode[unit] {
                Mode::Free if data.lag_s > 0.0 => self.lagged.push(unit),
                Mode::Free => self.instant.push(unit),
                Mode::High | Mode::Low => self.clipped.push(unit),
            }
            if let Some(at) = self.algebraic.iter().position(|&bus| bus == data.bus) {
                self.algebraic_units.push((unit, at));
            }
        }
    }
}

fn live_lines(constants: &Constants, switches: &Switches, islands: &Islands) -> Vec<LiveLine> {
    constants
        .line_ends
        .iter()
        .enumerate()
        .filter(|&(line, &(from, to))| {
            switches.line_closed[line] && from != to && islands.of_bus[from].is_some()
        })
        .map(|(line, &(from, to))| LiveLine {
            line,
            from,
            to,
            susceptance: constants.susceptance[line],
        })
        .collect()
}

/// Damping of every bus in MW s/rad: loads, motors, machines, droop without lag.
fn bus_damping(constants: &Constants, switches: &Switches, islands: &Islands) -> Vec<f64> {
    let loads = switches.damping_load_mw(constants);
    let mut damping: Vec<f64> = constants
        .buses
        .iter()
        .zip(loads)
        .map(|(bus, load_mw)| bus.damping + bus.damping_per_mw * load_mw)
        .collect();
    for (unit, data) in switches.live_units(constants, islands) {
        damping[data.bus] += data.damping;
        if data.lag_s == 0.0 && switches.mode[unit] == Mode::Free {
            damping[data.bus] += data.droop_gain;
        }
    }
    damping
}

/// The reference of an island is its bus with the most inertia, the first of equals.
fn reference_positions(islands: &Islands, bus_inertia: &[f64], kept: &[usize]) -> Vec<usize> {
    let mut reference: Vec<Option<usize>> = vec![None; islands.count];
    for (position, &bus) in kept.iter().enumerate() {
        if let Some(island) = islands.of_bus[bus] {
            let heavier =
                reference[island].is_none_or(|best| bus_inertia[bus] > bus_inertia[kept[best]]);
            if heavier {
                reference[island] = Some(position);
            }
        }
    }
    // Every live island has inertia, by the floor at least, so a kept bus.
    reference.into_iter().map(Option::unwrap_or_default).collect()
}

/// The network with its algebraic buses eliminated.
struct Reduced {
    /// MW per rad between kept buses.
    stiffness: DMatrix<f64>,
    angle_map: DMatrix<f64>,
    injection_map: DMatrix<f64>,
}

impl Reduced {
    fn new(propagator: &Propagator) -> Option<Self> {
        let (kept, algebraic) = (propagator.kept.len(), propagator.algebraic.len());
        let mut position = vec![usize::MAX; propagator.bus_inertia.len()];
        let order = propagator.kept.iter().chain(&propagator.algebraic);
        for (index, &bus) in order.enumerate() {
            position[bus] = index;
        }
        let mut full = DMatrix::<f64>::zeros(kept + algebraic, kept + algebraic);
        for line in &propagator.lines {
            let (from, to) = (position[line.from], position[line.to]);
            full[(from, from)] += line.susceptance;
            full[(to, to)] += line.susceptance;
            full[(from, to)] -= line.susceptance;
            full[(to, from)] -= line.susceptance;
        }
        let mut stiffness = full.view((0, 0), (kept, kept)).into_owned();
        let coupling = full.view((kept, 0), (algebraic, kept)).into_owned();
        let own = full.view((kept, kept), (algebraic, algebraic)).into_owned();
        if algebraic == 0 {
            return Some(Self { stiffness, angle_map: coupling, injection_map: own });
        }
        let injection_map = own.lu().try_inverse()?;
        let angle_map = -(&injection_map * &coupling);
        stiffness += coupling.transpose() * &angle_map;
        Some(Self { stiffness, angle_map, injection_map })
    }
}

/// x' = A x + B r with r the references of the units.
struct Equations {
    a: Square,
    /// n x units, column-major.
    b: Vec<f64>,
}

impl Equations {
    fn new(constants: &Constants, propagator: &Propagator, network: &Reduced) -> Self {
        let size = propagator.size();
        let mut equations =
            Self { a: Square::zeros(size), b: vec![0.0; size * constants.units.len()] };
        equations.add_network(propagator, network);
        equations.add_injections(constants, propagator);
        equations.add_governors(constants, propagator);
        equations
    }

    /// Angles, stiffness and damping of the kept buses.
    fn add_network(&mut self, propagator: &Propagator, network: &Reduced) {
        let (kept, inertial) = (propagator.kept.len(), propagator.inertial_count);
        for row in 0..kept {
            let (target, weight) = motion_row(propagator, row);
            for column in 0..kept {
                *self.a.at(target, column) -= network.stiffness[(row, column)] * weight;
            }
            if row < inertial {
                *self.a.at(row, kept + row) = 1.0;
                *self.a.at(target, kept + row) -= propagator.damping[row] * weight;
            }
        }
    }

    /// Where the units' outputs push.
    fn add_injections(&mut self, constants: &Constants, propagator: &Propagator) {
        let first_output = propagator.kept.len() + propagator.inertial_count;
        let size = propagator.size();
        for row in 0..propagator.kept.len() {
            let (target, weight) = motion_row(propagator, row);
            for (index, &unit) in propagator.lagged.iter().enumerate() {
                let share = share_of_kept(propagator, row, constants.units[unit].bus);
                *self.a.at(target, first_output + index) += share * weight;
            }
            for &unit in &propagator.instant {
                let share = share_of_kept(propagator, row, constants.units[unit].bus);
                self.b[unit * size + target] += share * weight;
            }
        }
    }

    /// Lags and droop of the lagged units.
    fn add_governors(&mut self, constants: &Constants, propagator: &Propagator) {
        let first_output = propagator.kept.len() + propagator.inertial_count;
        let size = propagator.size();
        for (index, &unit) in propagator.lagged.iter().enumerate() {
            let data = &constants.units[unit];
            let (row, rate) = (first_output + index, 1.0 / data.lag_s);
            *self.a.at(row, row) -= rate;
            self.b[unit * size + row] = rate;
            for kept in 0..propagator.kept.len() {
                let factor = -data.droop_gain * rate * share_of_kept(propagator, kept, data.bus);
                if factor != 0.0 {
                    self.add_speed_of_kept(kept, factor, row, propagator);
                }
            }
        }
    }

    /// Add factor times the speed of a kept bus to a row; the rows of the
    /// angles hold those speeds.
    fn add_speed_of_kept(&mut self, kept: usize, factor: f64, row: usize, of: &Propagator) {
        let size = of.size();
        for column in 0..size {
            let speed = *self.a.at(kept, column);
            *self.a.at(row, column) += factor * speed;
        }
        for &unit in &of.instant {
            self.b[unit * size + row] += factor * self.b[unit * size + kept];
        }
    }

    /// Step responses, taken in scaled states so that few doublings are needed.
    fn discretise(mut self, step_s: f64, propagator: &mut Propagator) {
        let size = propagator.size();
        let kept = propagator.kept.len();
        let scale: Vec<f64> = (0..size)
            .map(|state| match state {
                _ if state < kept => 1.0,
                _ if state < kept + propagator.inertial_count => SPEED_SCALE,
                _ => OUTPUT_SCALE,
            })
            .collect();
        for column in 0..size {
            for row in 0..size {
                *self.a.at(row, column) *= step_s * scale[column] / scale[row];
            }
        }
        let mut phi = phi_functions(&self.a);
        for column in 0..size {
            for row in 0..size {
                let back = step_s * scale[row] / scale[column];
                *phi.phi1.at(row, column) *= back;
                *phi.phi2.at(row, column) *= back;
            }
        }
        propagator.response = phi.phi1.data;
        propagator.ramp_response = vec![0.0; self.b.len()];
        if size > 0 {
            let columns = propagator.ramp_response.chunks_exact_mut(size);
            for (column, input) in columns.zip(self.b.chunks_exact(size)) {
                super::dense::add_product(column, &phi.phi2.data, input);
            }
        }
    }
}

/// Row that a net injection at a kept bus drives, and one over what resists.
fn motion_row(propagator: &Propagator, kept: usize) -> (usize, f64) {
    if kept < propagator.inertial_count {
        let inertia = propagator.bus_inertia[propagator.kept[kept]];
        (propagator.kept.len() + kept, 1.0 / inertia)
    } else {
        (kept, 1.0 / propagator.damping[kept])
    }
}

/// Part of an injection at `bus` that arrives at a kept bus; equally, the
/// weight of that bus's speed in the speed of `bus`.
fn share_of_kept(propagator: &Propagator, kept: usize, bus: usize) -> f64 {
    match propagator.algebraic.iter().position(|&other| other == bus) {
        Some(at) => propagator.angle_map[kept * propagator.algebraic.len() + at],
        None if propagator.kept[kept] == bus => 1.0,
        None => 0.0,
    }
}
