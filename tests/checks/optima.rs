//! The law's resting point held against an interior-point solver.
//!
//! Contract: problems come from a seed or from a table in `tests/data`; the reference never sees the steward. Ordinary runs take a seeded part; `HEDGEROW_LONG=1` takes all.

mod equilibria;
mod seeded;
