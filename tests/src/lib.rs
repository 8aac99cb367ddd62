//! Helpers of the outside checks: problems, reference solutions, the law on the bench.

pub mod areas;
pub mod board;
pub mod programme;
pub mod table;
