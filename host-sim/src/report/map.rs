//! The grid as a one-line map, at the end of a run.
//!
//! Contract: positions from the grid file if every bus has one, else a layout of
//! our own that depends only on the grid. Loading is told by colour, width and
//! label; an open line is dashed and thin; a dark bus is a crossed circle.
//! Area tints are drawn first, then lines, then buses, then names.

use super::svg::{ALARM, Anchor, Drawing, HEDGE, INK, SLATE, WARN, colour};
use crate::case::model::Grid;
use crate::record::FinalState;

const WIDTH: f64 = 1000.0;
const MARGIN: f64 = 60.0;
const FOOT: f64 = 40.0;

/// Beyond this many lines only ties and lines from 80 % on are labelled.
const LABELLED_LINES: usize = 60;

/// Text with a white seam, so that it reads over lines.
const HALO: &str =
    r##"paint-order="stroke" stroke="#ffffff" stroke-width="3" stroke-linejoin="round""##;

/// Draw it.
pub fn svg(grid: &Grid, end: &FinalState) -> String {
    let raw = match given_positions(grid) {
        Some(given) => given,
        None => own_layout(grid),
    };
    let (at, height) = scaled(&raw);
    let mut out = Drawing::default();
    out.rect((0.0, 0.0), (WIDTH, height), "#ffffff", "");
    tints(&mut out, grid, &at);
    area_names(&mut out, grid, &at);
    lines(&mut out, grid, end, &at);
    buses(&mut out, grid, end, &at);
    legend(&mut out, height - 16.0);
    out.finish(WIDTH, height, &format!("Map of {}", grid.name))
}

fn given_positions(grid: &Grid) -> Option<Vec<(f64, f64)>> {
    grid.buses.iter().map(|b| b.position).collect()
}

/// Areas on a circle, the buses of each on a smaller one, turned so that
/// the first bus of each area looks outward.
fn own_layout(grid: &Grid) -> Vec<(f64, f64)> {
    let turn = std::f64::consts::TAU;
    let areas = grid.areas.len().max(1) as f64;
    let mut seen = vec![0usize; grid.areas.len()];
    let count = |a: usize| grid.buses.iter().filter(|b| b.area == a).count().max(1) as f64;
    grid.buses
        .iter()
        .map(|bus| {
            let around = turn * bus.area as f64 / areas;
            let spread = if grid.areas.len() > 1 { 2.6 } else { 0.0 };
            let own = around + turn * seen[bus.area] as f64 / count(bus.area);
            seen[bus.area] += 1;
            (1.5 * spread * around.cos() + 1.3 * own.cos(), spread * around.sin() + own.sin())
        })
        .collect()
}

/// Fit into the drawing; returns the positions and the height they ask for.
fn scaled(raw: &[(f64, f64)]) -> (Vec<(f64, f64)>, f64) {
    let bounds = |pick: &dyn Fn(&(f64, f64)) -> f64| {
        let finite = raw.iter().map(pick).filter(|v| v.is_finite());
        finite.fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), v| (l.min(v), h.max(v)))
    };
    let ((x0, x1), (y0, y1)) = (bounds(&|p| p.0), bounds(&|p| p.1));
    let (w, h) = ((x1 - x0).max(1e-9), (y1 - y0).max(1e-9));
    let room = WIDTH - 2.0 * MARGIN;
    // Wider than tall as far as the places allow; never a strip, never a tower.
    let tall = (room * h / w).clamp(200.0, 620.0);
    let scale = (room / w).min(tall / h);
    let (dx, dy) = ((room - scale * w) / 2.0, (tall - scale * h) / 2.0);
    let at = raw
        .iter()
        .map(|(x, y)| (MARGIN + dx + scale * (x - x0), MARGIN + dy + scale * (y - y0)))
        .collect();
    (at, tall + 2.0 * MARGIN + FOOT)
}

/// A hedge around each area: thick strokes of its colour along its own lines.
fn tints(out: &mut Drawing, grid: &Grid, at: &[(f64, f64)]) {
    for a in 0..grid.areas.len() {
        out.raw(&format!(
            r#"<g opacity="0.16" stroke="{c}" fill="{c}" stroke-linecap="round">"#,
            c = colour(a)
        ));
        for line in &grid.lines {
            if grid.buses[line.from].area == a && grid.buses[line.to].area == a {
                out.line(at[line.from], at[line.to], colour(a), 58.0, "");
            }
        }
        for (b, (x, y)) in at.iter().enumerate().filter(|(b, _)| grid.buses[*b].area == a) {
            let _ = b;
            out.raw(&format!(r#"<circle cx="{x:.1}" cy="{y:.1}" r="34"/>"#));
        }
        out.raw("</g>");
    }
}

/// Half the size of a box that a piece of text needs.
type Half = (f64, f64);

/// Names stand above or below their area, wherever fewer lines run.
fn area_names(out: &mut Drawing, grid: &Grid, at: &[(f64, f64)]) {
    let lines: Vec<((f64, f64), (f64, f64))> =
        grid.lines.iter().map(|l| (at[l.from], at[l.to])).collect();
    for (a, area) in grid.areas.iter().enumerate() {
        let own: Vec<(f64, f64)> = at
            .iter()
            .enumerate()
            .filter(|(b, _)| grid.buses[*b].area == a)
            .map(|(_, p)| *p)
            .collect();
        let Some(highest) = own.iter().min_by(|p, q| p.1.total_cmp(&q.1)) else {
            continue;
        };
        let x = own.iter().map(|p| p.0).sum::<f64>() / own.len() as f64;
        let low = own.iter().map(|p| p.1).fold(f64::NEG_INFINITY, f64::max);
        let half: Half = (5.0 * area.name.chars().count() as f64, 9.0);
        let candidates = [(x, highest.1 - 43.0), (highest.0, highest.1 - 43.0), (x, low + 46.0)];
        let crossed = |c: &(f64, f64)| lines.iter().filter(|l| crosses(l, *c, half)).count();
        // The first of equals: above, if nothing speaks against it.
        let best = candidates.iter().min_by_key(|c| crossed(c)).copied().unwrap_or((x, low));
        let more = format!(r#"font-weight="700" letter-spacing="1" {HALO}"#);
        let place = (best.0, best.1 + 5.0);
        out.styled_text(place, Anchor::Middle, 15.0, colour(a), &more, &area.name);
    }
}

/// Whether a segment runs through a box, looked at in 40 places.
fn crosses(segment: &((f64, f64), (f64, f64)), centre: (f64, f64), half: Half) -> bool {
    let ((x0, y0), (x1, y1)) = *segment;
    (0..=40).map(|i| f64::from(i) / 40.0).any(|t| {
        let (x, y) = (x0 + t * (x1 - x0), y0 + t * (y1 - y0));
        (x - centre.0).abs() < half.0 && (y - centre.1).abs() < half.1
    })
}

/// Colour and width of a loading.
fn look(loading: f64) -> (&'static str, f64) {
    let width = 1.6 + 3.4 * loading.clamp(0.0, 1.2);
    match loading {
        l if l > 1.001 => (ALARM, width + 1.2),
        l if l >= 0.8 => (WARN, width),
        _ => (HEDGE, width),
    }
}

fn lines(out: &mut Drawing, grid: &Grid, end: &FinalState, at: &[(f64, f64)]) {
    let many = grid.lines.len() > LABELLED_LINES;
    let mut labels = Vec::new();
    for (l, line) in grid.lines.iter().enumerate() {
        let (from, to) = (at[line.from], at[line.to]);
        // Parallel lines stand beside each other.
        let twin = grid.lines[..l].iter().filter(|o| same_ends(o, line)).count() as f64;
        let (from, to) = beside(from, to, 9.0 * twin);
        if !end.line_closed[l] {
            out.line(from, to, SLATE, 1.2, "3 5");
            labels.push((from, to, SLATE, "open".to_owned()));
            continue;
        }
        let loading = end.line_flow_mw[l].abs() / line.rating_mw;
        let (stroke, width) = look(loading);
        out.line(from, to, stroke, width, "");
        if end.line_flow_mw[l].abs() > 0.05 {
            arrow(out, from, to, end.line_flow_mw[l] < 0.0, stroke, width);
        }
        let tie = grid.buses[line.from].area != grid.buses[line.to].area;
        if !many || tie || loading >= 0.8 {
            let text = match line.rating_mw.is_finite() {
                true => format!("{:.0} %", 100.0 * loading),
                false => format!("{:.0} MW", end.line_flow_mw[l].abs()),
            };
            labels.push((from, to, stroke, text));
        }
    }
    let mut taken: Vec<(f64, f64)> = at.to_vec();
    for (from, to, stroke, text) in labels {
        let along = |t: f64| (from.0 + t * (to.0 - from.0), from.1 + t * (to.1 - from.1) - 1.5);
        let free = |p: &(f64, f64)| {
            taken.iter().all(|q| (p.0 - q.0).abs() > 28.0 || (p.1 - q.1).abs() > 13.0)
        };
        let tries = [0.5, 0.4, 0.32, 0.74, 0.25];
        let place = tries.iter().map(|t| along(*t)).find(free).unwrap_or(along(0.5));
        taken.push(place);
        let at = (place.0, place.1 + 5.0);
        out.styled_text(at, Anchor::Middle, 10.5, stroke, HALO, &text);
    }
}

fn same_ends(a: &crate::case::model::Line, b: &crate::case::model::Line) -> bool {
    (a.from, a.to) == (b.from, b.to) || (a.from, a.to) == (b.to, b.from)
}

/// Shift a segment sideways.
fn beside(from: (f64, f64), to: (f64, f64), by: f64) -> ((f64, f64), (f64, f64)) {
    let (dx, dy) = (to.0 - from.0, to.1 - from.1);
    let length = dx.hypot(dy).max(1e-9);
    let (nx, ny) = (-dy / length * by, dx / length * by);
    ((from.0 + nx, from.1 + ny), (to.0 + nx, to.1 + ny))
}

/// A triangle at 62 % of the way, so that the label at the middle stays free.
fn arrow(
    out: &mut Drawing,
    from: (f64, f64),
    to: (f64, f64),
    backward: bool,
    fill: &str,
    width: f64,
) {
    let (from, to) = if backward { (to, from) } else { (from, to) };
    let (dx, dy) = (to.0 - from.0, to.1 - from.1);
    let length = dx.hypot(dy).max(1e-9);
    let (ux, uy) = (dx / length, dy / length);
    let (x, y) = (from.0 + 0.62 * dx, from.1 + 0.62 * dy);
    let (long, wide) = (5.0 + width, 3.0 + 0.6 * width);
    out.raw(&format!(
        r#"<polygon points="{:.1},{:.1} {:.1},{:.1} {:.1},{:.1}" fill="{fill}"/>"#,
        x + ux * long,
        y + uy * long,
        x - uy * wide,
        y + ux * wide,
        x + uy * wide,
        y - ux * wide
    ));
}

fn buses(out: &mut Drawing, grid: &Grid, end: &FinalState, at: &[(f64, f64)]) {
    for (b, bus) in grid.buses.iter().enumerate() {
        let (x, y) = at[b];
        let feeds =
            grid.units.iter().enumerate().any(|(u, unit)| unit.bus == b && end.unit_in_service[u]);
        let r = if feeds { 8.5 } else { 5.5 };
        if end.bus_island[b].is_none() {
            out.raw(&format!(
                r#"<g stroke="{INK}" stroke-width="1.6"><circle cx="{x:.1}" cy="{y:.1}" r="7.5" fill="{INK}"/><path stroke="white" d="M{:.1} {:.1}l7.6 7.6m0 -7.6l-7.6 7.6"/></g>"#,
                x - 3.8,
                y - 3.8
            ));
        } else {
            let fill = if feeds { colour(bus.area) } else { "#ffffff" };
            out.raw(&format!(
                r#"<circle cx="{x:.1}" cy="{y:.1}" r="{r}" fill="{fill}" stroke="{}" stroke-width="2"/>"#,
                colour(bus.area)
            ));
        }
        out.styled_text((x, y + r + 12.0), Anchor::Middle, 10.5, INK, HALO, &bus.name);
    }
}

fn legend(out: &mut Drawing, y: f64) {
    let mut x = MARGIN;
    for (loading, name) in [(0.4, "below 80 %"), (0.9, "80 to 100 %"), (1.1, "above rating")] {
        let (stroke, width) = look(loading);
        out.line((x, y - 4.0), (x + 26.0, y - 4.0), stroke, width, "");
        out.text((x + 32.0, y), Anchor::Start, 11.0, SLATE, name);
        x += 122.0;
    }
    out.line((x, y - 4.0), (x + 26.0, y - 4.0), SLATE, 1.2, "3 5");
    out.text((x + 32.0, y), Anchor::Start, 11.0, SLATE, "open");
    x += 82.0;
    out.raw(&format!(r#"<circle cx="{x:.1}" cy="{:.1}" r="7" fill="{SLATE}"/>"#, y - 4.0));
    out.text((x + 13.0, y), Anchor::Start, 11.0, SLATE, "bus with a unit in service");
    x += 178.0;
    out.raw(&format!(
        r#"<circle cx="{x:.1}" cy="{:.1}" r="5" fill="white" stroke="{SLATE}" stroke-width="2"/>"#,
        y - 4.0
    ));
    out.text((x + 12.0, y), Anchor::Start, 11.0, SLATE, "bus");
    x += 58.0;
    out.raw(&format!(
        r#"<g stroke="{INK}" stroke-width="1.6"><circle cx="{x:.1}" cy="{:.1}" r="7" fill="{INK}"/><path stroke="white" d="M{:.1} {:.1}l7 7m0 -7l-7 7"/></g>"#,
        y - 4.0,
        x - 3.5,
        y - 7.5
    ));
    out.text((x + 13.0, y), Anchor::Start, 11.0, SLATE, "dark bus");
}
