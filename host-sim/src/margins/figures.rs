//! What margins say, in one document: table, map, swing, recommendation.
//!
//! Contract: page, text and JSON show this document; it depends on grid, play,
//! seeds and options alone.

use std::fmt::Write as _;

use serde::Serialize;

use super::MarginsError;
use super::knob::Knob;
use super::mode::{Swing, swing};
use super::search::{Map, Margin, half_rounded};
use super::trial::Subject;
use crate::case::model::Happening;
use crate::record::Scheme;
use crate::rehearsal::rehearse;

/// Everything that was found.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Document {
    /// Version of this layout.
    pub schema: u32,
    /// Name of the grid.
    pub grid: String,
    /// Name of the play.
    pub play: String,
    /// Names of the areas.
    pub areas: Vec<String>,
    /// Seeds that every kept value was kept with.
    pub seeds: Vec<u64>,
    /// Whether it was stopped before its end.
    pub stopped: bool,
    /// Margins found.
    pub margins: Vec<Margin>,
    /// Map over two imperfections, if asked for.
    pub map: Option<Map>,
    /// Slowest inter-area swing after the first fast event, with stewards.
    pub swing_steward: Option<Swing>,
    /// The same under droop alone.
    pub swing_droop: Option<Swing>,
    /// Recommended controller tick in s: half the margin, rounded down; none if not searched.
    pub recommended_tick_s: Option<f64>,
    /// Least iterations per tick that every seed kept.
    pub least_iterations: Option<u16>,
    /// Recommended iterations per tick: twice the least.
    pub recommended_iterations: Option<u16>,
}

/// What recommendations rest on, in a sentence.
pub const RECOMMENDED_HOW: &str = "The tick is half of its margin, rounded down to 1, 2 or 5 times a power of ten; the iterations are twice the least that every seed kept at the play's tick. Both are bounds for the end of this play: fewer iterations or a longer tick settle later.";

/// Tick recommended from its margin.
pub fn recommended_tick_s(margins: &[Margin]) -> Option<f64> {
    margins.iter().find(|m| m.knob == Knob::Tick).map(|m| half_rounded(m.kept))
}

/// Swings after the first line, load or unit event, with stewards and with droop alone.
///
/// Errors: a run that can not start.
pub fn swings(subject: &Subject) -> Result<(Option<Swing>, Option<Swing>), MarginsError> {
    let fast = |what: &Happening| {
        matches!(
            what,
            Happening::LineTrip { .. } | Happening::LoadStep { .. } | Happening::UnitTrip { .. }
        )
    };
    let Some(event) = subject.play.events.iter().find(|e| fast(&e.what)) else {
        return Ok((None, None));
    };
    let mut play = subject.play.clone();
    // The swing is over within half a minute; later events would start others.
    let next = play.events.iter().find(|e| e.at_s > event.at_s).map_or(f64::INFINITY, |e| e.at_s);
    play.run.duration_s = play.run.duration_s.min(event.at_s + 30.0).min(next);
    let mut found = [None, None];
    for (found, scheme) in found.iter_mut().zip([Scheme::Steward, Scheme::Droop]) {
        let run = rehearse(&subject.grid, &play, scheme, &mut |_| true)
            .map_err(|why| MarginsError::Run { what: "no imperfection".to_owned(), why })?;
        *found = swing(&subject.grid, &run, event.at_s + 2.0 * play.run.tick_s);
    }
    let [steward, droop] = found;
    Ok((steward, droop))
}

/// A value with as many digits as the bisection knows.
pub fn digits(value: f64) -> String {
    if value >= 10.0 { format!("{value:.1}") } else { format!("{value:.3}") }
}

/// The document as text.
pub fn text(d: &Document) -> String {
    let mut out = format!("{} on {}: {} seeds\n\n", d.play, d.grid, d.seeds.len());
    let _ =
        writeln!(out, "{:<16} {:>12} {:>12}  what broke first", "imperfection", "kept", "broken");
    for m in &d.margins {
        let broken = m.broken.map_or("-".to_owned(), |b| format!("{} {}", digits(b), m.unit));
        let kept = format!("{} {}", digits(m.kept), m.unit);
        let why = m.broken_by.as_deref().unwrap_or("nothing in the range tried");
        let _ = writeln!(out, "{:<16} {kept:>12} {broken:>12}  {why}", m.knob.word());
    }
    let swing = |s: &Option<Swing>| match s {
        Some(s) => format!(
            "{} against {}, period {:.2} s, damping ratio {:.3}",
            d.areas[s.areas.0], d.areas[s.areas.1], s.period_s, s.damping
        ),
        None => "no swing stands out".to_owned(),
    };
    let _ = writeln!(
        out,
        "\nSlowest inter-area swing\n  with stewards: {}\n  droop alone:   {}",
        swing(&d.swing_steward),
        swing(&d.swing_droop)
    );
    if let (Some(tick), Some(least), Some(iterations)) =
        (d.recommended_tick_s, d.least_iterations, d.recommended_iterations)
    {
        let _ = writeln!(
            out,
            "\nRecommended: tick {tick} s, {iterations} iterations (least kept: {least})\n  {RECOMMENDED_HOW}"
        );
    }
    if let Some(map) = &d.map {
        let _ = writeln!(
            out,
            "\n{} up, {} across (# kept, . broken)",
            map.up.word(),
            map.across.word()
        );
        for (row, value) in map.kept.iter().zip(&map.up_values).rev() {
            let cells: String = row.iter().map(|&k| if k { " #" } else { " ." }).collect();
            let _ = writeln!(out, "{:>9}{cells}", digits(*value));
        }
    }
    out
}
