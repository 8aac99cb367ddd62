//! How far each imperfection can go before a play stops settling or breaks a limit.
//!
//! Contract: every run is the closed loop of `rehearsal` with real stewards; one
//! imperfection is raised, all else is as in the play. A margin is found by
//! bisection over several seeds and holds for the play, the seeds and the model.
//! Data flow: `knob` (what is changed, in grid, play or at a steward's ear) ->
//! `trial` (run and hold against the run without imperfection) -> `search`
//! (bisection, map of two) -> `figures`, `page`.
//! Not varied: clock drift (measurements carry the tick they are for, so a
//! drifting board misses them and is late, which the link delay covers).

pub mod figures;
pub mod knob;
pub mod meddle;
pub mod mode;
pub mod page;
pub mod search;
pub mod trial;

use crate::rehearsal::RehearsalError;

/// Why margins could not be found.
#[derive(Debug, thiserror::Error)]
pub enum MarginsError {
    /// A run could not start.
    #[error("the play can not run with {what}: {why}")]
    Run {
        /// What was changed.
        what: String,
        /// Why it can not.
        why: RehearsalError,
    },
    /// The play does not settle to begin with.
    #[error(
        "the play does not settle even without imperfections ({0}): give it more time, or choose another"
    )]
    Unsettled(String),
    /// Threads could not be started.
    #[error("cannot start threads: {0}")]
    Threads(String),
}
