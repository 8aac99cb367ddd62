//! Period and damping of the slowest inter-area swing.
//!
//! Contract: the period and the two areas that swing against each other most
//! come from the undamped swing equations of the grid's base case; the damping
//! is measured on a record: the envelope of that frequency in the difference of
//! the two areas' frequencies, after an event. Other modes fall out of windows of
//! whole periods; what remains of them is why the ratio is a figure, not a proof.
//! Units: MW s^2/rad of inertia, MW/rad of synchronising power.
//! Source: small-signal swing modes and exponential decay, any textbook of power
//! system stability, from memory.

use nalgebra::{DMatrix, DVector};
use serde::Serialize;

use crate::case::model::{Grid, UnitStatus};
use crate::record::Recording;

/// Periods per window of the envelope.
const WINDOW_PERIODS: f64 = 3.0;
/// The envelope counts down to this share of its first value.
const FLOOR_SHARE: f64 = 0.02;
/// Inertia of a bus without any, as a share of the mean of the others: keeps the
/// equations regular; its own modes are far faster than any swing between areas.
const SMALL_INERTIA_SHARE: f64 = 1e-4;

/// A swing between two areas.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Swing {
    /// The two areas.
    pub areas: (usize, usize),
    /// Period in s.
    pub period_s: f64,
    /// Damping ratio; negative = it grows.
    pub damping: f64,
}

/// Period in s and the two areas of the slowest inter-area mode; none for one area.
pub fn slowest_mode(grid: &Grid) -> Option<(f64, (usize, usize))> {
    let inertia = inertia(grid)?;
    let n = inertia.len();
    let mut matrix = DMatrix::<f64>::zeros(n, n);
    for l in grid.lines.iter().filter(|l| l.closed) {
        let b = grid.base_mva / l.reactance_pu;
        for (i, j, value) in
            [(l.from, l.from, b), (l.to, l.to, b), (l.from, l.to, -b), (l.to, l.from, -b)]
        {
            matrix[(i, j)] += value / (inertia[i] * inertia[j]).sqrt();
        }
    }
    let modes = matrix.symmetric_eigen();
    let largest = modes.eigenvalues.amax();
    let mut slowest: Option<(f64, (usize, usize))> = None;
    for (mode, &value) in modes.eigenvalues.iter().enumerate() {
        // Zero: an island turning as a whole.
        if value <= 1e-9 * largest || slowest.as_ref().is_some_and(|s| value >= s.0) {
            continue;
        }
        if let Some(areas) = opposed(grid, &inertia, &modes.eigenvectors.column(mode).into_owned())
        {
            slowest = Some((value, areas));
        }
    }
    slowest.map(|(value, areas)| (std::f64::consts::TAU / value.sqrt(), areas))
}

/// 2 H S / w0 per bus, with a little where nothing turns.
fn inertia(grid: &Grid) -> Option<Vec<f64>> {
    let omega = std::f64::consts::TAU * grid.nominal_hz;
    let mut inertia = vec![0.0; grid.buses.len()];
    for u in grid.units.iter().filter(|u| u.status != UnitStatus::Off) {
        inertia[u.bus] += 2.0 * u.inertia_s * u.rating_mva / omega;
    }
    let mean = inertia.iter().sum::<f64>() / inertia.len().max(1) as f64;
    (mean > 0.0).then(|| inertia.iter().map(|m| m.max(SMALL_INERTIA_SHARE * mean)).collect())
}

/// The areas whose inertia-weighted means move apart most in a mode; none if none do.
fn opposed(grid: &Grid, inertia: &[f64], shape: &DVector<f64>) -> Option<(usize, usize)> {
    let mut sums = vec![(0.0, 0.0); grid.areas.len()];
    for (bus, b) in grid.buses.iter().enumerate() {
        sums[b.area].0 += shape[bus] * inertia[bus].sqrt();
        sums[b.area].1 += inertia[bus];
    }
    let means: Vec<f64> = sums.iter().map(|(s, m)| s / m.max(f64::MIN_POSITIVE)).collect();
    let by = |a: &usize, b: &usize| means[*a].total_cmp(&means[*b]);
    let low = (0..means.len()).min_by(by)?;
    let high = (0..means.len()).max_by(by)?;
    (low != high && means[low] < 0.0 && means[high] > 0.0).then_some((low.min(high), low.max(high)))
}

/// The slowest inter-area swing, with its damping in a record after `from_s`.
pub fn swing(grid: &Grid, run: &Recording, from_s: f64) -> Option<Swing> {
    let (period_s, areas) = slowest_mode(grid)?;
    let series = &run.series;
    let begin = series.times_s.iter().position(|t| *t >= from_s)?;
    let pair = (&series.area_freq_dev_hz[areas.0], &series.area_freq_dev_hz[areas.1]);
    let difference: Vec<f64> =
        pair.0[begin..].iter().zip(&pair.1[begin..]).map(|(x, y)| x - y).collect();
    let damping = damping(&series.times_s[begin..], &difference, period_s)?;
    Some(Swing { areas, period_s, damping })
}

/// Damping ratio of one frequency in a curve: slope of the logarithm of its envelope.
pub fn damping(times_s: &[f64], values: &[f64], period_s: f64) -> Option<f64> {
    let step_s = times_s.get(1)? - times_s.first()?;
    let window = (WINDOW_PERIODS * period_s / step_s).round() as usize;
    let omega = std::f64::consts::TAU / period_s;
    if window < 6 || values.len() < window + 4 {
        return None;
    }
    let envelope: Vec<(f64, f64)> = (0..values.len() - window)
        .map(|from| (times_s[from], amplitude(&values[from..from + window], step_s, omega)))
        .collect();
    let floor = FLOOR_SHARE * envelope.first()?.1;
    let points: Vec<(f64, f64)> = envelope
        .into_iter()
        .take_while(|e| e.1 > floor && e.1 > 0.0)
        .map(|(t, a)| (t, a.ln()))
        .collect();
    if points.len() < 4 {
        return None;
    }
    let count = points.len() as f64;
    let (mean_t, mean_l) =
        points.iter().fold((0.0, 0.0), |(t, l), p| (t + p.0 / count, l + p.1 / count));
    let (top, bottom) = points.iter().fold((0.0, 0.0), |(top, bottom), p| {
        (top + (p.0 - mean_t) * (p.1 - mean_l), bottom + (p.0 - mean_t).powi(2))
    });
    let decay = -top / bottom;
    Some(decay / decay.hypot(omega))
}

/// Amplitude of a frequency in a window, tapered so that others leak little.
fn amplitude(values: &[f64], step_s: f64, omega: f64) -> f64 {
    let count = values.len() as f64;
    let mean = values.iter().sum::<f64>() / count;
    let (mut real, mut imaginary) = (0.0, 0.0);
    for (i, value) in values.iter().enumerate() {
        let taper = 0.5 - 0.5 * (std::f64::consts::TAU * (i as f64 + 0.5) / count).cos();
        let phase = omega * step_s * i as f64;
        real += taper * (value - mean) * phase.cos();
        imaginary += taper * (value - mean) * phase.sin();
    }
    real.hypot(imaginary) / count
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn finds_the_damping_of_one_frequency_beside_another() {
        // Damping ratio 0.05 at 2 s, and a faster swing of the same size beside it.
        let times: Vec<f64> = (0..400).map(|i| 0.05 * f64::from(i)).collect();
        let w = std::f64::consts::PI;
        let decay = 0.05 * w / (1.0_f64 - 0.0025).sqrt();
        let values: Vec<f64> = times
            .iter()
            .map(|t| (-decay * t).exp() * (w * t).sin() + (-0.2 * t).exp() * (4.0 * w * t).sin())
            .collect();
        let found = damping(&times, &values, 2.0).unwrap();
        assert!((found - 0.05).abs() < 0.005, "{found}");
    }

    #[test]
    fn says_nothing_of_a_record_shorter_than_the_windows() {
        let times: Vec<f64> = (0..100).map(|i| 0.1 * f64::from(i)).collect();
        assert_eq!(damping(&times, &vec![1.0; 100], 5.0), None);
    }

    #[test]
    fn the_built_in_grid_swings_between_two_areas_at_a_plausible_period() {
        let (period_s, areas) = slowest_mode(&crate::case::builtin_grid()).unwrap();
        assert!((0.3..5.0).contains(&period_s), "{period_s}");
        assert_ne!(areas.0, areas.1);
    }
}
