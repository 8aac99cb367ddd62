//! Random areas, a quasi-steady plant around them and f64 references.
//!
//! Contract: everything follows from a seed, so a failing case is replayed by
//! its numbers. References are computed here in f64 from the area's data alone,
//! never with the steward's own code.
//!
//! Data flow: [`Area::random`] -> charter bytes and [`World`]; a [`World`] gives
//! a [`Snapshot`] per tick, which is told to a steward; [`listen`] catches what
//! the steward says.
#![allow(dead_code, unused_imports)] // shared by several test crates, each of which uses a part

pub mod area;
pub mod dense;
pub mod rng;
pub mod snapshot;
pub mod world;

pub use area::{Area, settings};
pub use dense::{inverse_laplacian, is_bridge, pieces};
pub use rng::Rng;
pub use snapshot::{Said, Snapshot, listen};
pub use world::World;

/// Steward for every area of [`Area::random`] with at most 32 buses.
pub type Steward32 = hedgerow_firmware::steward::Steward<32, 64, 64>;
/// The plan that fits it.
pub type Plan32 = hedgerow_firmware::plan::Plan<32, 64, 64>;
/// The network that fits it.
pub type Network32 = hedgerow_firmware::network::Network<32, 64>;
