//! One self-contained page of margins: table, bars, map.
//!
//! Contract: no script, no network; shows the same [`Document`] as the JSON.

use maud::{DOCTYPE, Markup, PreEscaped, html};

use super::figures::{Document, RECOMMENDED_HOW, digits};
use super::mode::Swing;
use super::search::Map;
use crate::case::model::Play;
use crate::report::svg::{ALARM, Anchor, Drawing, HAIR, HEDGE, INK, SLATE};

const STYLE: &str = include_str!("../report/style.css");
/// Length of a full bar in px.
const BAR: f64 = 520.0;
/// Width of a map's cell in px.
const CELL: f64 = 54.0;

/// The page as text.
pub fn page(d: &Document, play: &Play) -> String {
    let markup = html! {
        (DOCTYPE)
        html lang="en" {
            head {
                meta charset="utf-8";
                meta name="viewport" content="width=device-width, initial-scale=1";
                title { (d.play) ": margins - Hedgerow" }
                style { (PreEscaped(STYLE)) }
            }
            body {
                header { div {
                    div.mark { "Hedgerow margins" }
                    h1 { "How far " (d.play) " can go" }
                    p { "On " (d.grid) " | " (d.seeds.len()) " seeds" @if d.stopped { " | stopped before its end" } }
                } }
                main {
                    section.caution {
                        p { b { "What this is. " } "One imperfection at a time, everything else as in the play, for these seeds and in the lossless DC model: no voltage, reactive power, fault or angle stability. Kept means: frequency settled, no line above its rating beyond what the errors explain, no deeper rung and no more load shed than without the imperfection." }
                        p { "Not varied: clock drift." }
                    }
                    (table(d))
                    section #picture { h2 { "Share of the range tried" } (PreEscaped(bars(d, play))) }
                    @if let Some(map) = &d.map { section #map { h2 { "Two at a time" } (PreEscaped(map_svg(map))) } }
                    (more(d))
                    footer { p { "Hedgerow " (env!("CARGO_PKG_VERSION")) ". The same grid, play, seeds and options give this page byte for byte." } }
                }
            }
        }
    };
    markup.into_string()
}

fn table(d: &Document) -> Markup {
    html! {
        section {
            h2 { "Margins" }
            table {
                thead { tr { th { "imperfection" } th { "what it is" } th.num { "kept up to" } th.num { "broken at" } th { "what broke first" } } }
                tbody {
                    @for m in &d.margins {
                        tr {
                            th { (m.knob.word()) } td { (m.knob.sentence()) }
                            td.num { (digits(m.kept)) " " (m.unit) }
                            td.num { @if let Some(b) = m.broken { (digits(b)) " " (m.unit) } @else { "-" } }
                            td { (m.broken_by.as_deref().unwrap_or("nothing in the range tried")) }
                        }
                    }
                }
            }
        }
    }
}

/// A bar per imperfection: what was kept of the range tried.
fn bars(d: &Document, play: &Play) -> String {
    let mut drawing = Drawing::default();
    for (place, m) in d.margins.iter().enumerate() {
        let y = 10.0 + 30.0 * place as f64;
        let (_, most) = m.knob.range(play);
        drawing.text((150.0, y + 14.0), Anchor::End, 13.0, INK, m.knob.word());
        drawing.rect((160.0, y), (BAR, 18.0), HAIR, "");
        drawing.rect((160.0, y), (BAR * (m.kept / most).clamp(0.0, 1.0), 18.0), HEDGE, "");
        if let Some(broken) = m.broken {
            let x = 160.0 + BAR * (broken / most).clamp(0.0, 1.0);
            drawing.line((x, y - 2.0), (x, y + 20.0), ALARM, 2.0, "");
        }
        let label = format!("{} {} of {} {}", digits(m.kept), m.unit, digits(most), m.unit);
        drawing.text((172.0 + BAR, y + 14.0), Anchor::Start, 12.0, SLATE, &label);
    }
    drawing.finish(
        880.0,
        20.0 + 30.0 * d.margins.len() as f64,
        "margins as shares of the ranges tried",
    )
}

/// A field of cells: filled and a dot where kept, a cross where broken.
fn map_svg(map: &Map) -> String {
    let mut drawing = Drawing::default();
    let height = CELL * map.up_values.len() as f64;
    for (row, (cells, value)) in map.kept.iter().zip(&map.up_values).enumerate() {
        let y = 20.0 + height - CELL * (row + 1) as f64;
        drawing.text((112.0, y + 32.0), Anchor::End, 12.0, SLATE, &digits(*value));
        for (column, &kept) in cells.iter().enumerate() {
            let x = 120.0 + CELL * column as f64;
            let (fill, mark) = if kept { (HEDGE, "+") } else { (HAIR, "x") };
            drawing.rect((x, y), (CELL - 2.0, CELL - 2.0), fill, "");
            let colour = if kept { "#ffffff" } else { ALARM };
            drawing.text((x + CELL / 2.0, y + 32.0), Anchor::Middle, 14.0, colour, mark);
        }
    }
    for (column, value) in map.across_values.iter().enumerate() {
        let x = 120.0 + CELL * (column as f64 + 0.5);
        drawing.text((x, height + 40.0), Anchor::Middle, 12.0, SLATE, &digits(*value));
    }
    let label = |k: super::knob::Knob| format!("{}, {}", k.word(), k.unit());
    drawing.text(
        (120.0, height + 62.0),
        Anchor::Start,
        13.0,
        INK,
        &format!("across: {}; up: {}; + kept, x broken", label(map.across), label(map.up)),
    );
    drawing.finish(880.0, height + 76.0, "map over two imperfections")
}

fn more(d: &Document) -> Markup {
    let swing = |s: &Option<Swing>| match s {
        Some(s) => format!(
            "{} against {}, period {:.2} s, damping ratio {:.3}",
            d.areas[s.areas.0], d.areas[s.areas.1], s.period_s, s.damping
        ),
        None => "no swing stands out".to_owned(),
    };
    html! {
        section {
            h2 { "Slowest inter-area swing" }
            p { "With stewards: " (swing(&d.swing_steward)) ". Droop alone: " (swing(&d.swing_droop)) "." }
            @if let (Some(tick), Some(least), Some(iterations)) = (d.recommended_tick_s, d.least_iterations, d.recommended_iterations) {
                h2 { "Recommended" }
                p { "Tick " (tick) " s, " (iterations) " iterations per tick (least kept: " (least) "). " (RECOMMENDED_HOW) }
            }
        }
    }
}
