//! Period and damping of the slowest inter-area swing, from a record.
//!
//! Contract: takes the pair of areas whose frequencies differ most after the
//! last fast event, and fits the logarithm of the difference's extremes over
//! time: a straight line for one damped mode. None where fewer than three
//! extremes stand out.
//! Source: logarithmic decrement, any textbook of vibrations, from memory.

use serde::Serialize;

use crate::record::Recording;

/// Extremes smaller than this share of the largest are left out.
const FLOOR_SHARE: f64 = 0.02;
/// And those below this, in Hz: rounding of the record.
const FLOOR_HZ: f64 = 1e-6;
/// At most so many extremes, the first ones.
const EXTREMES: usize = 10;

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

/// The swing after `from_s`.
pub fn swing(run: &Recording, from_s: f64) -> Option<Swing> {
    let series = &run.series.area_freq_dev_hz;
    let begin = run.series.times_s.iter().position(|t| *t >= from_s)?;
    let difference = |a: usize, b: usize| -> Vec<f64> {
        series[a][begin..].iter().zip(&series[b][begin..]).map(|(x, y)| x - y).collect()
    };
    let pairs = (0..series.len()).flat_map(|a| (a + 1..series.len()).map(move |b| (a, b)));
    let size = |&(a, b): &(usize, usize)| difference(a, b).iter().fold(0.0_f64, |m, d| m.max(d.abs()));
    let areas = pairs.max_by(|x, y| size(x).total_cmp(&size(y)))?;
    let (period_s, damping) = fit(&run.series.times_s[begin..], &difference(areas.0, areas.1))?;
    Some(Swing { areas, period_s, damping })
}

/// Period and damping ratio of a decaying oscillation.
pub fn fit(times_s: &[f64], values: &[f64]) -> Option<(f64, f64)> {
    let largest = values.iter().fold(0.0_f64, |m, v| m.max(v.abs()));
    let floor = (FLOOR_SHARE * largest).max(FLOOR_HZ);
    let mut extremes: Vec<(f64, f64)> = Vec::new();
    for i in 1..values.len().saturating_sub(1) {
        let (a, b, c) = (values[i - 1], values[i], values[i + 1]);
        let turns = (b - a) * (c - b) <= 0.0 && b != a;
        if !turns || b.abs() < floor {
            continue;
        }
        // One extreme per half swing: the larger of neighbours with the same sign.
        match extremes.last_mut() {
            Some(last) if last.1 * b > 0.0 => {
                if b.abs() > last.1.abs() {
                    *last = (times_s[i], b);
                }
            }
            _ => extremes.push((times_s[i], b)),
        }
    }
    extremes.truncate(EXTREMES);
    let [first, .., last] = extremes.as_slice() else { return None };
    if extremes.len() < 3 {
        return None;
    }
    let period_s = 2.0 * (last.0 - first.0) / (extremes.len() - 1) as f64;
    let count = extremes.len() as f64;
    let (mean_t, mean_l) = extremes
        .iter()
        .fold((0.0, 0.0), |(t, l), e| (t + e.0 / count, l + e.1.abs().ln() / count));
    let (top, bottom) = extremes.iter().fold((0.0, 0.0), |(top, bottom), e| {
        let dt = e.0 - mean_t;
        (top + dt * (e.1.abs().ln() - mean_l), bottom + dt * dt)
    });
    let decay = -top / bottom;
    let omega = std::f64::consts::TAU / period_s;
    Some((period_s, decay / decay.hypot(omega)))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn finds_period_and_damping_of_a_made_up_swing() {
        // Damping ratio 0.1 at 2 s: decay = 0.1 w0, w = w0 sqrt(1 - 0.01).
        let times: Vec<f64> = (0..400).map(|i| 0.05 * f64::from(i)).collect();
        let w = std::f64::consts::PI;
        let decay = 0.1 * w / (1.0_f64 - 0.01).sqrt();
        let values: Vec<f64> = times.iter().map(|t| (-decay * t).exp() * (w * t).sin()).collect();
        let (period_s, damping) = fit(&times, &values).unwrap();
        assert!((period_s - 2.0).abs() < 0.02, "{period_s}");
        assert!((damping - 0.1).abs() < 0.005, "{damping}");
    }

    #[test]
    fn says_nothing_of_a_curve_without_swing() {
        let times: Vec<f64> = (0..100).map(f64::from).collect();
        let values: Vec<f64> = times.iter().map(|t| (-0.1 * t).exp()).collect();
        assert_eq!(fit(&times, &values), None);
    }
}
