//! One self-contained page of a sweep: totals, distributions, the ten worst.
//!
//! Contract: no script, no network; the same numbers as the CSV and JSON. What
//! the model leaves out stands above the fold. Each of the worst outages has the
//! command that replays it.

use maud::{DOCTYPE, Markup, PreEscaped, html};

use super::files::Document;
use super::row::Row;
use super::totals::{Totals, worst};
use crate::report::rung_word;
use crate::report::svg::{Anchor, Drawing, HAIR, INK, SLATE, colour, dash, decimals, ticks};

const STYLE: &str = include_str!("../report/style.css");

/// Rows listed as worst.
pub const WORST: usize = 10;

/// Size of a panel's plot in px.
const PLOT: (f64, f64) = (600.0, 260.0);
/// Left and top margin of a panel in px.
const MARGIN: (f64, f64) = (60.0, 34.0);

/// The page as text; `replay` gives the command for a row.
pub fn page(d: &Document, replay: &dyn Fn(&Row) -> String) -> String {
    let markup = html! {
        (DOCTYPE)
        html lang="en" {
            head {
                meta charset="utf-8";
                meta name="viewport" content="width=device-width, initial-scale=1";
                title { (d.grid) ": sweep of outages - Hedgerow" }
                style { (PreEscaped(STYLE)) }
            }
            body {
                header { div {
                    div.mark { "Hedgerow sweep" }
                    h1 { "Outages on " (d.grid) }
                    p { (d.mode) " | " (d.rows.len()) " runs" @if d.stopped { " | stopped before its end" } }
                } }
                main {
                    (caution(d))
                    (totals_table(&d.totals))
                    section #picture {
                        h2 { "How much load is lost, over all outages" }
                        p.note { "Each curve: share of the outages that lose at least so much of the demand." }
                        @for factor in factors(d) { (PreEscaped(panel(d, factor))) }
                    }
                    (worst_table(d, replay))
                    footer { p { "Hedgerow " (env!("CARGO_PKG_VERSION")) ". The same grid and options give this page byte for byte, whatever the number of threads." } }
                }
            }
        }
    };
    markup.into_string()
}

fn caution(d: &Document) -> Markup {
    html! {
        section.caution {
            p { b { "What this is. " } "Figures of the lossless DC model with exact measurements: no voltage, reactive power, fault or angle stability. A static cascade takes every scheme to have finished before a line trips on heat. The baseline is tuned by a stated rule; it is not your control room." }
            @for note in &d.notes { p { (note) } }
        }
    }
}

fn factor_word(factor: Option<f64>) -> String {
    factor.map_or("ratings of the file".to_owned(), |f| format!("rating factor {f}"))
}

fn short_factor(factor: Option<f64>) -> String {
    factor.map_or("file".to_owned(), |f| format!("x {f}"))
}

fn totals_table(totals: &[Totals]) -> Markup {
    html! {
        section {
            h2 { "Over all outages" }
            p.note { "With loss: share of outages with any load lost. Areas: mean number touched. Followed: lines that opened after the outage. Over rating: outages after which a line stays above it. Rungs: outages that end at keep / lean / stretch / shed." }
            div style="overflow-x: auto" { table {
                thead { tr {
                    th { "ratings" } th { "form" } th { "scheme" }
                    th.num { "runs" } th.num { "with loss" } th.num { "mean lost" } th.num { "worst lost" }
                    th.num { "units moved" } th.num { "areas" } th.num { "followed" }
                    th.num { "over rating" } th.num { "rungs" }
                } }
                tbody {
                    @for t in totals {
                        tr {
                            td { (short_factor(t.factor)) } td { (t.form.word()) } td { (t.scheme.word()) }
                            td.num { (t.outages) }
                            td.num { (format!("{:.1} %", t.with_loss_percent)) }
                            td.num { (format!("{:.3} %", t.mean_lost_percent)) }
                            td.num { (format!("{:.2} %", t.worst_lost_percent)) }
                            td.num { (format!("{:.1} %", t.mean_moved_percent)) }
                            td.num { (format!("{:.2}", t.mean_areas_touched)) }
                            td.num { (t.lines_followed) }
                            td.num { (t.with_over_rating) }
                            td.num { (rungs(t)) }
                        }
                    }
                }
            } }
        }
    }
}

fn rungs(t: &Totals) -> String {
    if t.scheme != super::Balancing::Steward {
        return "-".to_owned();
    }
    let [keep, lean, stretch, shed] = t.by_rung;
    let beyond = if t.beyond > 0 { format!(" ({} beyond)", t.beyond) } else { String::new() };
    format!("{keep}/{lean}/{stretch}/{shed}{beyond}")
}

fn factors(d: &Document) -> Vec<Option<f64>> {
    let mut out: Vec<Option<f64>> = d.rows.iter().map(|r| r.factor).collect();
    out.dedup();
    out
}

/// Curves of one rating factor, one per form and scheme.
fn panel(d: &Document, factor: Option<f64>) -> String {
    let groups: Vec<&[Row]> = d
        .rows
        .chunk_by(|a, b| (a.factor, a.form, a.scheme) == (b.factor, b.form, b.scheme))
        .filter(|g| g.first().is_some_and(|r| r.factor == factor))
        .collect();
    let most = groups.iter().flat_map(|g| g.iter()).map(Row::load_lost_percent).fold(1.0, f64::max);
    let mut drawing = Drawing::default();
    let (x0, y0) = MARGIN;
    let x = |percent: f64| x0 + PLOT.0 * percent / most;
    let share = |g: &&[Row]| g.iter().filter(|r| r.has_lost()).count() as f64 / g.len() as f64;
    let highest = groups.iter().map(share).fold(0.0, f64::max);
    // Up to the next eighth, so that few losses still show.
    let top = ((8.0 * highest).ceil() / 8.0).max(0.125);
    let y = |share: f64| y0 + PLOT.1 * (1.0 - share / top);
    drawing.text((x0, 20.0), Anchor::Start, 14.0, INK, &factor_word(factor));
    for share in [0.0, 0.2, 0.4, 0.6, 0.8, 1.0].map(|part| part * top) {
        drawing.line((x0, y(share)), (x0 + PLOT.0, y(share)), HAIR, 1.0, "");
        drawing.text(
            (x0 - 6.0, y(share) + 4.0),
            Anchor::End,
            12.0,
            SLATE,
            &format!("{:.1} %", 100.0 * share),
        );
    }
    let marks = ticks(0.0, most, 6);
    let digits = decimals(&marks);
    for mark in marks {
        drawing.line((x(mark), y0), (x(mark), y0 + PLOT.1), HAIR, 1.0, "");
        drawing.text(
            (x(mark), y0 + PLOT.1 + 18.0),
            Anchor::Middle,
            12.0,
            SLATE,
            &format!("{mark:.digits$} %"),
        );
    }
    drawing.text(
        (x0 + PLOT.0 / 2.0, y0 + PLOT.1 + 36.0),
        Anchor::Middle,
        12.0,
        SLATE,
        "load lost, share of demand",
    );
    for (place, group) in groups.iter().enumerate() {
        drawing.curve(
            &exceedance(group, &x, &y),
            colour(place),
            2.0,
            dash(place + 2 * (place / 10)),
        );
        let at = y0 + 14.0 + 20.0 * place as f64;
        let left = x0 + PLOT.0 + 16.0;
        drawing.line(
            (left, at - 4.0),
            (left + 34.0, at - 4.0),
            colour(place),
            2.0,
            dash(place + 2 * (place / 10)),
        );
        if let Some(r) = group.first() {
            drawing.text(
                (left + 40.0, at),
                Anchor::Start,
                12.0,
                INK,
                &format!("{}, {}", r.scheme.word(), r.form.word()),
            );
        }
    }
    let height = (y0 + PLOT.1 + 48.0).max(y0 + 30.0 + 20.0 * groups.len() as f64);
    drawing.finish(960.0, height, &format!("load lost over all outages, {}", factor_word(factor)))
}

/// Steps of the share of outages that lose at least so much.
fn exceedance(group: &[Row], x: &dyn Fn(f64) -> f64, y: &dyn Fn(f64) -> f64) -> Vec<(f64, f64)> {
    let mut lost: Vec<f64> =
        group.iter().filter(|r| r.has_lost()).map(Row::load_lost_percent).collect();
    lost.sort_by(f64::total_cmp);
    let count = group.len().max(1) as f64;
    let mut left = lost.len() as f64;
    let mut points = vec![(x(0.0), y(left / count))];
    for percent in lost {
        points.push((x(percent), y(left / count)));
        left -= 1.0;
        points.push((x(percent), y(left / count)));
    }
    points
}

fn worst_table(d: &Document, replay: &dyn Fn(&Row) -> String) -> Markup {
    html! {
        section {
            h2 { "The ten worst" }
            p.note { "Most load lost first, then most lines that followed, then the deepest rung." }
            table {
                thead { tr {
                    th { "outage" } th { "ratings" } th { "form" } th { "scheme" } th.num { "lost MW" }
                    th.num { "lost" } th.num { "followed" } th { "rung" }
                } }
                tbody {
                    @for r in worst(&d.rows, WORST) {
                        tr {
                            th { (r.outage) } td { (short_factor(r.factor)) } td { (r.form.word()) } td { (r.scheme.word()) }
                            td.num { (format!("{:.1}", r.load_lost_mw)) }
                            td.num { (format!("{:.2} %", r.load_lost_percent())) }
                            td.num { (r.lines_followed) }
                            td { @if r.scheme == super::Balancing::Steward { (rung_word(r.rung)) } @else { "-" } }
                        }
                        tr { td colspan="8" { code { (replay(r)) } } }
                    }
                }
            }
        }
    }
}
