//! The run as one picture: panels stacked over a single time axis.
//!
//! Contract: frequency, ties, loadings, set-points, sheds (if any), rungs and
//! verdicts, in this order; every curve has a colour, a dash and a name beside
//! it. Samples are reduced to the extremes of each pixel column, so the size of
//! the picture does not grow with the length of the run.

use super::svg::{
    ALARM, Anchor, Drawing, HAIR, INK, SLATE, colour, dash, decimals, reduced, ticks,
};
use crate::case::model::{Event, Grid};
use crate::record::{Recording, Scheme};

pub(super) const WIDTH: f64 = 1000.0;
pub(super) const LEFT: f64 = 62.0;
pub(super) const RIGHT: f64 = 178.0;
const TOP: f64 = 30.0;
const PANEL: f64 = 150.0;
const GAP: f64 = 34.0;
pub(super) const LANE: f64 = 34.0;

/// Curves a panel shows before the rest is left out (the table has them).
const CURVES: usize = 10;

/// A curve of a panel.
struct Curve<'a> {
    name: String,
    values: Box<dyn Fn(usize) -> Option<f64> + 'a>,
    colour: &'static str,
    dash: &'static str,
    /// Drawn thin and without a name: it belongs to the curve before it.
    companion: bool,
}

/// A panel: what, in which unit, which curves, limits to mark, least range to show.
struct Panel<'a> {
    title: String,
    curves: Vec<Curve<'a>>,
    marks: Vec<f64>,
    least_span: f64,
    left_out: usize,
}

/// The run and its time axis.
pub(super) struct Frame<'a> {
    pub(super) recording: &'a Recording,
    pub(super) end_s: f64,
}

impl Frame<'_> {
    /// Place of a time, in pixels.
    pub(super) fn x(&self, time_s: f64) -> f64 {
        LEFT + (WIDTH - LEFT - RIGHT) * (time_s / self.end_s).clamp(0.0, 1.0)
    }
}

/// Draw it.
///
/// `events` are the play's: each is marked through all panels.
pub fn svg(grid: &Grid, events: &[Event], recording: &Recording) -> String {
    let last_s = recording.series.times_s.last().copied().unwrap_or(0.0);
    let frame = Frame { recording, end_s: last_s.max(1e-9) };
    let panels = panels(grid, recording);
    let stewards = recording.scheme == Scheme::Steward;
    let lanes = if stewards { grid.areas.len() as f64 * LANE + 46.0 } else { 0.0 };
    let height = TOP + panels.len() as f64 * (PANEL + GAP) + lanes + 26.0;
    let mut out = Drawing::default();
    out.rect((0.0, 0.0), (WIDTH, height), "#ffffff", "");
    let axis_y = height - 30.0;
    time_axis(&mut out, &frame, axis_y);
    mark_events(&mut out, &frame, events, axis_y);
    let mut y = TOP;
    for panel in &panels {
        draw_panel(&mut out, &frame, panel, y);
        y += PANEL + GAP;
    }
    if stewards {
        super::lanes::draw_lanes(&mut out, &frame, grid, y);
    }
    out.finish(WIDTH, height, &format!("{} over time", recording.play))
}

/// Vertical lines through all panels, at round seconds.
fn time_axis(out: &mut Drawing, frame: &Frame, axis_y: f64) {
    let steps = ticks(0.0, frame.end_s, 10);
    let places = decimals(&steps);
    for t in &steps {
        let x = frame.x(*t);
        out.line((x, TOP), (x, axis_y), HAIR, 1.0, "");
        out.text((x, axis_y + 15.0), Anchor::Middle, 11.0, SLATE, &format!("{t:.places$}"));
    }
    out.text((WIDTH - RIGHT + 14.0, axis_y + 15.0), Anchor::Start, 11.0, SLATE, "s");
}

/// Dotted lines where the play does something; the story says what.
fn mark_events(out: &mut Drawing, frame: &Frame, events: &[Event], axis_y: f64) {
    for event in events.iter().filter(|e| e.at_s <= frame.end_s) {
        let x = frame.x(event.at_s);
        out.line((x, TOP - 4.0), (x, axis_y), SLATE, 0.9, "1 3");
        let (l, r, top, tip) = (x - 4.0, x + 4.0, axis_y + 7.0, axis_y);
        out.raw(&format!(
            r#"<polygon points="{l:.1},{top:.1} {r:.1},{top:.1} {x:.1},{tip:.1}" fill="{SLATE}"/>"#
        ));
    }
    if !events.is_empty() {
        let at = (WIDTH - RIGHT + 36.0, axis_y + 20.0);
        out.text(at, Anchor::Start, 10.5, SLATE, "dotted: the play's events");
    }
}

fn series<'a>(table: &'a [Vec<f64>], item: usize) -> impl Fn(usize) -> Option<f64> + 'a {
    move |i| table.get(item).and_then(|v| v.get(i)).copied()
}

/// Largest finite size of a series after a map.
fn size_of(recording: &Recording, value: &dyn Fn(usize) -> Option<f64>) -> f64 {
    (0..recording.series.times_s.len())
        .filter_map(value)
        .filter(|v| v.is_finite())
        .map(f64::abs)
        .fold(0.0, f64::max)
}

fn panels<'a>(grid: &'a Grid, recording: &'a Recording) -> Vec<Panel<'a>> {
    let mut out = vec![
        frequency_panel(grid, recording),
        tie_panel(grid, recording),
        loading_panel(grid, recording),
        setpoint_panel(grid, recording),
    ];
    let shed = shed_panel(grid, recording);
    if !shed.curves.is_empty() {
        out.push(shed);
    }
    out.retain(|p| !p.curves.is_empty());
    out
}

fn frequency_panel<'a>(grid: &'a Grid, recording: &'a Recording) -> Panel<'a> {
    let curves = grid.areas.iter().enumerate().map(|(a, area)| {
        let dev_hz = series(&recording.series.area_freq_dev_hz, a);
        Curve {
            name: area.name.clone(),
            values: Box::new(move |i| dev_hz(i).map(|d| grid.nominal_hz + d)),
            colour: colour(a),
            dash: dash(a),
            companion: false,
        }
    });
    Panel {
        title: "Frequency by area [Hz]".into(),
        curves: curves.collect(),
        marks: vec![],
        least_span: 0.02,
        left_out: 0,
    }
}

fn tie_panel<'a>(grid: &'a Grid, recording: &'a Recording) -> Panel<'a> {
    let ties: Vec<usize> = (0..grid.lines.len())
        .filter(|&l| grid.buses[grid.lines[l].from].area != grid.buses[grid.lines[l].to].area)
        .collect();
    let left_out = ties.len().saturating_sub(CURVES);
    let mut curves = Vec::new();
    for (n, &l) in ties.iter().take(CURVES).enumerate() {
        let (flow, schedule) =
            (series(&recording.series.line_flow_mw, l), series(&recording.series.schedule_mw, l));
        let name = grid.lines[l].name.clone();
        curves.push(Curve {
            name,
            values: Box::new(flow),
            colour: colour(n),
            dash: "",
            companion: false,
        });
        curves.push(Curve {
            name: String::new(),
            values: Box::new(schedule),
            colour: colour(n),
            dash: "5 4",
            companion: true,
        });
    }
    Panel {
        title: "Tie flows, schedules dashed [MW]".into(),
        curves,
        marks: vec![],
        least_span: 10.0,
        left_out,
    }
}

fn loading_panel<'a>(grid: &'a Grid, recording: &'a Recording) -> Panel<'a> {
    let mut ranked: Vec<(f64, usize)> = (0..grid.lines.len())
        .filter(|&l| grid.lines[l].rating_mw.is_finite())
        .map(|l| {
            (
                size_of(recording, &series(&recording.series.line_flow_mw, l))
                    / grid.lines[l].rating_mw,
                l,
            )
        })
        .collect();
    // Ties in value keep file order, so that the picture is the same every time.
    ranked.sort_by(|a, b| b.0.total_cmp(&a.0).then(a.1.cmp(&b.1)));
    let left_out = ranked.len().saturating_sub(CURVES);
    let curves = ranked.into_iter().take(CURVES).enumerate().map(|(n, (_, l))| {
        let flow = series(&recording.series.line_flow_mw, l);
        let rating_mw = grid.lines[l].rating_mw;
        Curve {
            name: grid.lines[l].name.clone(),
            values: Box::new(move |i| flow(i).map(|f| 100.0 * f.abs() / rating_mw)),
            colour: colour(n),
            dash: dash(n / 2),
            companion: false,
        }
    });
    Panel {
        title: "Line loading, worst ten [% of continuous rating]".into(),
        curves: curves.collect(),
        marks: vec![100.0],
        least_span: 20.0,
        left_out,
    }
}

fn setpoint_panel<'a>(grid: &'a Grid, recording: &'a Recording) -> Panel<'a> {
    let change = |u: usize| {
        let setpoint = series(&recording.series.unit_setpoint_mw, u);
        let start = setpoint(0).unwrap_or(0.0);
        move |i: usize| setpoint(i).map(|s| s - start)
    };
    let mut moved: Vec<(f64, usize)> = (0..grid.units.len())
        .map(|u| (size_of(recording, &change(u)), u))
        .filter(|(size, _)| *size > 0.05)
        .collect();
    moved.sort_by(|a, b| b.0.total_cmp(&a.0).then(a.1.cmp(&b.1)));
    let left_out = moved.len().saturating_sub(CURVES);
    let curves = moved.into_iter().take(CURVES).enumerate().map(|(n, (_, u))| Curve {
        name: grid.units[u].name.clone(),
        values: Box::new(change(u)),
        colour: colour(n),
        dash: dash(n / 2),
        companion: false,
    });
    Panel {
        title: "Set-points, change from the start, most moved first [MW]".into(),
        curves: curves.collect(),
        marks: vec![],
        least_span: 2.0,
        left_out,
    }
}

fn shed_panel<'a>(grid: &'a Grid, recording: &'a Recording) -> Panel<'a> {
    let shed = |a: usize| {
        move |i: usize| {
            let inside =
                grid.feeders.iter().enumerate().filter(|(_, f)| grid.buses[f.bus].area == a);
            Some(
                inside
                    .filter_map(|(f, _)| series(&recording.series.feeder_shed_mw, f)(i))
                    .sum::<f64>(),
            )
        }
    };
    let curves =
        (0..grid.areas.len()).filter(|&a| size_of(recording, &shed(a)) > 0.05).map(|a| Curve {
            name: grid.areas[a].name.clone(),
            values: Box::new(shed(a)),
            colour: colour(a),
            dash: dash(a),
            companion: false,
        });
    Panel {
        title: "Load shed by area [MW]".into(),
        curves: curves.collect(),
        marks: vec![],
        least_span: 1.0,
        left_out: 0,
    }
}

/// Range of a panel: its data and marks, at least its least span, and a little air.
fn range(frame: &Frame, panel: &Panel) -> (f64, f64) {
    let samples = frame.recording.series.times_s.len();
    let (mut low, mut high) = (f64::INFINITY, f64::NEG_INFINITY);
    for curve in &panel.curves {
        for v in (0..samples).filter_map(&curve.values).filter(|v| v.is_finite()) {
            low = low.min(v);
            high = high.max(v);
        }
    }
    panel.marks.iter().for_each(|m| high = high.max(*m));
    if !(low.is_finite() && high.is_finite()) {
        return (0.0, 1.0);
    }
    let missing = (panel.least_span - (high - low)).max(0.0) / 2.0;
    let air = (high - low).max(panel.least_span) * 0.06;
    (low - missing - air, high + missing + air)
}

fn draw_panel(out: &mut Drawing, frame: &Frame, panel: &Panel, top: f64) {
    let (low, high) = range(frame, panel);
    let y = |v: f64| top + PANEL * (high - v) / (high - low);
    let right = WIDTH - RIGHT;
    out.styled_text(
        (LEFT, top - 8.0),
        Anchor::Start,
        12.5,
        INK,
        r#"font-weight="600""#,
        &panel.title,
    );
    let steps = ticks(low, high, 4);
    let places = decimals(&steps);
    for v in &steps {
        out.line((LEFT, y(*v)), (right, y(*v)), HAIR, 1.0, "");
        out.text((LEFT - 7.0, y(*v) + 4.0), Anchor::End, 11.0, SLATE, &format!("{v:.places$}"));
    }
    for mark in &panel.marks {
        out.line((LEFT, y(*mark)), (right, y(*mark)), ALARM, 1.2, "6 3");
    }
    let times = &frame.recording.series.times_s;
    let mut named = 0;
    for curve in &panel.curves {
        let points = times
            .iter()
            .enumerate()
            .filter_map(|(i, t)| Some((frame.x(*t), y((curve.values)(i)?))));
        let width = if curve.companion { 1.0 } else { 1.7 };
        out.curve(&reduced(points), curve.colour, width, curve.dash);
        if !curve.companion {
            let legend_y = top + 8.0 + named as f64 * 14.0;
            out.line(
                (right + 12.0, legend_y),
                (right + 36.0, legend_y),
                curve.colour,
                2.0,
                curve.dash,
            );
            out.text((right + 42.0, legend_y + 4.0), Anchor::Start, 11.0, INK, &short(&curve.name));
            named += 1;
        }
    }
    if panel.left_out > 0 {
        let at = (right + 12.0, top + 12.0 + named as f64 * 14.0);
        out.text(at, Anchor::Start, 10.5, SLATE, &format!("and {} more", panel.left_out));
    }
    out.rect(
        (LEFT, top),
        (right - LEFT, PANEL),
        "none",
        &format!(r#"stroke="{SLATE}" stroke-width="0.8""#),
    );
}

/// A name that fits beside a panel.
pub(super) fn short(name: &str) -> String {
    match name.char_indices().nth(20) {
        Some((at, _)) => format!("{}...", &name[..at.saturating_sub(2)]),
        None => name.to_owned(),
    }
}
