//! Base flows of the lossless DC model, for the ratings the format lacks.
//!
//! Contract: one dense solve with the first bus as reference; the residual of
//! every balance is checked, since a line compensated below zero can make the
//! matrix indefinite. Cost: a third of the bus count cubed, once.

use nalgebra::{DMatrix, DVector};

use super::super::model::Line;

/// Largest residual of a bus balance, in pu: far below a tenth of a megawatt.
const RESIDUAL_PU_MAX: f64 = 1e-6;

/// Flow of each line in pu, from `from` to `to`; none if the network has no unique flow.
pub(in crate::case) fn base_flows_pu(injection_pu: &[f64], lines: &[Line]) -> Option<Vec<f64>> {
    let count = injection_pu.len();
    if count < 2 {
        // One bus has no flows, and a matrix of no rows no factors.
        return lines.is_empty().then(Vec::new);
    }
    let mut matrix = DMatrix::<f64>::zeros(count, count);
    for line in lines {
        let susceptance = 1.0 / line.reactance_pu;
        matrix[(line.from, line.from)] += susceptance;
        matrix[(line.to, line.to)] += susceptance;
        matrix[(line.from, line.to)] -= susceptance;
        matrix[(line.to, line.from)] -= susceptance;
    }
    let grounded = matrix.clone().remove_row(0).remove_column(0);
    let right = DVector::from_column_slice(injection_pu.get(1..)?);
    let solved = grounded.lu().solve(&right)?;
    let angles = DVector::from_fn(count, |bus, _| if bus == 0 { 0.0 } else { solved[bus - 1] });
    let residual = &matrix * &angles - DVector::from_column_slice(injection_pu);
    let small = residual.iter().all(|value| value.abs() <= RESIDUAL_PU_MAX);
    let flow = |line: &Line| (angles[line.from] - angles[line.to]) / line.reactance_pu;
    small.then(|| lines.iter().map(flow).collect())
}
