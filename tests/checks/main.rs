//! Everything that the outside world checks, and whole-program runs.
//!
//! One binary, so that the heavy libraries are linked once. A module per kind
//! of check; data in `tests/data`, helpers in `tests/src`.

mod acceptance;
mod boards;
mod catalogue;
mod closed39;
mod codes;
mod divide;
mod frequency;
mod images;
mod incident;
mod margins;
mod mutation;
mod optima;
mod plays;
mod published;
mod sweep;
mod trajectories;
mod updates;
mod verdicts;
mod worked;
