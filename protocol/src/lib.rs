#![no_std]
#![deny(clippy::unwrap_used, clippy::expect_used, clippy::panic, clippy::indexing_slicing)]
//! What stewards, plant and host say to each other.
//!
//! Contract: bytes in, values out, and back. Nothing here allocates, panics,
//! reads a clock or trusts a length. `WIRE.md` beside this crate is normative;
//! the golden tests read its worked examples.
//!
//! Data flow: [`message`] turns a value into payload bytes, [`frame`] wraps them
//! in header, tag and checksum inside [`cobs`], [`decoder`] finds frames in a byte
//! stream, [`auth`] makes and checks the tag, [`charter`] is the fixed-size data
//! a steward boots with.
//!
//! Sign conventions, for the whole project:
//!
//! | quantity | positive means |
//! |---|---|
//! | injection | into the bus |
//! | line flow | from `from` to `to` |
//! | tie flow | out of the area that looks at it (export) |
//! | tie deviation in [`message::TieTerms`] | along the line, `from` to `to` |
//! | feeder | load taken off, an injection into the bus |
//! | storage output | discharging |
//! | frequency deviation | above nominal |

#[cfg(test)]
extern crate std;

pub mod auth;
pub mod charter;
pub mod cobs;
pub mod decoder;
pub mod frame;
pub mod limits;
pub mod message;
