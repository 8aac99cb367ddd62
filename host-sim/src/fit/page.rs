//! The table as one self-contained page with a bar picture.

use super::show::{NOT_MEASURED, assumptions};
use super::{AreaFit, CoreFit, Fit, Spread};
use maud::{DOCTYPE, Markup, PreEscaped, html};
use std::fmt::Write as _;

const STYLE: &str = include_str!("../report/style.css");
/// Width of the bars' field.
const BAR_WIDTH: f64 = 560.0;
/// Height of one bar with its gap.
const BAR_STEP: f64 = 26.0;
/// Where bars begin.
const BAR_LEFT: f64 = 220.0;

/// The page as text.
pub fn page(fit: &Fit) -> String {
    let markup = html! {
        (DOCTYPE)
        html lang="en" {
            head {
                meta charset="utf-8";
                meta name="viewport" content="width=device-width, initial-scale=1";
                title { "Fit of " (fit.grid) " - Hedgerow" }
                style { (PreEscaped(STYLE)) }
            }
            body {
                header { div {
                    div.mark { "Hedgerow fit" }
                    h1 { "Do the stewards of " (fit.grid) " fit?" }
                    p { "Every figure comes from an image that was built and run for this page." }
                } }
                main {
                    section.caution {
                        p { b { "Instructions are not cycles. " } "An emulator counts what is executed; pipelines, caches and wait states are not in it." }
                        @for line in assumptions(fit) { p { (line) } }
                    }
                    section { h2 { "Share of the tick" } (PreEscaped(bars(fit, "share of the tick", &|area| area.tick_share))) }
                    section { h2 { "Share of the link" } (PreEscaped(bars(fit, "share of the link", &|area| area.link_share))) }
                    @for core in &fit.cores { (section(fit, core)) }
                }
            }
        }
    };
    markup.into_string()
}

fn section(fit: &Fit, core: &CoreFit) -> Markup {
    html! {
        section {
            h2 { (core.name) " at " (core.mhz) " MHz" }
            @if let Some(why) = &core.not_measured { p.no { (NOT_MEASURED) ": " (why) } }
            table { tbody {
                @if let Some(image) = &core.image {
                    tr { th { "Flash" } td { (image.flash_bytes()) " bytes: text " (image.text_bytes) ", constants " (image.rodata_bytes) ", initial values " (image.data_bytes) } }
                    tr { th { "Static RAM" } td { (image.static_ram_bytes()) " bytes, of which the steward " (image.steward_bytes) } }
                }
                @if let Some(holds) = &core.holds {
                    tr { th { "Holds" } td { (holds.buses) " buses, " (holds.unknowns) " unknowns, " (holds.rows) " rows" } }
                }
                tr { th { "Largest area" } td {
                    @match &core.largest {
                        Some(largest) => { (largest.buses) " buses on " (fit.flash_kib) " KiB flash and " (fit.ram_kib) " KiB RAM (ended by " (largest.ended_by) ")" }
                        None => (NOT_MEASURED),
                    }
                } }
            } }
            (areas(core))
        }
    }
}

fn areas(core: &CoreFit) -> Markup {
    let cell = |s: Option<Spread>| {
        s.map_or(NOT_MEASURED.to_owned(), |s| format!("{} / {} / {}", s.min, s.median, s.max))
    };
    let rebuild = |s: Option<Spread>| {
        s.map_or(NOT_MEASURED.to_owned(), |s| format!("{} ({} ticks)", s.max, s.ticks))
    };
    let bytes = |n: Option<u64>| n.map_or(NOT_MEASURED.to_owned(), |n| n.to_string());
    html! {
        table {
            thead { tr {
                th { "Area" } th.num { "Instructions, min / median / max" } th.num { "With rebuild, max" }
                th.num { "Stack, worst" } th.num { "Stack, left" } th.num { "Bytes in" } th.num { "Bytes out" }
            } }
            tbody {
                @for area in &core.areas {
                    tr {
                        th { (area.area) }
                        td.num { (cell(area.instructions)) }
                        td.num { (rebuild(area.rebuild_instructions)) }
                        td.num { (bytes(area.stack_bytes)) }
                        td.num { (bytes(area.stack_left_bytes)) }
                        td.num { (cell(area.heard_bytes)) }
                        td.num { (cell(area.said_bytes)) }
                    }
                }
            }
        }
    }
}

/// Bars of a share, one per area and core; the frame is the whole.
fn bars(fit: &Fit, what: &str, share: &dyn Fn(&AreaFit) -> Option<f64>) -> String {
    let rows: Vec<(String, Option<f64>)> = fit
        .cores
        .iter()
        .flat_map(|core| {
            core.areas.iter().map(|area| (format!("{} on {}", area.area, core.name), share(area)))
        })
        .collect();
    let height = rows.len() as f64 * BAR_STEP + 8.0;
    let mut out = format!(
        r#"<svg viewBox="0 0 {:.0} {height:.0}" role="img" aria-label="{what}" font-family="sans-serif" font-size="13">"#,
        BAR_LEFT + BAR_WIDTH + 90.0
    );
    for (index, (label, value)) in rows.iter().enumerate() {
        let top = index as f64 * BAR_STEP + 4.0;
        let middle = top + 13.0;
        let _ = write!(
            out,
            r##"<text x="0" y="{middle:.0}" fill="#23302b">{}</text><rect x="{BAR_LEFT}" y="{top:.0}" width="{BAR_WIDTH}" height="17" fill="none" stroke="#dfe6e1"/>"##,
            html! { (label) }.into_string()
        );
        let (width, text, colour) = match value {
            Some(v) if *v > 1.0 => (BAR_WIDTH, format!("{:.1} %: too much", 100.0 * v), "#b3261e"),
            Some(v) => (BAR_WIDTH * v, format!("{:.1} %", 100.0 * v), "#3c7a52"),
            None => (0.0, NOT_MEASURED.to_owned(), "#5b6b70"),
        };
        let _ = write!(
            out,
            r##"<rect x="{BAR_LEFT}" y="{top:.0}" width="{width:.1}" height="17" fill="{colour}"/><text x="{:.0}" y="{middle:.0}" fill="#23302b">{text}</text>"##,
            BAR_LEFT + BAR_WIDTH + 6.0
        );
    }
    out.push_str("</svg>");
    out
}

#[cfg(test)]
mod tests {
    use super::super::growth::Capacity;
    use super::*;
    use crate::fit::show;

    fn area(tick_share: Option<f64>) -> AreaFit {
        AreaFit {
            area: "Ash<mere".to_owned(),
            needs: Capacity { buses: 12, unknowns: 20, rows: 19 },
            instructions: tick_share.map(|_| Spread {
                ticks: 9,
                min: 690_000,
                median: 700_000,
                max: 710_000,
            }),
            rebuild_instructions: None,
            tick_share,
            stack_bytes: tick_share.map(|_| 7_000),
            stack_left_bytes: None,
            heard_bytes: None,
            said_bytes: None,
            link_share: None,
        }
    }

    fn fit(tick_share: Option<f64>) -> Fit {
        Fit {
            schema: 1,
            grid: "Quillon".to_owned(),
            tick_s: 0.1,
            cycles_per_instruction: 1.5,
            baud: 115_200.0,
            flash_kib: 512.0,
            ram_kib: 128.0,
            cores: vec![CoreFit {
                core: "m4".to_owned(),
                name: "Cortex-M4F".to_owned(),
                mhz: 168.0,
                image: None,
                holds: None,
                areas: vec![area(tick_share)],
                largest: None,
                not_measured: None,
            }],
        }
    }

    #[test]
    fn a_figure_that_is_missing_says_so_in_text_and_page() {
        let fit = fit(None);
        assert!(show::text(&fit).contains(NOT_MEASURED));
        assert!(page(&fit).contains(NOT_MEASURED));
    }

    #[test]
    fn a_tick_that_is_too_long_is_said_in_words_too() {
        assert!(page(&fit(Some(1.2))).contains("120.0 %: too much"));
        let found = page(&fit(Some(0.25)));
        assert!(found.contains("25.0 %") && !found.contains("too much"));
    }

    #[test]
    fn names_are_escaped_and_nothing_is_fetched() {
        let found = page(&fit(Some(0.25)));
        assert!(found.contains("Ash&lt;mere") && !found.contains("Ash<mere"));
        assert!(!found.contains("http"));
    }

    #[test]
    fn text_and_json_state_the_cycles_assumed() {
        let fit = fit(Some(0.25));
        assert!(show::text(&fit).contains("1.5 cycles"));
        assert!(show::text(&fit).contains("690000/700000/710000"));
        let document: serde_json::Value = serde_json::from_str(&show::json(&fit)).unwrap();
        assert_eq!(document["cycles_per_instruction"], 1.5);
        assert_eq!(
            document["cores"][0]["areas"][0]["rebuild_instructions"],
            serde_json::Value::Null
        );
    }
}
