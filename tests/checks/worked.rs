//! Worked examples of the textbooks, through grid files and public interfaces.
//!
//! Data flow: grid text written with [`Text`] -> `case` -> a play under one of
//! the schemes, the plant, the DC network or the steward's law -> printed
//! figures. "From memory" on a source means that the book was not at hand: the
//! printed digits are remembered, and a recomputation closes them.

mod codes;
mod dispatch;
mod farkas;
mod governors;
mod six_bus;
mod swing;
mod two_areas;

use hedgerow::case::model::Grid;
use hedgerow::case::{parse_grid, parse_play};
use hedgerow::record::{Recording, Scheme};
use hedgerow::rehearsal::rehearse;
use std::fmt::Write as _;

/// A machine of an example, on its own rating.
#[derive(Clone, Copy)]
struct Machine {
    rating_mva: f64,
    base_mw: f64,
    inertia_s: f64,
    /// None = no governor.
    droop_percent: Option<f64>,
    damping_pu: f64,
    lag_s: f64,
}

/// A machine of 5 s and 5 % droop that answers at once.
const USUAL: Machine = Machine {
    rating_mva: 1000.0,
    base_mw: 500.0,
    inertia_s: 5.0,
    droop_percent: Some(5.0),
    damping_pu: 0.0,
    lag_s: 0.0,
};

/// The text of a grid file in the making.
struct Text(String);

impl Text {
    /// A grid of areas `A1`, `A2` and so on at 60 Hz.
    fn new(areas: usize) -> Self {
        let mut text = "format = 1\n[grid]\nname = \"example\"\nnominal_hz = 60.0\n".to_owned();
        for area in 1..=areas {
            let _ = writeln!(text, "[[area]]\nname = \"A{area}\"");
        }
        Self(text)
    }

    /// Add a bus; damping in per cent of load per per cent of frequency.
    fn bus(mut self, name: &str, area: usize, load_mw: f64, load_damping: f64) -> Self {
        let _ = writeln!(
            self.0,
            "[[bus]]\nname = \"{name}\"\narea = \"A{area}\"\nload_mw = {load_mw:?}\n\
             load_damping = {load_damping:?}"
        );
        self
    }

    /// Add damping in MW/Hz to the bus that was added last.
    fn with_damping(mut self, mw_per_hz: f64) -> Self {
        let _ = writeln!(self.0, "damping_mw_per_hz = {mw_per_hz:?}");
        self
    }

    /// Add a line that is never full.
    fn line(mut self, from: &str, to: &str, reactance_pu: f64) -> Self {
        let _ = writeln!(
            self.0,
            "[[line]]\nfrom = \"{from}\"\nto = \"{to}\"\nreactance_pu = {reactance_pu:?}\n\
             rating_mw = 90000.0"
        );
        self
    }

    /// Add a unit.
    fn unit(mut self, name: &str, bus: &str, machine: Machine) -> Self {
        let droop_percent = machine.droop_percent.unwrap_or(f64::INFINITY);
        let Machine { rating_mva, base_mw, inertia_s, damping_pu, lag_s, .. } = machine;
        let _ = writeln!(
            self.0,
            "[[unit]]\nname = \"{name}\"\nbus = \"{bus}\"\nkind = \"steam\"\n\
             rating_mva = {rating_mva:?}\nbase_mw = {base_mw:?}\nmax_mw = {rating_mva:?}\n\
             ramp_mw_per_s = inf\ninertia_s = {inertia_s:?}\ndroop_percent = {droop_percent:?}\n\
             damping_pu = {damping_pu:?}\nlag_s = {lag_s:?}"
        );
        self
    }

    /// Read it.
    fn grid(&self) -> Grid {
        parse_grid(&self.0, "example.grid.toml").unwrap_or_else(|problems| panic!("{problems}"))
    }
}

/// Rehearse one load step at 1 s; `settings` are further lines of the play.
fn step_load(
    grid: &Grid,
    scheme: Scheme,
    step: (&str, f64),
    length_s: f64,
    settings: &str,
) -> Recording {
    let (bus, mw) = step;
    let text = format!(
        "format = 1\n[run]\nduration_s = {length_s:?}\n{settings}\n\
         [[event]]\nat_s = 1.0\nwhat = \"load-step\"\nbus = \"{bus}\"\nmw = {mw:?}\n"
    );
    let play =
        parse_play(&text, "step.play.toml", grid).unwrap_or_else(|problems| panic!("{problems}"));
    rehearse(grid, &play, scheme, &mut |_| true).unwrap()
}

/// Last sample of a series.
fn last(series: &[f64]) -> f64 {
    *series.last().unwrap()
}

/// Whether a figure is the expected one within a tolerance.
#[track_caller]
fn close(found: f64, expected: f64, tol: f64) {
    assert!((found - expected).abs() <= tol, "{found} against {expected}, tolerance {tol}");
}
