//! What can go wrong with a plant, and what it refuses to do.

use thiserror::Error;

use crate::grid::dc::DcError;

/// Why a plant could not be built.
#[derive(Clone, Debug, Error, PartialEq)]
pub enum PlantError {
    /// The step is no positive finite number.
    #[error("plant step {step_s} s; a positive number is needed, 0.005 to 0.02 s is usual")]
    Step {
        /// Step asked for in s.
        step_s: f64,
    },
    /// Generation and load of an island differ in the base case.
    #[error(
        "base case of the island around bus {bus}: generation less load is {imbalance_mw:+.3} MW; within 0.1 MW of balance is needed"
    )]
    Imbalance {
        /// Lowest bus of the island.
        bus: String,
        /// Generation less load in MW.
        imbalance_mw: f64,
    },
    /// The network has no solution.
    #[error("the network has no solution: {0}")]
    Network(#[from] DcError),
    /// The equations of motion could not be built.
    #[error("the network matrix is singular: reactances of closed lines cancel")]
    Singular,
}

/// Why an order or event was not carried out; the plant is as it was before.
#[derive(Clone, Debug, Error, PartialEq)]
pub enum Refused {
    /// Events that concern stewards, links or schedules.
    #[error("this event does not concern the plant")]
    NotForThePlant,
    /// An index points outside the grid.
    #[error("there is no {what} number {index}")]
    Unknown {
        /// Kind of thing.
        what: &'static str,
        /// Index given.
        index: usize,
    },
    /// The line is open already.
    #[error("line {line} is open already")]
    AlreadyOpen {
        /// Name of the line.
        line: String,
    },
    /// The line is closed already.
    #[error("line {line} is closed already")]
    AlreadyClosed {
        /// Name of the line.
        line: String,
    },
    /// The two sides are too far apart to be joined.
    #[error(
        "line {line} stays open: its ends are {freq_hz:.3} Hz and {angle_deg:.1} deg apart; at most 0.1 Hz and 30 deg can be closed"
    )]
    OutOfStep {
        /// Name of the line.
        line: String,
        /// Frequency difference in Hz.
        freq_hz: f64,
        /// Angle difference in degrees.
        angle_deg: f64,
    },
    /// The unit is out of service already.
    #[error("unit {unit} is out of service already")]
    AlreadyOut {
        /// Name of the unit.
        unit: String,
    },
    /// The unit is in service already.
    #[error("unit {unit} is in service already")]
    AlreadyIn {
        /// Name of the unit.
        unit: String,
    },
    /// The unit's bus is dark.
    #[error("unit {unit} cannot return: bus {bus} is dark")]
    BusDark {
        /// Name of the unit.
        unit: String,
        /// Name of its bus.
        bus: String,
    },
    /// A number is not finite.
    #[error("a change of {mw} MW at bus {bus} is no number to work with")]
    NotFinite {
        /// Name of the bus.
        bus: String,
        /// Value given.
        mw: f64,
    },
    /// The network after the change has no solution.
    #[error("the network has no solution after this: reactances of closed lines cancel")]
    Unsolvable,
}
