//! Bisection for each imperfection, a map over two, and the least iterations.
//!
//! Contract: a value counts as kept when every seed keeps it. Bisection takes
//! kept and broken to be divided by one value, which need not be so; the table
//! says both ends that were tried. Trials run in parallel and are collected in
//! order, so the result does not depend on the number of threads.

use rayon::prelude::*;
use serde::Serialize;

use super::MarginsError;
use super::knob::Knob;
use super::trial::Subject;

/// Halvings of the range: the margin is known to 1/32 of it.
pub const HALVINGS: usize = 5;

/// Margin of one imperfection.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Margin {
    /// The imperfection.
    pub knob: Knob,
    /// Unit of the values.
    pub unit: String,
    /// Largest value that every seed kept.
    pub kept: f64,
    /// Least value that was broken; none if the whole range was kept.
    pub broken: Option<f64>,
    /// What broke there first.
    pub broken_by: Option<String>,
    /// Runs made.
    pub runs: usize,
}

/// Find the margin of an imperfection.
///
/// Errors: a run that can not start.
pub fn margin(subject: &Subject, knob: Knob, seeds: &[u64]) -> Result<Margin, MarginsError> {
    let (mut kept, most) = knob.range(&subject.play);
    let mut found =
        Margin { knob, unit: knob.unit().to_owned(), kept, broken: None, broken_by: None, runs: 0 };
    let mut next = most;
    for _ in 0..=HALVINGS {
        match broken_by(subject, &[(knob, next)], seeds, &mut found.runs)? {
            None => kept = next,
            Some(why) => {
                found.broken = Some(next);
                found.broken_by = Some(why);
            }
        }
        let Some(broken) = found.broken else { break };
        next = 0.5 * (kept + broken);
    }
    found.kept = kept;
    Ok(found)
}

/// The first limit that any seed breaks.
fn broken_by(
    subject: &Subject,
    knobs: &[(Knob, f64)],
    seeds: &[u64],
    runs: &mut usize,
) -> Result<Option<String>, MarginsError> {
    for &seed in seeds {
        *runs += 1;
        if let Err(why) = subject.trial(knobs, seed)? {
            return Ok(Some(format!("{why} (seed {seed})")));
        }
    }
    Ok(None)
}

/// Margins of several imperfections, in parallel.
///
/// `observe` is called after each with how many are done; false stops: what is
/// not begun then is left out.
/// Errors: the first run that can not start.
pub fn margins(
    subject: &Subject,
    knobs: &[Knob],
    seeds: &[u64],
    threads: usize,
    observe: &(dyn Fn() -> bool + Sync),
) -> Result<Vec<Margin>, MarginsError> {
    in_parallel(threads, knobs, &|&knob| {
        let found = observe().then(|| margin(subject, knob, seeds)).transpose();
        observe();
        found
    })
    .map(|found| found.into_iter().flatten().collect())
}

fn in_parallel<T: Sync, R: Send>(
    threads: usize,
    items: &[T],
    run: &(dyn Fn(&T) -> Result<R, MarginsError> + Sync),
) -> Result<Vec<R>, MarginsError> {
    let pool = rayon::ThreadPoolBuilder::new()
        .num_threads(threads)
        .build()
        .map_err(|e| MarginsError::Threads(e.to_string()))?;
    pool.install(|| items.par_iter().with_max_len(1).map(run).collect())
}

/// A map over two imperfections.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Map {
    /// Across.
    pub across: Knob,
    /// Up.
    pub up: Knob,
    /// Values across.
    pub across_values: Vec<f64>,
    /// Values up.
    pub up_values: Vec<f64>,
    /// Whether every seed kept, by value up, then across.
    pub kept: Vec<Vec<bool>>,
}

/// Try every pair of values of two imperfections.
///
/// Errors: a run that can not start.
pub fn map(
    subject: &Subject,
    (across, up): (Knob, Knob),
    steps: usize,
    seeds: &[u64],
    threads: usize,
) -> Result<Map, MarginsError> {
    let values = |knob: Knob| -> Vec<f64> {
        let (low, high) = knob.range(&subject.play);
        (0..steps).map(|i| low + (high - low) * i as f64 / (steps - 1).max(1) as f64).collect()
    };
    let (across_values, up_values) = (values(across), values(up));
    let pairs: Vec<(f64, f64)> =
        up_values.iter().flat_map(|&u| across_values.iter().map(move |&a| (a, u))).collect();
    let cells = in_parallel(threads, &pairs, &|&(a, u)| {
        Ok(broken_by(subject, &[(across, a), (up, u)], seeds, &mut 0)?.is_none())
    })?;
    let kept = cells.chunks(across_values.len()).map(<[bool]>::to_vec).collect();
    Ok(Map { across, up, across_values, up_values, kept })
}

/// Least iterations per tick that every seed keeps, by bisection from the play's.
///
/// Errors: a run that can not start.
pub fn least_iterations(subject: &Subject, seeds: &[u64]) -> Result<u16, MarginsError> {
    let (mut broken, mut kept) = (0, subject.play.steward.iterations);
    while kept - broken > 1 {
        let middle = broken + (kept - broken) / 2;
        let mut fewer = subject.clone();
        fewer.play.steward.iterations = middle;
        match broken_by(&fewer, &[], seeds, &mut 0)? {
            None => kept = middle,
            Some(_) => broken = middle,
        }
    }
    Ok(kept)
}

/// Half of a margin, rounded down to 1, 2 or 5 times a power of ten.
pub fn half_rounded(margin: f64) -> f64 {
    let half = 0.5 * margin;
    if !(half.is_finite() && half > 0.0) {
        return 0.0;
    }
    let power = 10f64.powf(half.log10().floor());
    let step = [5.0, 2.0, 1.0].into_iter().find(|m| m * power <= half * (1.0 + 1e-9));
    step.unwrap_or(1.0) * power
}
