//! Several schemes on one play, side by side.
//!
//! Contract: the first column is the run of the report itself, the others
//! follow in the order they were run. The baselines are tuned by a stated rule;
//! they are not anybody's control room, and the page says so.

use std::fmt::Write as _;

use maud::{Markup, html};

use super::figures::{Document, RunFigures};
use super::summary::settling;
use crate::judge::Outcome;

/// A line of the comparison: its name and a value per scheme.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Row {
    /// What is compared, unit included.
    pub name: &'static str,
    /// One text per scheme.
    pub values: Vec<String>,
}

/// Runs in the order of their columns.
fn runs(d: &Document) -> Vec<&RunFigures> {
    std::iter::once(&d.run).chain(&d.compare).collect()
}

fn outcome_word(run: &RunFigures) -> &'static str {
    match run.outcome {
        Outcome::Kept => "kept",
        Outcome::Broken => "broken",
    }
}

/// The table behind text and page.
pub fn rows(d: &Document) -> Vec<Row> {
    let runs = runs(d);
    let row = |name: &'static str, value: &dyn Fn(&RunFigures) -> String| Row {
        name,
        values: runs.iter().map(|r| value(r)).collect(),
    };
    let worst_tie =
        |r: &RunFigures| r.areas.iter().map(|a| a.ties_off_schedule_mw).fold(0.0, f64::max);
    let moved = |r: &RunFigures| r.areas.iter().map(|a| a.units_moved).sum::<usize>();
    vec![
        row("Outcome", &|r| outcome_word(r).into()),
        row("Limits broken", &|r| r.broken_by.len().to_string()),
        row("Lowest frequency [Hz]", &|r| format!("{:.3}", r.lowest_frequency_hz)),
        row("Highest frequency [Hz]", &|r| format!("{:.3}", r.highest_frequency_hz)),
        row("Steepest slope [Hz/s]", &|r| format!("{:+.3}", r.steepest_hz_per_s)),
        row("Back within 10 mHz", &|r| settling(r).0),
        row("Worst loading [%]", &|r| format!("{:.1}", 100.0 * r.worst_loading)),
        row("Time above rating [s]", &|r| format!("{:.2}", r.over_rating_s)),
        row("Ties off schedule [MW]", &|r| format!("{:.2}", worst_tie(r))),
        row("Units moved", &|r| moved(r).to_string()),
        row("Load shed [MW]", &|r| format!("{:.2}", r.judge.shed_mw)),
        row("Load in the dark [MW]", &|r| format!("{:.1}", r.black_load_mw)),
        row("Cost of set-points", &|r| format!("{:.4}", r.judge.cost)),
    ]
}

/// The table in at most 80 columns.
pub fn text(d: &Document) -> String {
    let mut out = format!(" {:<22}", "");
    for run in runs(d) {
        let _ = write!(out, "{:>19}", run.scheme);
    }
    out.push('\n');
    for row in rows(d) {
        let _ = write!(out, " {:<22}", row.name);
        row.values.iter().for_each(|v| {
            let _ = write!(out, "{v:>19}");
        });
        out.push('\n');
    }
    out
}

/// The table for the page.
pub fn section(d: &Document) -> Markup {
    html! {
        section #compare {
            h2 { "Side by side" }
            p.note {
                "The same play, grid and seed under each scheme. The baselines are tuned by a stated rule; "
                "they are not your control room. Costs are set-points only and compare what was moved, not what was kept."
            }
            table {
                thead { tr { th {} @for run in runs(d) { th.num { (run.scheme) } } } }
                tbody {
                    @for row in rows(d) {
                        tr { th scope="row" { (row.name) } @for v in &row.values { td.num { (v) } } }
                    }
                }
            }
            @for run in &d.compare {
                @if !run.broken_by.is_empty() {
                    h3 { "Broken under " (run.scheme) }
                    ul { @for s in &run.broken_by { li { (s) } } }
                }
            }
        }
    }
}
