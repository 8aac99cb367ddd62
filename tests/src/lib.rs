//! x

pub mod table;
