//! Hedgerow: rehearse, judge and report area frequency control with real stewards.
//!
//! Data flow: `case` reads grid and play files; `charter` turns each area into
//! the bytes its steward boots with; `rehearsal` runs plant, links and stewards
//! tick by tick and leaves a `record`; `judge` holds the end against an
//! independent optimum; `report` writes it down; `cli` is the thin front.

pub mod baseline;
pub mod bench;
pub mod case;
pub mod charter;
pub mod cli;
pub mod divide;
pub mod fit;
pub mod grid;
pub mod judge;
pub mod link;
pub mod margins;
pub mod plant;
pub mod record;
pub mod rehearsal;
pub mod report;
pub mod sweep;
