//! `impossible` held against linear programmes: never false, never missed, never moody.
//!
//! Contract: problems sit at a known distance on either side of what is
//! possible; the truth is the least over the set-points of the largest row
//! violation, by clarabel. Ordinary runs take a part; `HEDGEROW_LONG=1` takes all.

mod found;
mod moods;
mod possible;

use hedgerow_tests::border::Border;

/// Pairs of problems; each is a possible and an impossible one.
fn pairs(ordinary: u64, all: u64) -> impl Iterator<Item = Border> {
    let long = std::env::var_os("HEDGEROW_LONG").is_some();
    (0..if long { all } else { ordinary }).filter_map(Border::random)
}
