//! Every credible outage, at several loading levels, under several schemes.
//!
//! Contract: a sweep is a function of grid, options and seed; the rows are the
//! same bytes whatever the number of threads, and a sweep that was stopped and
//! resumed ends with the same bytes as an unbroken one.
//! Data flow: `prepare` makes the grids (form, ratings, feeders), `outage` lists
//! what can go, `cascade` follows the stages of the DC model (flows, overloaded
//! lines trip, islands rebalance, until nothing trips) with `balance` for what
//! runs today and `equilibrium` for the stewards, or `closed` runs the whole
//! loop; `run` spreads it over cores, `row` and `totals` are the figures, `page`
//! and `files` write them down.
//! Units: MW and Hz outside, per unit inside `equilibrium`.

pub mod balance;
pub mod cascade;
pub mod closed;
pub mod equilibrium;
pub mod files;
pub mod forecast;
pub mod outage;
pub mod page;
pub mod prepare;
pub mod quadratic;
pub mod redispatch;
pub mod row;
pub mod run;
pub mod screen;
pub mod state;
pub mod totals;

use serde::Serialize;

/// The grid as it is, or with ties left open so that the areas form a tree.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Form {
    /// Every line as the file says.
    AsItIs,
    /// The ties of the division left open.
    Divided,
}

impl Form {
    /// Word of the form, as on the command line.
    pub fn word(self) -> &'static str {
        match self {
            Form::AsItIs => "as-it-is",
            Form::Divided => "divided",
        }
    }
}

/// Who rebalances after an outage.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Balancing {
    /// The stewards' static equilibrium at the least rung.
    Steward,
    /// Droop plus area control error: set-points return each area to schedule, without line limits.
    AreaControlError,
    /// Governor droop alone.
    Droop,
    /// Proportional balancing in each island.
    Proportional,
    /// Area control error, then an operator's redispatch of all units after 5 minutes.
    Redispatch5,
    /// The same after 15 minutes.
    Redispatch15,
}

impl Balancing {
    /// All of them.
    pub const ALL: [Balancing; 6] = [
        Balancing::Steward,
        Balancing::AreaControlError,
        Balancing::Droop,
        Balancing::Proportional,
        Balancing::Redispatch5,
        Balancing::Redispatch15,
    ];

    /// Word of the scheme, as on the command line.
    pub fn word(self) -> &'static str {
        match self {
            Balancing::Steward => "steward",
            Balancing::AreaControlError => "area-control-error",
            Balancing::Droop => "droop",
            Balancing::Proportional => "proportional",
            Balancing::Redispatch5 => "redispatch-5",
            Balancing::Redispatch15 => "redispatch-15",
        }
    }
}

/// Why a sweep can not run.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum SweepError {
    /// The base case has no DC flow.
    #[error("the {form} grid has no base case: {why}")]
    BaseCase {
        /// Which form.
        form: &'static str,
        /// What the network says.
        why: String,
    },
    /// Something asked for does not exist.
    #[error("{0}")]
    Asked(String),
    /// The partial file of an earlier run can not be gone on with.
    #[error("{0}")]
    Resume(String),
    /// The file system refused.
    #[error("{0}")]
    Files(String),
    /// A closed-loop run could not start.
    #[error("the closed loop can not run: {0}")]
    Loop(String),
}
