//! Steward to plant and host: orders, status, proofs.

use super::packed::{Bits, Floats};
use serde::{Deserialize, Serialize};

/// How much the steward gives up at present.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum Rung {
    /// Ties on schedule, normal ranges less reserve, no shedding.
    Keep,
    /// Ties may leave schedule, neighbours help.
    Lean,
    /// Reserve and emergency ranges too.
    Stretch,
    /// The least load too.
    Shed,
}

impl Rung {
    /// All rungs, from giving up nothing to giving up most.
    pub const ALL: [Rung; 4] = [Rung::Keep, Rung::Lean, Rung::Stretch, Rung::Shed];

    /// Number of the rung, 0 to 3.
    pub const fn number(self) -> u8 {
        match self {
            Rung::Keep => 0,
            Rung::Lean => 1,
            Rung::Stretch => 2,
            Rung::Shed => 3,
        }
    }

    /// Rung of a number, if there is one.
    pub const fn from_number(number: u8) -> Option<Self> {
        match number {
            0 => Some(Rung::Keep),
            1 => Some(Rung::Lean),
            2 => Some(Rung::Stretch),
            3 => Some(Rung::Shed),
            _ => None,
        }
    }

    /// The next rung that gives up more.
    pub const fn down(self) -> Option<Self> {
        Self::from_number(self.number() + 1)
    }

    /// The next rung that gives up less.
    pub const fn up(self) -> Option<Self> {
        match self {
            Rung::Keep => None,
            Rung::Lean => Some(Rung::Keep),
            Rung::Stretch => Some(Rung::Lean),
            Rung::Shed => Some(Rung::Stretch),
        }
    }
}

/// What the detector says of the present rung.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum Verdict {
    /// Limits met and nothing left to do.
    Settled,
    /// On the way.
    Working,
    /// Proven that this rung cannot meet the limits.
    Impossible,
    /// Data missing or stale: no verdict, no move.
    Blind,
}

/// Set-points for one tick, in the charter's order.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Orders<'a> {
    /// Tick of the measurements that they answer.
    pub tick: u32,
    /// Set-point in MW, one per unit.
    #[serde(borrow)]
    pub setpoint_mw: Floats<'a>,
    /// Load to take off in MW, one per feeder.
    #[serde(borrow)]
    pub shed_mw: Floats<'a>,
    /// Units whose breaker is to open.
    #[serde(borrow)]
    pub take_off: Bits<'a>,
}

/// How the steward sees its area.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Status<'a> {
    /// Tick of the measurements it is about.
    pub tick: u32,
    /// Present rung.
    pub rung: Rung,
    /// Verdict on it.
    pub verdict: Verdict,
    /// Shortfall proven at this rung in MW; zero or less = nothing proven.
    pub proven_mw: f32,
    /// Estimated uncontrolled load of the area in MW.
    pub load_mw: f32,
    /// Load shed by order in MW.
    pub shed_mw: f32,
    /// Counts the changes of the area's topology.
    pub topology: u16,
    /// Ties open to help, one bit each.
    pub ties_open: u16,
    /// Feeders held for the operator, one bit each.
    pub feeders_locked: u64,
    /// Own tie deviation in MW along the line, one per tie.
    #[serde(borrow)]
    pub tie_deviation_mw: Floats<'a>,
    /// Frames accepted since boot.
    pub accepted: u32,
    /// Frames refused since boot.
    pub refused: u32,
}

/// Which vector of a proof a part belongs to.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub enum ProofVector {
    /// Dual vector, one per row.
    Dual,
    /// Lower limit of each row in pu.
    RowLow,
    /// Upper limit of each row in pu.
    RowHigh,
    /// Estimation error allowed for in each row, in pu.
    RowError,
    /// Lower end of each unknown's range in pu.
    BoxLow,
    /// Upper end of each unknown's range in pu.
    BoxHigh,
}

impl ProofVector {
    /// All vectors in the order in which they are sent.
    pub const ALL: [ProofVector; 6] = [
        ProofVector::Dual,
        ProofVector::RowLow,
        ProofVector::RowHigh,
        ProofVector::RowError,
        ProofVector::BoxLow,
        ProofVector::BoxHigh,
    ];
}

/// A part of one vector of a proof.
///
/// With the charter and the breaker statuses anyone can rebuild the matrix and
/// check the proof with one product.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct ProofPart<'a> {
    /// Number of the proof, counted from boot.
    pub proof: u16,
    /// Tick at which it was found.
    pub tick: u32,
    /// Rung it speaks of.
    pub rung: Rung,
    /// Topology counter it was found under.
    pub topology: u16,
    /// Local bus to which the rows' angles and flows are referred.
    pub root: u8,
    /// Breaker status of the internal lines it was found under.
    #[serde(borrow)]
    pub line_closed: Bits<'a>,
    /// Breaker status of the ties it was found under.
    #[serde(borrow)]
    pub tie_closed: Bits<'a>,
    /// Shortfall claimed in MW.
    pub claimed_mw: f32,
    /// Which vector.
    pub vector: ProofVector,
    /// Index of the first value.
    pub first: u16,
    /// Length of the whole vector.
    pub total: u16,
    /// The values.
    #[serde(borrow)]
    pub values: Floats<'a>,
}
