//! Helpers of the outside checks: problems, reference solutions, the law on the bench.

pub mod areas;
pub mod board;
pub mod border;
pub mod detector;
pub mod exact;
pub mod grounded;
pub mod programme;
pub mod table;
