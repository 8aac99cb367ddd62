//! The steward's laws: properties of its parts and of the whole, on random areas.
//!
//! One binary, a module per part. `PROPTEST_CASES` sets the number of cases
//! (256 by default; the whole-steward runs take a share of it).

#[path = "../common/mod.rs"]
mod common;

mod feeders;
mod kernels;
mod ladder;
mod law;
mod neighbour;
mod network;
mod node;
mod refusals;
mod said;
mod twin;
mod verdict;

use proptest::test_runner::Config;

/// A share of the usual number of cases, for runs that take long.
fn share(of: u32) -> Config {
    let usual = Config::default();
    Config { cases: usual.cases.div_ceil(of), failure_persistence: None, ..usual }
}
