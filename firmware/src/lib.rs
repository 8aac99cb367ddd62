#![no_std]
#![deny(clippy::unwrap_used, clippy::expect_used, clippy::panic, clippy::indexing_slicing)]
//! The steward: the controller of one area of a grid, in fixed memory.
//!
//! Contract: frames in, frames out. No clock, no port, no allocation, no
//! recursion, no panic path; every loop has a bound visible at the loop. All
//! arithmetic is `f32` with `+ - * /` and comparisons in an order that is ours,
//! so that the same frames give the same bytes on a host and on a board.
//!
//! Data flow in one tick ([`Steward::tick`](steward::Steward::tick)):
//! `measure` checks what arrived and estimates the uncontrolled injection,
//! `network` keeps the sensitivities true to the topology, `law` moves the
//! set-points, `verdict` tests whether this rung can meet the limits at all,
//! `ladder` gives and takes back ground, `neighbour` agrees on tie deviations.

pub mod boot;
pub mod ladder;
pub mod law;
pub mod measure;
pub mod neighbour;
pub mod network;
pub mod node;
pub mod pins;
pub mod plan;
pub mod steward;
pub mod verdict;
