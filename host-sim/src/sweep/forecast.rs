//! The ladder before the trip: what each credible outage would ask of the stewards.
//!
//! Contract: made from the stewards' rows of a static sweep; deepest rung first,
//! then most load shed, then most movement. A rung named here is the least at
//! which every limit can be met, in the model and for the state of the grid file.

use std::fmt::Write as _;

use super::Balancing;
use super::row::Row;
use crate::report::rung_word;

/// Stewards' rows, most demanding first.
pub fn ordered(rows: &[Row]) -> Vec<&Row> {
    let mut out: Vec<&Row> = rows.iter().filter(|r| r.scheme == Balancing::Steward).collect();
    out.sort_by(|a, b| {
        let key = |r: &Row| (r.beyond, r.rung);
        key(b)
            .cmp(&key(a))
            .then(b.load_lost_mw.total_cmp(&a.load_lost_mw))
            .then(b.moved_mw.total_cmp(&a.moved_mw))
    });
    out
}

/// The table as text.
pub fn text(rows: &[Row]) -> String {
    let ordered = ordered(rows);
    let wide = ordered.iter().map(|r| r.outage.chars().count()).max().unwrap_or(6).max(6);
    let mut out = format!(
        "{:<wide$}  {:<9} {:<8} {:>9} {:>9} {:>11}\n",
        "outage", "form", "rung", "lost MW", "moved MW", "reserve MW"
    );
    for r in ordered {
        let rung = if r.beyond { "beyond" } else { rung_word(r.rung) };
        let _ = writeln!(
            out,
            "{:<wide$}  {:<9} {:<8} {:>9.1} {:>9.1} {:>11.1}",
            r.outage,
            r.form.word(),
            rung,
            r.load_lost_mw,
            r.moved_mw,
            r.reserve_left_mw
        );
    }
    out
}
