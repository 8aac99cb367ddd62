//! Re-checks a steward's proof in f64, from charter data and breaker statuses.
//!
//! Contract: the matrix is rebuilt here from the grid, not taken from the
//! steward; only the dual vector, the row limits, the errors allowed for and
//! the ranges come from the proof. The result is the violation in MW that no
//! choice of unknowns inside the ranges can avoid, rounding of f64 neglected
//! (1e-12 pu against a threshold of 2e-3).
//!
//! Data flow: [`Collector`] puts parts together; [`verify`] does the one product.
//!
//! Source: theorem of the alternative, J. Farkas, 1902.

use super::Area;
use crate::case::model::Grid;
use crate::grid::graph::components;
use hedgerow_protocol::message::{ProofPart, ProofVector, Rung};
use nalgebra::{DMatrix, DVector};

/// A whole proof, as heard.
#[derive(Clone, Debug, PartialEq)]
pub struct HeardProof {
    /// Tick at which it was found.
    pub tick: u32,
    /// Rung it speaks of.
    pub rung: Rung,
    /// Local bus to which rows are referred.
    pub root: usize,
    /// Status of the internal lines.
    pub line_closed: Vec<bool>,
    /// Status of the ties.
    pub tie_closed: Vec<bool>,
    /// Shortfall claimed, MW.
    pub claimed_mw: f64,
    /// Dual vector, row limits low and high, row errors, range ends low and high; all in pu.
    pub vectors: [Vec<f64>; 6],
}

/// Puts the parts of proofs together; one proof at a time.
#[derive(Clone, Debug, Default)]
pub struct Collector {
    number: Option<u16>,
    proof: Option<HeardProof>,
    filled: [usize; 6],
}

impl Collector {
    /// Take in a part; the proof when it is whole.
    ///
    /// Parts may come in any order; a part of another proof starts anew.
    pub fn take(&mut self, area: &Area, part: &ProofPart<'_>) -> Option<HeardProof> {
        if self.number != Some(part.proof) {
            self.number = Some(part.proof);
            self.filled = [0; 6];
            let bits = |bits: hedgerow_protocol::message::Bits<'_>, count: usize| {
                (0..count).map(|index| bits.get(index).unwrap_or(false)).collect()
            };
            self.proof = Some(HeardProof {
                tick: part.tick,
                rung: part.rung,
                root: usize::from(part.root),
                line_closed: bits(part.line_closed, area.lines.len()),
                tie_closed: bits(part.tie_closed, area.ties.len()),
                claimed_mw: f64::from(part.claimed_mw),
                vectors: Default::default(),
            });
        }
        let place = ProofVector::ALL.iter().position(|&vector| vector == part.vector)?;
        let vector = &mut self.proof.as_mut()?.vectors[place];
        vector.resize(usize::from(part.total), f64::NAN);
        for (offset, value) in part.values.iter().enumerate() {
            let slot = vector.get_mut(usize::from(part.first) + offset)?;
            if slot.is_nan() {
                self.filled[place] += 1;
            }
            *slot = f64::from(value);
        }
        let rows = rows(area);
        let cols = cols(area);
        let wanted = [rows, rows, rows, rows, cols, cols];
        if self.filled == wanted { self.proof.take() } else { None }
    }
}

/// Number of rows of an area's problem.
pub fn rows(area: &Area) -> usize {
    equalities(area) + area.lines.len()
}

fn equalities(area: &Area) -> usize {
    let meshed = area.meshed.iter().filter(|&&meshed| meshed).count();
    1 + meshed.saturating_sub(1)
}

/// Number of unknowns of an area's problem: units, feeders, two per tie.
pub fn cols(area: &Area) -> usize {
    area.units.len() + area.feeders.len() + 2 * area.ties.len()
}

/// Shortfall in MW that the proof's dual vector proves, recomputed in f64; none when the data do not fit.
pub fn verify(grid: &Grid, area: &Area, proof: &HeardProof) -> Option<f64> {
    let matrix = matrix(grid, area, &proof.line_closed, &proof.tie_closed, proof.root)?;
    let [dual, low, high, error, box_low, box_high] = &proof.vectors;
    let y = DVector::from_column_slice(dual);
    let column = matrix.tr_mul(&y);
    let mut gap = 0.0;
    for ((&c, &low), &high) in column.iter().zip(box_low).zip(box_high) {
        gap += (c * low).min(c * high);
    }
    for (((&y, &low), &high), &error) in dual.iter().zip(low).zip(high).zip(error) {
        gap -= (y * (low - error)).max(y * (high + error));
    }
    let norm: f64 = dual.iter().map(|y| y.abs()).sum();
    let shortfall = gap / norm * grid.base_mva;
    shortfall.is_finite().then_some(shortfall)
}

/// The physical matrix of an area's problem under given statuses, in f64.
///
/// Shapes: rows (balance, angles, lines) x cols (units, feeders, tie deviations,
/// mid-tie angle deviations). None when `root` is no bus of the area.
/// Source: `firmware/src/steward/rows.rs` states the rows; this is a second
/// derivation from the Laplacian.
pub fn matrix(
    grid: &Grid,
    area: &Area,
    line_closed: &[bool],
    tie_closed: &[bool],
    root: usize,
) -> Option<DMatrix<f64>> {
    let n = area.buses.len();
    let kept = kept_piece(area, line_closed, root, &local_ends(grid, area))?;
    let x = inverse_laplacian(grid, area, line_closed, &kept, root)?;
    let mut rows_of_bus = DMatrix::<f64>::zeros(rows(area), n);
    for bus in (0..n).filter(|&bus| kept[bus]) {
        rows_of_bus[(0, bus)] = 1.0;
    }
    let ends = local_ends(grid, area);
    for (place, &line) in area.lines.iter().enumerate() {
        let (from, to) = ends[place];
        if line_closed[place] && kept[from] && kept[to] {
            let row = (x.row(from) - x.row(to)) / grid.lines[line].reactance_pu;
            rows_of_bus.row_mut(equalities(area) + place).copy_from(&row);
        }
    }
    let tie_bus: Vec<usize> = (0..area.ties.len()).map(|tie| tie_bus(grid, area, tie)).collect();
    let attached = |tie: usize| tie_closed[tie] && kept[tie_bus[tie]];
    let meshed: Vec<usize> =
        (0..area.ties.len()).filter(|&tie| area.meshed[tie] && attached(tie)).collect();
    let reactance = |tie: usize| grid.lines[area.ties[tie]].reactance_pu;
    let scale = meshed.len() as f64 / meshed.iter().map(|&tie| reactance(tie)).sum::<f64>();
    for (row, &tie) in meshed.iter().enumerate().skip(1) {
        let difference = (x.row(tie_bus[tie]) - x.row(tie_bus[meshed[0]])) * scale;
        rows_of_bus.row_mut(row).copy_from(&difference);
    }
    let mut out = DMatrix::<f64>::zeros(rows(area), cols(area));
    let (units, feeders) = (area.units.len(), area.feeders.len());
    for (col, bus) in actuator_buses(grid, area).into_iter().enumerate() {
        out.column_mut(col).copy_from(&rows_of_bus.column(bus));
    }
    for tie in (0..area.ties.len()).filter(|&tie| attached(tie)) {
        let (flow, angle) = (units + feeders + tie, units + feeders + area.ties.len() + tie);
        let minus = -rows_of_bus.column(tie_bus[tie]);
        out.column_mut(flow).copy_from(&minus);
        for (row, &other) in meshed.iter().enumerate().skip(1) {
            let sign = f64::from(i8::from(tie == meshed[0]) - i8::from(tie == other));
            out[(row, flow)] += sign * 0.5 * scale * reactance(tie);
            out[(row, angle)] += sign * scale * reactance(tie);
        }
    }
    Some(out)
}

fn actuator_buses(grid: &Grid, area: &Area) -> Vec<usize> {
    let units = area.units.iter().map(|&unit| grid.units[unit].bus);
    let feeders = area.feeders.iter().map(|&feeder| grid.feeders[feeder].bus);
    units.chain(feeders).map(|bus| area.local_bus(bus).unwrap_or(0)).collect()
}

fn tie_bus(grid: &Grid, area: &Area, tie: usize) -> usize {
    let line = &grid.lines[area.ties[tie]];
    let bus = if area.from_end[tie] { line.from } else { line.to };
    area.local_bus(bus).unwrap_or(0)
}

fn local_ends(grid: &Grid, area: &Area) -> Vec<(usize, usize)> {
    let local = |bus: usize| area.local_bus(bus).unwrap_or(0);
    area.lines
        .iter()
        .map(|&line| (local(grid.lines[line].from), local(grid.lines[line].to)))
        .collect()
}

/// Buses that closed internal lines join to the root.
fn kept_piece(
    area: &Area,
    line_closed: &[bool],
    root: usize,
    ends: &[(usize, usize)],
) -> Option<Vec<bool>> {
    let (component, _) = components(area.buses.len(), ends, line_closed);
    let own = *component.get(root)?;
    Some(component.iter().map(|&other| other == own).collect())
}

fn inverse_laplacian(
    grid: &Grid,
    area: &Area,
    line_closed: &[bool],
    kept: &[bool],
    root: usize,
) -> Option<DMatrix<f64>> {
    let n = area.buses.len();
    let mut laplacian = DMatrix::<f64>::zeros(n, n);
    let ends = local_ends(grid, area);
    for (place, &line) in area.lines.iter().enumerate() {
        let ((from, to), b) = (ends[place], 1.0 / grid.lines[line].reactance_pu);
        if line_closed[place] && kept[from] && kept[to] {
            laplacian[(from, from)] += b;
            laplacian[(to, to)] += b;
            laplacian[(from, to)] -= b;
            laplacian[(to, from)] -= b;
        }
    }
    // Grounded and lost buses get a unit row, so that the rest inverts alone.
    for bus in (0..n).filter(|&bus| bus == root || !kept[bus]) {
        laplacian.row_mut(bus).fill(0.0);
        laplacian.column_mut(bus).fill(0.0);
        laplacian[(bus, bus)] = 1.0;
    }
    let mut x = laplacian.try_inverse()?;
    for bus in (0..n).filter(|&bus| bus == root || !kept[bus]) {
        x[(bus, bus)] = 0.0;
    }
    Some(x)
}
