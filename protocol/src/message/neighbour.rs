//! Steward to steward: one end's terms for a tie.

use super::steward::Rung;
use serde::{Deserialize, Serialize};

/// One end's terms for a tie; carries the full state, so that duplicates and
/// reordering are harmless and loss or delay only slow the agreement.
///
/// Units: power in pu on the charter's base, prices in cost per pu; the first
/// of each pair is the tie flow's deviation along the line, the second the
/// mid-tie angle's deviation times the tie's susceptance.
///
/// Source: edge-based ADMM with alternating rounds (S. Boyd et al.,
/// "Distributed Optimization and Statistical Learning via the Alternating
/// Direction Method of Multipliers", 2011, section 7, in its edge form).
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[cfg_attr(feature = "defmt", derive(defmt::Format))]
pub struct TieTerms {
    /// Number of the tie in the grid.
    pub tie: u16,
    /// Tick of the sender.
    pub tick: u32,
    /// Round of the agreement.
    pub round: u16,
    /// Whether `bid` is valid for this round.
    pub ready: bool,
    /// Bid of this round.
    pub bid: [f32; 2],
    /// Bid of the round before.
    pub bid_before: [f32; 2],
    /// Deviation the sender would take.
    pub deviation: [f32; 2],
    /// Whether the sender opens the tie to help.
    pub open: bool,
    /// Whether the sender can not control this tie (it sits on a cut-off piece).
    pub detached: bool,
    /// Areas between the sender and the nearest one that leans; 0 = the sender.
    pub distance: u8,
    /// Sender's rung, for information.
    pub rung: Rung,
}
