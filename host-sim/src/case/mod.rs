//! Grid and play files.
pub mod model;
