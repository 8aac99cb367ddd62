//! The division in the terminal, and the caution that stands on everything.
//!
//! Contract: figures with units, no colour; long lists are cut with a word on how
//! much was cut.

use std::fmt::Write as _;

use super::figures::{ClosedFigures, Document, EffectFigures};

/// What a division does not study; on the page, in the JSON and in the grid file.
pub const CAUTION: [&str; 4] = [
    "Leaving ties open is a planning decision with voltage, stability and fault-level consequences that this \
tool does not study.",
    "In a tree every closed tie is a single point of separation: its trip splits the grid.",
    "Model: lossless DC power flow with the base points of the file; ratings are the continuous ones; no \
voltage, reactive power, fault or angle stability; no standard was judged.",
    "An AC power flow check of the claim is not part of this version.",
];

/// Rows of a table at most.
const ROWS: usize = 12;

/// The summary.
pub fn summary(d: &Document) -> String {
    let mut out = String::new();
    let _ = writeln!(
        out,
        "{} divided: {}{}",
        d.grid,
        d.outcome,
        if d.stopped { " (stopped early)" } else { "" }
    );
    if let Some(method) = &d.proposed_by {
        let _ = writeln!(out, "  areas proposed by {method}");
    }
    let _ = writeln!(
        out,
        "\nAreas\n  {:<22}{:>7}{:>12}{:>14}{:>14}",
        "", "buses", "load [MW]", "surplus [MW]", "ties kept"
    );
    for area in &d.areas {
        let ties = format!("{} of {}", area.ties_after, area.ties_before);
        let _ = writeln!(
            out,
            "  {:<22}{:>7}{:>12.1}{:>+14.1}{:>14}",
            area.name, area.buses, area.load_mw, area.surplus_mw, ties
        );
    }
    choices(&mut out, d);
    price(&mut out, d);
    outages(&mut out, d);
    for sentence in d.too_large.iter().take(3) {
        let _ = writeln!(out, "\nnote: {sentence}");
    }
    if d.too_large.len() > 3 {
        let _ = writeln!(out, "\nnote: {} more of this kind on the page", d.too_large.len() - 3);
    }
    out.push_str("\nCaution\n");
    for sentence in &d.caution {
        let _ = writeln!(out, "  {sentence}");
    }
    out
}

/// Number of trees in words.
pub fn tree_count(d: &Document) -> String {
    match d.trees {
        Some(count) if count < 1e7 => format!("{count:.0}"),
        _ => format!("about 10^{:.1}", d.trees_log / std::f64::consts::LN_10),
    }
}

fn line_of(name: &Option<String>) -> &str {
    name.as_deref().unwrap_or("-")
}

/// The first names of a list.
fn listed(names: &[String]) -> String {
    let shown = names.iter().take(ROWS).map(String::as_str).collect::<Vec<_>>().join(", ");
    match names.len().saturating_sub(ROWS) {
        0 => shown,
        more => format!("{shown} and {more} more"),
    }
}

fn choices(out: &mut String, d: &Document) {
    let _ = writeln!(
        out,
        "\nTies to leave open ({} ties, {} trees of ties)",
        d.ties.len(),
        tree_count(d)
    );
    let _ = writeln!(out, "  {}", d.certainty);
    if let Some(within) = d.trees_within_ratings {
        let _ = writeln!(out, "  trees with every line within its rating: {within}");
    }
    let _ = writeln!(
        out,
        "  worst loading before: {:.1} % on {}",
        100.0 * d.worst_loading_before,
        line_of(&d.worst_line_before)
    );
    for choice in d.choices.iter().take(ROWS) {
        let _ = writeln!(
            out,
            "  {:>7.1} % on {:<14} open: {}",
            100.0 * choice.worst_loading,
            line_of(&choice.worst_line),
            listed(&choice.opened)
        );
    }
}

fn side_words(closed: &ClosedFigures) -> String {
    let side = |index: usize| {
        let side = &closed.sides[index];
        format!(
            "{} ({:+.1} MW, {:.0} MW s, room +{:.0}/-{:.0} MW{})",
            side.areas.join("+"),
            side.surplus_mw,
            side.inertia_mws,
            side.room_up_mw,
            side.room_down_mw,
            if side.can_balance { "" } else { ", NOT ENOUGH" }
        )
    };
    format!("{} | {}", side(0), side(1))
}

fn price(out: &mut String, d: &Document) {
    out.push_str("\nWhat it costs\n");
    for tie in d.opened.iter().take(ROWS) {
        let _ = writeln!(
            out,
            "  open    {:<16} {:>8.1} deg stand across it (carried {:+.1} MW before)",
            tie.line, tie.angle_after_deg, tie.flow_before_mw
        );
    }
    if d.opened.len() > ROWS {
        let _ = writeln!(out, "  open    and {} more on the page", d.opened.len() - ROWS);
    }
    for tie in &d.closed {
        let _ = writeln!(
            out,
            "  closed  {:<16} {:>+8.1} MW, {:.1} %; its trip splits {}",
            tie.line,
            tie.flow_after_mw,
            100.0 * tie.loading,
            side_words(tie)
        );
    }
    let lost = d.lost_to_n1.len();
    let _ = writeln!(
        out,
        "  lines whose single outage now splits the grid: {lost} ({})",
        listed(&d.lost_to_n1)
    );
}

fn outages(out: &mut String, d: &Document) {
    let _ = writeln!(
        out,
        "\nLargest flow change outside the area, per outage inside it [MW]\n  {:<20}{:>12}{:>12}  on",
        "", "before", "after"
    );
    let outside = |effect: &Option<EffectFigures>| match effect {
        Some(effect) => format!("{:.3}", effect.outside_mw),
        None => "splits".to_owned(),
    };
    for row in d.outages.iter().take(ROWS) {
        let on = row.before.as_ref().map_or("-", |effect| line_of(&effect.outside_line));
        let _ = writeln!(
            out,
            "  {:<20}{:>12}{:>12}  {on}",
            row.line,
            outside(&row.before),
            outside(&row.after)
        );
    }
    if d.outages.len() > ROWS {
        let _ = writeln!(out, "  and {} more in outages.csv", d.outages.len() - ROWS);
    }
    let _ = writeln!(
        out,
        "  pockets: {}; outages after which a line is above its rating: {} before, {} after",
        d.pockets.len(),
        d.overloading_before,
        d.overloading_after
    );
    if d.outages_left_out > 0 {
        let _ = writeln!(out, "  {} lines with small base flow were left out", d.outages_left_out);
    }
    let _ = writeln!(
        out,
        "  solved again from scratch on the divided grid: {} outages, largest change outside {:.1e} MW",
        d.outages_solved_again, d.outside_again_mw
    );
}
