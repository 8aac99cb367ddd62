//! One self-contained page: the map before and after, the choice, what it costs.
//!
//! Contract: no script, no network; shows the same [`Document`] as `result.json`.
//! The caution stands above the fold. A grid of many buses is drawn by its areas.

use maud::{DOCTYPE, Markup, PreEscaped, html};

use super::Division;
use super::base::BaseCase;
use super::figures::{ClosedFigures, Document, EffectFigures};
use super::text::tree_count;
use crate::case::model::{Bus, Grid, UnitStatus};
use crate::record::FinalState;
use crate::report::map;

const STYLE: &str = include_str!("../report/style.css");

/// Above this many buses the map shows areas and ties only.
const MAPPED_BUSES: usize = 150;

/// Rows of the outage table on the page.
const ROWS: usize = 40;

/// The page as text.
pub fn page(division: &Division, d: &Document) -> String {
    let (before, after) = maps(division);
    let markup = html! {
        (DOCTYPE)
        html lang="en" {
            head {
                meta charset="utf-8";
                meta name="viewport" content="width=device-width, initial-scale=1";
                title { (d.grid) ": divided, " (d.outcome) " - Hedgerow" }
                style { (PreEscaped(STYLE)) }
            }
            body {
                (header(d))
                main {
                    div.top { (outcome(d)) (caution(d)) }
                    (areas(d))
                    (choices(d))
                    section #before { h2 { "Before" } p.note { "Labels are loadings: flow over continuous rating. Arrows point the way the power flows." } (PreEscaped(before)) }
                    section #map { h2 { "After" } p.note { "Open ties are dashed." @if division.grid.buses.len() > MAPPED_BUSES { " A grid of this size is drawn by its areas and ties." } } (PreEscaped(after)) }
                    (price(d))
                    (outages(d))
                    footer { p { "Hedgerow " (env!("CARGO_PKG_VERSION")) ". The same grid and settings give this page byte for byte." } }
                }
            }
        }
    };
    markup.into_string()
}

/// Map before and after, as SVG.
pub fn maps(division: &Division) -> (String, String) {
    let grid = &division.grid;
    if grid.buses.len() <= MAPPED_BUSES {
        let draw = |base: &BaseCase| map::svg(grid, &rest(grid, base));
        return (draw(&division.before), draw(&division.after));
    }
    let (small, ties) = by_area(division);
    let draw = |base: &BaseCase| {
        let pick = |list: &[f64]| ties.iter().map(|&line| list[line]).collect();
        let part = BaseCase {
            injection_mw: vec![0.0; small.buses.len()],
            flow_mw: pick(&base.flow_mw),
            angle_rad: vec![0.0; small.buses.len()],
            closed: ties.iter().map(|&line| base.closed[line]).collect(),
        };
        map::svg(&small, &rest(&small, &part))
    };
    (draw(&division.before), draw(&division.after))
}

/// A grid of one bus per area and the ties, with the ties' indices.
fn by_area(division: &Division) -> (Grid, Vec<usize>) {
    let grid = &division.grid;
    let ties = division.choices.ties.clone();
    let bus = |area: usize| {
        let own: Vec<&Bus> = grid.buses.iter().filter(|bus| bus.area == area).collect();
        let mean = |pick: fn((f64, f64)) -> f64| {
            let sum: Option<f64> = own.iter().map(|bus| bus.position.map(pick)).sum();
            sum.map(|sum| sum / own.len().max(1) as f64)
        };
        Bus {
            // The area's own name stands beside it already.
            name: String::new(),
            area,
            load_mw: 0.0,
            load_damping: 0.0,
            damping_mw_per_hz: 0.0,
            position: mean(|p| p.0).zip(mean(|p| p.1)),
        }
    };
    let lines = ties.iter().map(|&line| {
        let mut line = grid.lines[line].clone();
        (line.from, line.to) = (grid.buses[line.from].area, grid.buses[line.to].area);
        line
    });
    let small = Grid {
        buses: (0..grid.areas.len()).map(bus).collect(),
        lines: lines.collect(),
        units: Vec::new(),
        feeders: Vec::new(),
        ..grid.clone()
    };
    (small, ties)
}

/// A base case as the state that the map draws.
fn rest(grid: &Grid, base: &BaseCase) -> FinalState {
    let unit_base_mw: Vec<f64> = grid.units.iter().map(|unit| unit.base_mw).collect();
    FinalState {
        bus_island: vec![Some(0); grid.buses.len()],
        island_freq_dev_hz: vec![0.0],
        island_can_regulate: vec![true],
        bus_load_mw: grid.buses.iter().map(|bus| bus.load_mw).collect(),
        line_closed: base.closed.clone(),
        unit_in_service: grid.units.iter().map(|unit| unit.status != UnitStatus::Off).collect(),
        unit_setpoint_mw: unit_base_mw.clone(),
        unit_output_mw: unit_base_mw.clone(),
        unit_base_mw,
        feeder_shed_mw: vec![0.0; grid.feeders.len()],
        feeder_locked: vec![false; grid.feeders.len()],
        line_flow_mw: base.flow_mw.clone(),
        schedule_mw: vec![0.0; grid.lines.len()],
        agreed_mw: vec![0.0; grid.lines.len()],
        rung: vec![0; grid.areas.len()],
        steward_alive: vec![true; grid.areas.len()],
        black_load_mw: 0.0,
    }
}

fn percent(share: f64) -> String {
    format!("{:.1} %", 100.0 * share)
}

fn dash(name: &Option<String>) -> &str {
    name.as_deref().unwrap_or("-")
}

fn header(d: &Document) -> Markup {
    html! {
        header { div {
            div.mark { "Hedgerow division" }
            h1 { (d.grid) ": " (d.areas.len()) " areas, " (d.opened.len()) " of " (d.ties.len()) " ties left open" }
            p { @match &d.proposed_by { Some(method) => { "Areas proposed by " (method) "." } None => { "Areas as in the file." } } }
        } }
    }
}

fn outcome(d: &Document) -> Markup {
    let class = if d.outcome == "kept" { "outcome" } else { "outcome broken" };
    let worst = d.choices.first();
    html! {
        section class=(class) {
            h2 { "Outcome" }
            div.word { (d.outcome) }
            @if d.stopped { p { "Stopped before its end: what is finished is shown." } }
            @if let Some(worst) = worst {
                p { "Worst loading after switching: " (percent(worst.worst_loading)) " on line " (dash(&worst.worst_line)) " (before: " (percent(d.worst_loading_before)) " on " (dash(&d.worst_line_before)) ")." }
            }
            p { (d.certainty) "." }
            p { "Largest flow change outside an area after an outage inside it, solved again from scratch for " (d.outages_solved_again) " outages: " (format!("{:.1e}", d.outside_again_mw)) " MW." }
        }
    }
}

fn caution(d: &Document) -> Markup {
    html! {
        section.caution {
            h2 { "What this page can and cannot say" }
            p { "A prototype. Not protection, not certified, not judged against any standard. The local grid code, the responsible operator and licensed practice decide." }
            @for sentence in &d.caution { p { (sentence) } }
        }
    }
}

fn areas(d: &Document) -> Markup {
    html! {
        section #areas {
            h2 { "Areas" }
            table {
                thead { tr { th { "Area" } th.num { "Buses" } th.num { "Load [MW]" } th.num { "Surplus [MW]" } th.num { "Ties before" } th.num { "Ties after" } } }
                tbody { @for a in &d.areas { tr {
                    th scope="row" { (a.name) } td.num { (a.buses) } td.num { (format!("{:.1}", a.load_mw)) }
                    td.num { (format!("{:+.1}", a.surplus_mw)) } td.num { (a.ties_before) } td.num { (a.ties_after) }
                } } }
            }
            @for sentence in &d.too_large { p.note { "Note: " (sentence) "." } }
        }
    }
}

fn choices(d: &Document) -> Markup {
    html! {
        section #choices {
            h2 { "Choices of ties to leave open" }
            p.note {
                (d.ties.len()) " ties in service, " (tree_count(d)) " trees of ties (matrix-tree theorem). " (d.certainty) ". "
                @if let Some(within) = d.trees_within_ratings { "Trees with every line within its rating: " (within) ". " }
                "The dispatch is left as it is. Lines open in the file stay open."
            }
            table {
                thead { tr { th.num { "Worst loading" } th { "On line" } th { "Left open" } th { "Kept closed" } } }
                tbody { @for c in &d.choices { tr {
                    td.num { (percent(c.worst_loading)) } td { (dash(&c.worst_line)) }
                    td { (c.opened.join(", ")) } td { (c.kept.join(", ")) }
                } } }
            }
        }
    }
}

fn sides(tie: &ClosedFigures) -> Markup {
    html! {
        @for (index, side) in tie.sides.iter().enumerate() { tr {
            @if index == 0 {
                th scope="row" rowspan="2" { (tie.line) }
                td.num rowspan="2" { (format!("{:+.1}", tie.flow_before_mw)) }
                td.num rowspan="2" { (format!("{:+.1}", tie.flow_after_mw)) }
                td.num rowspan="2" { (percent(tie.loading)) }
            }
            td { (side.areas.join(", ")) }
            td.num { (format!("{:+.1}", side.surplus_mw)) } td.num { (format!("{:.0}", side.inertia_mws)) }
            td.num { (format!("{:.1}", side.reserve_up_mw)) }
            td.num { "+" (format!("{:.0}", side.room_up_mw)) " / -" (format!("{:.0}", side.room_down_mw)) }
            td { @if let (Some(unit), Some(mw)) = (&side.largest_unit, side.largest_unit_mw) { (unit) " " (format!("{mw:.0}")) } @else { "-" } }
            @if side.can_balance { td { "enough" } } @else { td.no { "NOT ENOUGH" } }
        } }
    }
}

fn price(d: &Document) -> Markup {
    html! {
        section #price {
            h2 { "What it costs" }
            h3 { "Angle standing across each opened tie" }
            table {
                thead { tr { th { "Tie" } th.num { "Flow before [MW]" } th.num { "Angle before [deg]" } th.num { "Angle after [deg]" } } }
                tbody { @for t in &d.opened { tr {
                    th scope="row" { (t.line) } td.num { (format!("{:+.1}", t.flow_before_mw)) }
                    td.num { (format!("{:+.1}", t.angle_before_deg)) } td.num { (format!("{:+.1}", t.angle_after_deg)) }
                } } }
            }
            h3 { "What the trip of each closed tie would split" }
            p.note { "Surplus is what each side would be out of balance by. Room is what its available units may rise and fall within their normal range." }
            table style="font-size:12.5px" {
                thead { tr { th { "Tie" } th.num { "Before [MW]" } th.num { "After [MW]" } th.num { "Loading" } th { "Side" } th.num { "Surplus [MW]" } th.num { "Inertia [MW s]" } th.num { "Reserve [MW]" } th.num { "Room [MW]" } th { "Largest unit [MW]" } th { "Room" } } }
                tbody { @for t in &d.closed { (sides(t)) } }
            }
            h3 { "Lost to N-1" }
            p { (d.lost_to_n1.len()) " lines whose single outage did not split the grid before and does now: " (d.lost_to_n1.join(", ")) ". Bridges: " (d.bridges_before) " before, " (d.bridges_after) " after." }
        }
    }
}

fn effect(effect: &Option<EffectFigures>) -> Markup {
    html! {
        @match effect {
            Some(e) => {
                td.num { (format!("{:.3}", e.outside_mw)) } td { (dash(&e.outside_line)) }
                @if e.worst_loading > super::FULL { td.num.no { (percent(e.worst_loading)) } } @else { td.num { (percent(e.worst_loading)) } }
            }
            None => { td colspan="3" { "splits the grid" } }
        }
    }
}

fn outages(d: &Document) -> Markup {
    html! {
        section #outages {
            h2 { "Outages inside an area, seen from outside" }
            p.note {
                "Largest flow change outside the area per outage (outage factors of the DC model), and the worst loading anywhere it reaches. "
                "After the division every block lies inside one area (" (d.leaks) " reach over a border), so the factors outside are zero. "
                @if d.outages.len() > ROWS { "The first " (ROWS) " of " (d.outages.len()) "; all are in outages.csv. " }
                @if d.outages_left_out > 0 { (d.outages_left_out) " lines with small base flow were left out." }
            }
            p { "Outages after which a line is above its rating: " (d.overloading_before) " before, " (d.overloading_after) " after." }
            h3 { "Pockets" }
            p.note { "Joined to the rest by bridges only: an outage inside one leaves all flows outside it alone." }
            table {
                thead { tr { th.num { "Pocket" } th { "Area" } th.num { "Buses" } th.num { "Lines" } } }
                tbody { @for (index, pocket) in d.pockets.iter().take(ROWS).enumerate() { tr {
                    td.num { (index + 1) } td { (pocket.area) } td.num { (pocket.buses) } td.num { (pocket.lines) }
                } } }
            }
            @if d.pockets.len() > ROWS { p.note { "and " (d.pockets.len() - ROWS) " more in result.json." } }
            h3 { "Outages" }
            table {
                thead {
                    tr { th rowspan="2" { "Line" } th rowspan="2" { "Area" } th.num rowspan="2" { "Pocket" } th colspan="3" { "Before" } th colspan="3" { "After" } }
                    tr { th.num { "Outside [MW]" } th { "on" } th.num { "Worst" } th.num { "Outside [MW]" } th { "on" } th.num { "Worst" } }
                }
                tbody { @for o in d.outages.iter().take(ROWS) { tr {
                    th scope="row" { (o.line) } td { (o.area) } td.num { @match o.pocket { Some(pocket) => { (pocket) } None => { "-" } } } (effect(&o.before)) (effect(&o.after))
                } } }
            }
        }
    }
}
