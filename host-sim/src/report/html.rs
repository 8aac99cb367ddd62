//! One self-contained page: no script, no network, prints well.
//!
//! Contract: the page shows the same [`Document`] as `result.json` and embeds
//! the two pictures. What the model leaves out stands above the fold. Every
//! name from a file is escaped by the template.

use maud::{DOCTYPE, Markup, PreEscaped, html};

use super::figures::{AreaFigures, Document, Place, RunFigures, document};
use super::summary::settling;
use super::{Bundle, compare, map, picture};
use crate::case::model::{Grid, Play};
use crate::judge::{Fact, Outcome};

const STYLE: &str = include_str!("style.css");

/// The page as text.
pub fn page(bundle: &Bundle) -> String {
    let d = document(bundle);
    let markup = html! {
        (DOCTYPE)
        html lang="en" {
            head {
                meta charset="utf-8";
                meta name="viewport" content="width=device-width, initial-scale=1";
                title { (d.play) ": " (word(&d.run)) " - Hedgerow" }
                style { (PreEscaped(STYLE)) }
            }
            body {
                (header(&d))
                main {
                    div.top { (outcome(&d.run)) (caution(bundle)) }
                    (cards(&d.run))
                    (areas(&d.run))
                    (facts(&d.run))
                    (proofs(&d))
                    (story(&d))
                    @if !d.compare.is_empty() { (compare::section(&d)) }
                    section #map {
                        h2 { "The grid at the end" }
                        p.note { "Labels are loadings: flow over continuous rating. Arrows point the way the power flows." }
                        (PreEscaped(map::svg(bundle.grid, &bundle.recording.end)))
                    }
                    section #picture { h2 { "The run" } (PreEscaped(picture::svg(bundle.grid, &bundle.play.events, bundle.recording))) }
                    (settings(bundle.grid, bundle.play))
                    footer {
                        p { "Hedgerow " (d.meta.version) ". The same grid, play and seed give this page byte for byte." }
                    }
                }
            }
        }
    };
    markup.into_string()
}

fn word(run: &RunFigures) -> &'static str {
    match run.outcome {
        Outcome::Kept => "kept",
        Outcome::Broken => "broken",
    }
}

fn header(d: &Document) -> Markup {
    html! {
        header { div {
            div.mark { "Hedgerow rehearsal" }
            h1 { (d.title) }
            p {
                "Play " (d.play) " on " (d.grid) " | scheme " (d.run.scheme)
                " | " (format!("{:.1}", d.run.duration_s)) " s in ticks of " (d.tick_s) " s | seed " (d.seed)
            }
        } }
    }
}

fn outcome(run: &RunFigures) -> Markup {
    let class = if run.outcome == Outcome::Broken { "outcome broken" } else { "outcome" };
    html! {
        section class=(class) {
            h2 { "Outcome" }
            div.word { (word(run)) }
            @if run.stopped { p { "Stopped at " (format!("{:.1}", run.duration_s)) " s, before its end." } }
            @if run.broken_by.is_empty() {
                p { "Every fact below that could be judged was met at the end of the run." }
            } @else {
                ul { @for s in &run.broken_by { li { (s) } } }
            }
            @if !run.judge.not_judged.is_empty() {
                h3 { "Not judged" }
                ul { @for s in &run.judge.not_judged { li { (s) } } }
            }
        }
    }
}

/// What the figures of this run mean, and what they do not.
fn caution(bundle: &Bundle) -> Markup {
    html! {
        section.caution {
            h2 { "What this page can and cannot say" }
            p { "A prototype. Not protection, not certified, not judged against any standard. The local grid code, the responsible operator and licensed practice decide." }
            p { "The model: lossless DC power flow with swing equations, governors and turbines. No voltage, reactive power, fault level or angle stability. Figures are figures of this model." }
            p { (measurements(bundle.play)) " " (actuators(bundle.grid)) " Off nominal frequency, limits hold for set-points only." }
            p { "Ratings are the continuous ones of the grid file" (short_time(bundle.grid)) "; a line counts as above its rating from 100.1 % on." }
        }
    }
}

fn measurements(play: &Play) -> String {
    let l = &play.links;
    let faulty = l.delay_ticks > 0
        || l.jitter_ticks > 0
        || [l.loss, l.duplicate, l.reorder, l.corrupt].iter().any(|p| *p > 0.0);
    let where_ = match (faulty, l.plant_too) {
        (false, _) => return "Measurements are exact and simultaneous, links ideal.".into(),
        (true, true) => "between stewards and between plant and stewards",
        (true, false) => "between stewards",
    };
    format!(
        "Measured values are exact and simultaneous. Frames {where_}: delay {} to {} ticks, loss {:.1} %, doubled {:.1} %, overtaken {:.1} %, corrupted {:.1} %.",
        l.delay_ticks,
        l.delay_ticks.saturating_add(l.jitter_ticks),
        100.0 * l.loss,
        100.0 * l.duplicate,
        100.0 * l.reorder,
        100.0 * l.corrupt
    )
}

fn actuators(grid: &Grid) -> String {
    match grid.units.iter().filter(|u| u.gain_error != 0.0 || u.bias_mw != 0.0).count() {
        0 => "Units follow their set-points exactly, within ramp and lag.".into(),
        n => format!("{n} units deliver other than their set-point, as the grid file says."),
    }
}

fn short_time(grid: &Grid) -> &'static str {
    match grid.lines.iter().any(|l| l.rating_short_mw.is_some()) {
        true => "; its short-time ratings are not used to judge",
        false => "",
    }
}

fn card(what: &str, value: &str, where_: &str) -> Markup {
    html! { div.card { span.what { (what) } b { (value) } span.where { (where_) } } }
}

fn cards(run: &RunFigures) -> Markup {
    let at = |kind: &str, p: &Place| format!("{kind} {}, {:.2} s", p.name, p.at_s);
    let (settled, meaning) = settling(run);
    html! {
        section #figures {
            h2 { "Figures" }
            div.cards {
                (card("Lowest frequency", &format!("{:.3} Hz", run.lowest_frequency_hz), &at("bus", &run.lowest_frequency_at)))
                (card("Highest frequency", &format!("{:.3} Hz", run.highest_frequency_hz), &at("bus", &run.highest_frequency_at)))
                (card("Steepest slope over 500 ms", &format!("{:+.3} Hz/s", run.steepest_hz_per_s), &at("area", &run.steepest_at)))
                (card("Back within 10 mHz", &settled, meaning))
                (card("Worst loading", &format!("{:.1} %", 100.0 * run.worst_loading), &at("line", &run.worst_loading_at)))
                (card("Time above rating", &format!("{:.2} s", run.over_rating_s), "any line, in all"))
                (card("Load shed", &format!("{:.2} MW", run.judge.shed_mw), &format!("least possible: {:.2} MW", run.judge.least_shed_mw)))
                (card("Load in the dark", &format!("{:.1} MW", run.black_load_mw), "at the end"))
            }
        }
    }
}

fn area_row(area: &AreaFigures, least: Option<&&'static str>) -> Markup {
    // A baseline has no rungs, whatever the record's zeros say.
    let rungs = match area.verdict {
        Some(_) => [area.rung, area.worst_rung, least.copied().unwrap_or("-")],
        None => ["-"; 3],
    };
    let verdict = if area.steward_alive { area.verdict.unwrap_or("-") } else { "steward dead" };
    html! {
        tr {
            th scope="row" { (area.name) }
            @for rung in rungs { td { (rung) } } td { (verdict) }
            td.num { (area.proofs) }
            td.num { (format!("{:.2}", area.ties_off_schedule_mw)) }
            td.num { (area.units_moved) }
            td.num { (format!("{:.2}", area.shed_mw)) }
            td.num { (area.frames.sent) } td.num { (area.frames.lost) } td.num { (area.frames.refused) }
        }
    }
}

fn areas(run: &RunFigures) -> Markup {
    html! {
        section #areas {
            h2 { "Areas at the end" }
            table {
                thead { tr {
                    th { "Area" } th { "Rung" } th { "Worst" } th { "Least" } th { "Verdict" }
                    th.num { "Proofs" } th.num { "Ties off [MW]" } th.num { "Units moved" } th.num { "Shed [MW]" }
                    th.num { "Frames sent" } th.num { "lost" } th.num { "refused" }
                } }
                tbody { @for (i, area) in run.areas.iter().enumerate() { (area_row(area, run.judge.least_rung.get(i))) } }
            }
            p.note style="margin-top:10px" {
                "Least: the smallest rung at which an independent solver finds set-points that meet every limit. "
                "Ties off: largest deviation from schedule; agreed help counts as one."
            }
        }
    }
}

fn fact_row(f: &Fact) -> Markup {
    html! {
        tr {
            th scope="row" { (f.name) } td { (f.where_) }
            td.num { (format!("{:.3}", f.worst)) } td.num { (format!("{:.3}", f.limit)) } td { (f.unit) }
            @if f.met { td { "met" } } @else { td.no { "BROKEN" } }
        }
    }
}

fn facts(run: &RunFigures) -> Markup {
    let j = &run.judge;
    html! {
        section #facts {
            h2 { "Held against an independent optimum" }
            p.note {
                "The end of the run against the optimum of the whole grid, found in double precision by an interior-point solver that shares neither code nor method with the stewards. "
                @match j.optimum_cost {
                    Some(best) => { "Cost " (format!("{:.4}", j.cost)) ", optimum " (format!("{best:.4}")) "." }
                    None => { "Cost " (format!("{:.4}", j.cost)) "; no reference for it." }
                }
            }
            table {
                thead { tr { th { "Fact" } th { "Worst at" } th.num { "Worst" } th.num { "Limit" } th { "Unit" } th { "" } } }
                tbody { @for f in j.facts.iter().filter(|f| f.name != "rung") { (fact_row(f)) } }
            }
        }
    }
}

fn proofs(d: &Document) -> Markup {
    html! {
        section #proofs {
            h2 { "Proofs" }
            @if d.proofs.is_empty() {
                p.note { "No steward proved a rung impossible." }
            } @else {
                p.note { "Each shows that no set-point within the rung's ranges meets the limits, for the numbers its steward held. The host rebuilt each one in double precision." }
                table {
                    thead { tr { th.num { "Time [s]" } th { "Area" } th { "Impossible" } th.num { "Claimed [MW]" } th.num { "Verified [MW]" } th { "Host" } } }
                    tbody { @for p in &d.proofs { tr {
                        td.num { (format!("{:.1}", p.at_s)) } td { (p.area) } td { (p.rung) }
                        td.num { (format!("{:.3}", p.claimed_mw)) } td.num { (format!("{:.3}", p.verified_mw)) }
                        @if p.accepted { td { "accepted" } } @else { td.no { "REFUSED" } }
                    } } }
                }
            }
        }
    }
}

fn story(d: &Document) -> Markup {
    html! {
        section #story {
            h2 { "What happened" }
            @if d.events.is_empty() { p.note { "Nothing." } }
            ol.story { @for e in &d.events { li { time { (format!("{:.1} s", e.at_s)) } (e.text) } } }
        }
    }
}

fn settings(grid: &Grid, play: &Play) -> Markup {
    let s = &play.steward;
    let rows: [(&str, String); 10] = [
        (
            "Grid",
            format!(
                "{} areas, {} buses, {} lines, {} units, {} feeders",
                grid.areas.len(),
                grid.buses.len(),
                grid.lines.len(),
                grid.units.len(),
                grid.feeders.len()
            ),
        ),
        ("Base and nominal frequency", format!("{} MVA, {} Hz", grid.base_mva, grid.nominal_hz)),
        ("Tick and plant step", format!("{} s, {} s", play.run.tick_s, play.run.plant_step_s)),
        ("Iterations per tick, shadow", format!("{}, {}", s.iterations, s.shadow_iterations)),
        ("Filter of load estimates", format!("{} s", s.filter_s)),
        ("Estimates frozen after an event", format!("{} s", s.event_freeze_s)),
        ("Tie band", format!("{} MW", s.tie_band_mw)),
        ("Tie price at each end", format!("{} per pu", s.tie_price_per_pu)),
        ("Proof threshold", format!("{} MW", s.proof_threshold_mw)),
        ("Help radius", format!("{} areas", s.help_hops)),
    ];
    html! {
        section #settings {
            h2 { "Settings" }
            table { tbody { @for (name, value) in rows { tr { th scope="row" { (name) } td { (value) } } } } }
        }
    }
}
