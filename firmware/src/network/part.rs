//! The load part: what of flows and boundary angles the loads alone cause.
//!
//! Contract: plain data; [`Network`](super::Network) moves it with the topology.

use hedgerow_protocol::limits::TIES_MAX;

/// The part of flows and boundary angles that loads alone cause.
#[derive(Clone, Debug)]
pub struct LoadPart<const R: usize> {
    /// Uncontrolled load of the area, pu.
    pub load: f32,
    /// Load part of each line's flow, pu.
    pub flow: [f32; R],
    /// Load part of the angle at each tie's bus, rad.
    pub angle: [f32; TIES_MAX],
}

impl<const R: usize> LoadPart<R> {
    /// All zero.
    pub const fn new() -> Self {
        Self { load: 0.0, flow: [0.0; R], angle: [0.0; TIES_MAX] }
    }
}

impl<const R: usize> Default for LoadPart<R> {
    fn default() -> Self {
        Self::new()
    }
}
