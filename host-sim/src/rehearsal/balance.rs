//! The baselines in the loop: droop alone, and area control error integration.
//!
//! Contract: the same plant and events as the stewards get; no links, so the
//! comparison is with a scheme whose telemetry never fails. The gain of the
//! integration is not a guess of ours: [`tune`] tries a list of them on three plays
//! and [`TUNED_GAIN_PER_S`] is what it chose, so that nobody beats a straw man.

use super::ramps::Ramps;
use super::{RehearsalError, rehearse_with_gain};
use crate::baseline::{AreaControlError, Measured, Participation, Settings};
use crate::case::model::{Grid, Play, UnitStatus};
use crate::plant::Plant;
use crate::record::{Recording, Scheme};

/// Sampling time of the scheme, s: within the usual 2 to 4 s (common practice, no source).
const CYCLE_S: f64 = 4.0;

/// Gains tried, per s.
pub const GAINS_TRIED_PER_S: [f64; 6] = [0.01, 0.02, 0.05, 0.1, 0.15, 0.2];
/// Built-in plays the gain is chosen on.
pub const TUNING_PLAYS: [&str; 3] = ["absorb", "lean", "stretch"];
/// The gain that [`tune`] chooses of [`GAINS_TRIED_PER_S`] on [`TUNING_PLAYS`], per s.
pub const TUNED_GAIN_PER_S: f64 = 0.1;

/// A baseline at work.
pub struct Balance {
    control: Option<AreaControlError>,
    next_cycle_s: f64,
    held: Vec<f64>,
}

impl Balance {
    /// Droop alone, or with integration at a gain.
    pub fn new(grid: &Grid, scheme: Scheme, gain_per_s: f64) -> Self {
        let settings =
            Settings { cycle_s: CYCLE_S, gain_per_s, participation: Participation::Ramp };
        let control =
            (scheme == Scheme::AreaControlError).then(|| AreaControlError::new(grid, &settings));
        Self { control, next_cycle_s: CYCLE_S, held: Vec::new() }
    }

    /// What the scheme is, in a sentence for the story; none for droop alone.
    pub fn sentence(&self, gain_per_s: f64) -> Option<String> {
        self.control.as_ref().map(|control| {
            let beta: Vec<String> =
                control.beta_mw_per_hz().iter().map(|beta| format!("{beta:.0}")).collect();
            format!(
                "area control error every {CYCLE_S:.0} s, bias 1/R + D = {} MW/Hz, gain {gain_per_s} /s (best of {GAINS_TRIED_PER_S:?} on the plays {}), participation by ramp",
                beta.join(", "),
                TUNING_PLAYS.join(", ")
            )
        })
    }

    /// Sample and order if a cycle is due.
    pub fn cycle(&mut self, grid: &Grid, now_s: f64, plant: &mut Plant, ramps: &Ramps) {
        let Some(control) = &mut self.control else { return };
        if now_s + 1e-9 >= self.next_cycle_s {
            self.next_cycle_s += CYCLE_S;
            let schedule: Vec<f64> = (0..grid.lines.len()).map(|l| ramps.schedule_mw(l)).collect();
            let base: Vec<f64> = (0..grid.units.len()).map(|u| ramps.base_mw(u)).collect();
            let freq = area_freq_dev_hz(grid, plant);
            self.held = control.cycle(&Measured {
                line_flow_mw: plant.line_flow_mw(),
                schedule_mw: &schedule,
                area_freq_dev_hz: &freq,
                unit_in_service: plant.unit_in_service(),
                unit_base_mw: &base,
            });
        }
        for (unit, &mw) in self.held.iter().enumerate() {
            if grid.units[unit].status == UnitStatus::Available {
                plant.set_unit_setpoint_mw(unit, mw);
            }
        }
    }
}

/// Frequency deviation of each area in Hz, weighted by inertia over its live
/// buses, or their plain mean where there is none; 0 where all is dark.
pub fn area_freq_dev_hz(grid: &Grid, plant: &Plant) -> Vec<f64> {
    let mut sums = vec![[0.0_f64; 4]; grid.areas.len()];
    let values = plant.bus_freq_dev_hz().iter().zip(plant.bus_inertia());
    for ((bus, island), (&freq, &inertia)) in grid.buses.iter().zip(plant.bus_island()).zip(values)
    {
        if island.is_some() {
            let [weighted, weight, plain, count] = &mut sums[bus.area];
            *weighted += inertia * freq;
            *weight += inertia;
            *plain += freq;
            *count += 1.0;
        }
    }
    let mean = |[weighted, weight, plain, count]: [f64; 4]| {
        if weight > 0.0 {
            weighted / weight
        } else if count > 0.0 {
            plain / count
        } else {
            0.0
        }
    };
    sums.into_iter().map(mean).collect()
}

/// The gain of a list that leaves the least mean square of frequency deviation
/// and tie deviation over some plays, and that figure for each gain.
///
/// Both deviations count alike when 10 mHz equals 1 MW per tie.
/// Errors: a play can not run.
pub fn tune(
    plays: &[(Grid, Play)],
    gains_per_s: &[f64],
) -> Result<Vec<(f64, f64)>, RehearsalError> {
    let mut out = Vec::new();
    for &gain in gains_per_s {
        let mut figure = 0.0;
        for (grid, play) in plays {
            let scheme = Scheme::AreaControlError;
            let run = rehearse_with_gain(grid, play, scheme, gain, &mut |_| true)?;
            figure += deviation(grid, &run) / plays.len() as f64;
        }
        out.push((gain, figure));
    }
    Ok(out)
}

fn deviation(grid: &Grid, run: &Recording) -> f64 {
    let series = &run.series;
    let samples = series.times_s.len().max(1) as f64;
    let square =
        |values: &mut dyn Iterator<Item = f64>| values.map(|v| v * v).sum::<f64>() / samples;
    let freq: f64 = series
        .area_freq_dev_hz
        .iter()
        .map(|area| square(&mut area.iter().map(|hz| hz / 0.01)))
        .sum();
    let ties =
        (0..grid.lines.len()).filter(|&line| series.schedule_mw[line].iter().any(|&s| s != 0.0));
    let flows: f64 = ties
        .map(|line| {
            let pairs = series.line_flow_mw[line].iter().zip(&series.schedule_mw[line]);
            square(&mut pairs.map(|(flow, schedule)| flow - schedule))
        })
        .sum();
    freq + flows
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::case::builtin_play;

    /// The gain the baseline runs with is the best of the list on the three plays it is tuned on.
    #[test]
    fn stated_gain_is_the_best_of_those_tried() {
        let plays: Vec<_> = TUNING_PLAYS.iter().filter_map(|name| builtin_play(name)).collect();
        assert_eq!(plays.len(), TUNING_PLAYS.len());
        let figures = tune(&plays, &GAINS_TRIED_PER_S).expect("the plays run");
        println!("gain per s, figure: {figures:?}");
        let best = figures.iter().min_by(|a, b| a.1.total_cmp(&b.1)).map(|&(gain, _)| gain);
        assert_eq!(best, Some(TUNED_GAIN_PER_S));
    }
}
