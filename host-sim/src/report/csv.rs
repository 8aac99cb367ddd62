//! The run's samples as a table, one row per tick, the unit in each head.
//!
//! Contract: the columns are time, then per area frequency, rung and verdict,
//! then tie flows and schedules, line loadings, set-points, outputs and sheds,
//! in the grid's order. Values are written so that reading them gives them back.

use super::{ReportError, rung_word, verdict_word};
use crate::case::model::Grid;
use crate::record::Recording;

/// A column: head, and the text of a sample.
type Column<'a> = (String, Box<dyn Fn(usize) -> String + 'a>);

/// The table as text.
///
/// Errors: [`ReportError::Layout`] if the library refuses.
pub fn trace(grid: &Grid, recording: &Recording) -> Result<String, ReportError> {
    let columns = columns(grid, recording);
    let refused = |why: String| ReportError::Layout { what: "trace.csv", why };
    let mut table = csv::Writer::from_writer(Vec::new());
    table.write_record(columns.iter().map(|c| &c.0)).map_err(|e| refused(e.to_string()))?;
    for sample in 0..recording.series.times_s.len() {
        let row = columns.iter().map(|(_, text)| text(sample));
        table.write_record(row).map_err(|e| refused(e.to_string()))?;
    }
    let bytes = table.into_inner().map_err(|e| refused(e.to_string()))?;
    String::from_utf8(bytes).map_err(|e| refused(e.to_string()))
}

/// Millionths are kept: 1 W of flow, 1 uHz of frequency.
fn number(value: Option<f64>) -> String {
    match value {
        Some(v) if v.is_finite() => {
            let rounded = (v * 1e6).round() / 1e6;
            // Writes 0 for -0, which some spreadsheets take for text.
            (rounded + 0.0).to_string()
        }
        _ => String::new(),
    }
}

fn columns<'a>(grid: &'a Grid, recording: &'a Recording) -> Vec<Column<'a>> {
    let s = &recording.series;
    let mut out: Vec<Column> = Vec::new();
    let value = |series: &'a [Vec<f64>], item: usize| {
        move |i: usize| series.get(item).and_then(|v| v.get(i)).copied()
    };
    out.push(("time_s".into(), Box::new(|i| number(s.times_s.get(i).copied()))));
    for (a, area) in grid.areas.iter().enumerate() {
        let dev_hz = value(&s.area_freq_dev_hz, a);
        let nominal_hz = grid.nominal_hz;
        out.push((
            format!("area {} frequency_hz", area.name),
            Box::new(move |i| number(dev_hz(i).map(|d| nominal_hz + d))),
        ));
        let rung =
            move |i: usize| s.rung.get(a).and_then(|r| r.get(i)).map_or("", |r| rung_word(*r));
        out.push((format!("area {} rung", area.name), Box::new(move |i| rung(i).to_owned())));
        let verdict = move |i: usize| {
            s.verdict.get(a).and_then(|v| v.get(i)).map_or("", |v| verdict_word(*v))
        };
        out.push((format!("area {} verdict", area.name), Box::new(move |i| verdict(i).to_owned())));
    }
    for (l, line) in grid.lines.iter().enumerate() {
        let flow = value(&s.line_flow_mw, l);
        if grid.buses[line.from].area != grid.buses[line.to].area {
            let schedule = value(&s.schedule_mw, l);
            out.push((format!("line {} flow_mw", line.name), Box::new(move |i| number(flow(i)))));
            out.push((
                format!("line {} schedule_mw", line.name),
                Box::new(move |i| number(schedule(i))),
            ));
        }
        let rating_mw = line.rating_mw;
        if rating_mw.is_finite() {
            out.push((
                format!("line {} loading_percent", line.name),
                Box::new(move |i| number(flow(i).map(|f| 100.0 * f.abs() / rating_mw))),
            ));
        }
    }
    for (u, unit) in grid.units.iter().enumerate() {
        let (setpoint, output) = (value(&s.unit_setpoint_mw, u), value(&s.unit_output_mw, u));
        out.push((
            format!("unit {} setpoint_mw", unit.name),
            Box::new(move |i| number(setpoint(i))),
        ));
        out.push((format!("unit {} output_mw", unit.name), Box::new(move |i| number(output(i)))));
    }
    for (f, feeder) in grid.feeders.iter().enumerate() {
        let shed = value(&s.feeder_shed_mw, f);
        out.push((format!("feeder {} shed_mw", feeder.name), Box::new(move |i| number(shed(i)))));
    }
    out
}
