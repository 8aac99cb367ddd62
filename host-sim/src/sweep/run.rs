//! A sweep: tasks spread over cores, rows collected in order.
//!
//! Contract: a task is one outage of one form; it depends on nothing but the
//! plan, so rows are the same bytes whatever the number of threads and wherever
//! a sweep was stopped. Tasks that are given as done are not run again.
//! Data flow: [`Plan`] -> tasks -> rows per task -> [`Swept`] in the plan's order.

use std::collections::BTreeMap;
use std::rc::Rc;
use std::sync::atomic::{AtomicBool, AtomicUsize, Ordering};

use rayon::prelude::*;

use super::cascade::{closed_after, follow};
use super::closed::{self, ClosedLoop};
use super::outage::Outage;
use super::prepare::Prepared;
use super::row::Row;
use super::state::Network;
use super::{Balancing, Form, SweepError};

/// How outages are followed.
#[derive(Clone, Debug, PartialEq)]
pub enum Mode {
    /// Stages of the DC cascade.
    Static,
    /// The whole loop, with real stewards.
    Closed(ClosedLoop),
}

/// What is to be swept.
#[derive(Clone, Debug)]
pub struct Plan {
    /// Grids, factors outermost (see `prepare`).
    pub cases: Vec<Prepared>,
    /// Schemes.
    pub schemes: Vec<Balancing>,
    /// Outages per form; what is out of service in a form is left out there.
    pub outages: Vec<(Form, Vec<Outage>)>,
    /// Static or closed loop.
    pub mode: Mode,
}

/// One outage of one form, under several factors and schemes.
#[derive(Clone, Debug, PartialEq)]
pub struct Task {
    /// The outage.
    pub outage: Outage,
    /// Index of case and scheme of each row.
    pub cells: Vec<(usize, usize)>,
}

/// A task that has ended.
#[derive(Clone, Copy, Debug)]
pub struct Finished<'a> {
    /// Index of the task.
    pub task: usize,
    /// Its rows.
    pub rows: &'a [Row],
    /// Tasks finished so far, earlier runs included.
    pub done: usize,
    /// Tasks in all.
    pub total: usize,
}

/// What a sweep leaves.
#[derive(Clone, Debug, PartialEq)]
pub struct Swept {
    /// Rows by factor, form, scheme and outage, in the plan's order.
    pub rows: Vec<Row>,
    /// Whether it was stopped before its end.
    pub stopped: bool,
}

impl Plan {
    /// The tasks, in order.
    pub fn tasks(&self) -> Vec<Task> {
        let mut tasks = Vec::new();
        for (form, outages) in &self.outages {
            let cases: Vec<usize> =
                (0..self.cases.len()).filter(|&c| self.cases[c].form == *form).collect();
            let cells: Vec<(usize, usize)> =
                cases.iter().flat_map(|&c| (0..self.schemes.len()).map(move |s| (c, s))).collect();
            for &outage in outages {
                match self.mode {
                    Mode::Static => tasks.push(Task { outage, cells: cells.clone() }),
                    // Long runs: one task each, so that little is lost when stopped.
                    Mode::Closed(_) => {
                        tasks.extend(cells.iter().map(|&cell| Task { outage, cells: vec![cell] }));
                    }
                }
            }
        }
        tasks
    }

    /// A number that tells this plan from others, for resuming.
    pub fn fingerprint(&self) -> u64 {
        let mut text = format!("{:?} {:?}", self.schemes, self.mode);
        for (form, outages) in &self.outages {
            text.push_str(&format!("{form:?} {outages:?}"));
        }
        for case in &self.cases {
            text.push_str(&format!("{case:?}"));
        }
        // FNV-1a, 64 bits.
        text.bytes().fold(0xcbf2_9ce4_8422_2325, |h, b| {
            (h ^ u64::from(b)).wrapping_mul(0x0000_0100_0000_01b3)
        })
    }

    /// Run one task.
    ///
    /// Errors: a failed solve, or a closed loop that can not start.
    pub fn run_task(&self, task: &Task) -> Result<Vec<Row>, SweepError> {
        match &self.mode {
            Mode::Static => self.run_static(task),
            Mode::Closed(setting) => task
                .cells
                .iter()
                .map(|&(c, s)| closed::run(&self.cases[c], task.outage, self.schemes[s], setting))
                .collect(),
        }
    }

    fn run_static(&self, task: &Task) -> Result<Vec<Row>, SweepError> {
        let mut first: Option<Rc<Network>> = None;
        let mut rows = Vec::with_capacity(task.cells.len());
        for &(c, s) in &task.cells {
            let case = &self.cases[c];
            let failed = |why: crate::grid::dc::DcError| SweepError::BaseCase {
                form: case.form.word(),
                why: format!("after {}: {why}", task.outage.name(&case.grid)),
            };
            // Factors change ratings only: every cell starts on the same network.
            let network = match &first {
                Some(network) => Rc::clone(network),
                None => {
                    let closed = closed_after(case, task.outage);
                    let made = Rc::new(Network::new(&case.grid, &closed).map_err(failed)?);
                    first = Some(Rc::clone(&made));
                    made
                }
            };
            let ended = follow(case, network, task.outage, self.schemes[s]).map_err(failed)?;
            rows.push(Row::of_cascade(&ended, task.outage, self.schemes[s]));
        }
        Ok(rows)
    }
}

/// Run what is not done yet, on `threads` threads (0 = one per core).
///
/// `observe` is called once per finished task, from any thread; when it returns
/// false no further task is begun.
/// Errors: the first error in the order of tasks.
pub fn sweep(
    plan: &Plan,
    threads: usize,
    mut done: BTreeMap<usize, Vec<Row>>,
    observe: &(dyn Fn(Finished<'_>) -> bool + Sync),
) -> Result<Swept, SweepError> {
    let tasks = plan.tasks();
    let left: Vec<usize> = (0..tasks.len()).filter(|t| !done.contains_key(t)).collect();
    let count = AtomicUsize::new(done.len());
    let stop = AtomicBool::new(false);
    let pool = rayon::ThreadPoolBuilder::new()
        .num_threads(threads)
        .build()
        .map_err(|e| SweepError::Asked(format!("cannot start {threads} threads: {e}")))?;
    let run_one = |&task: &usize| -> Option<Result<(usize, Vec<Row>), SweepError>> {
        if stop.load(Ordering::Relaxed) {
            return None;
        }
        let rows = match plan.run_task(&tasks[task]) {
            Ok(rows) => rows,
            Err(why) => {
                stop.store(true, Ordering::Relaxed);
                return Some(Err(why));
            }
        };
        let done = 1 + count.fetch_add(1, Ordering::Relaxed);
        if !observe(Finished { task, rows: &rows, done, total: tasks.len() }) {
            stop.store(true, Ordering::Relaxed);
        }
        Some(Ok((task, rows)))
    };
    // Small pieces: outages differ a thousandfold in work.
    let results: Vec<_> = pool.install(|| left.par_iter().with_max_len(1).map(run_one).collect());
    for result in results.into_iter().flatten() {
        let (task, rows) = result?;
        done.insert(task, rows);
    }
    let stopped = done.len() < tasks.len();
    Ok(Swept { rows: in_order(&tasks, done), stopped })
}

/// Rows by case, then scheme, then the order of tasks.
fn in_order(tasks: &[Task], done: BTreeMap<usize, Vec<Row>>) -> Vec<Row> {
    let mut keyed: Vec<((usize, usize, usize), Row)> = Vec::new();
    for (task, rows) in done {
        for (&(case, scheme), row) in tasks[task].cells.iter().zip(rows) {
            keyed.push(((case, scheme, task), row));
        }
    }
    keyed.sort_by_key(|(key, _)| *key);
    keyed.into_iter().map(|(_, row)| row).collect()
}
