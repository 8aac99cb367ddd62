//! The figures of one outage under one scheme, and their line in the table.
//!
//! Contract: every figure is rounded to a millionth when it is made, and text
//! and value turn into each other without loss, so that a row that was read
//! back gives the same bytes again. Empty = the figure does not exist there.

use serde::Serialize;

use super::Balancing;
use super::Form;
use super::cascade::{Ended, overloaded};
use super::outage::Outage;
use crate::case::model::{Grid, UnitStatus};

/// A unit has moved when its output is off its base point by more than this, in MW.
pub const MOVED_MW: f64 = 0.1;
/// Load counts as lost from this on, in MW.
pub const LOST_MW: f64 = 0.05;

/// Heads of the table, in the order of [`Row::fields`].
pub const HEADS: [&str; 23] = [
    "form",
    "rating_factor",
    "scheme",
    "outage",
    "kind",
    "demand_mw",
    "load_lost_mw",
    "load_lost_percent",
    "units_moved_percent",
    "areas_touched",
    "lines_followed",
    "lines_over_rating",
    "stages",
    "rung",
    "beyond",
    "units_off",
    "reserve_left_mw",
    "outside_flow_change_mw",
    "freq_rest_dev_mhz",
    "freq_lowest_hz",
    "time_back_s",
    "proofs",
    "moved_mw",
];

/// Figures of one outage.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Row {
    /// Form of the grid.
    pub form: Form,
    /// Rating factor; none = ratings of the file.
    pub factor: Option<f64>,
    /// Scheme.
    pub scheme: Balancing,
    /// Name of the outage.
    pub outage: String,
    /// `line`, `unit` or `lines`.
    pub kind: String,
    /// Demand before the outage in MW.
    pub demand_mw: f64,
    /// Load lost in MW.
    pub load_lost_mw: f64,
    /// Share of the available units that had to move, in per cent.
    pub units_moved_percent: f64,
    /// Areas with a unit that moved, load lost or a line that followed.
    pub areas_touched: usize,
    /// Lines that opened after the outage.
    pub lines_followed: usize,
    /// Lines above their rating at the end (closed loop: nothing trips on heat there).
    pub lines_over_rating: usize,
    /// Stages of the cascade; 0 in the closed loop.
    pub stages: usize,
    /// Lowest rung any area went to.
    pub rung: u8,
    /// Limits missed even at the lowest rungs.
    pub beyond: bool,
    /// Units out of service at the end that were in before.
    pub units_off: usize,
    /// Room upwards of the available units in their normal ranges, in MW.
    pub reserve_left_mw: f64,
    /// Largest flow change on a line outside the outage's area (ties included), in MW.
    pub outside_flow_change_mw: Option<f64>,
    /// Largest frequency deviation of an island at rest, in mHz, signed.
    pub freq_rest_dev_mhz: f64,
    /// Lowest frequency on the way, in Hz (closed loop).
    pub freq_lowest_hz: Option<f64>,
    /// Last time outside 10 mHz after the outage, in s (closed loop).
    pub time_back_s: Option<f64>,
    /// Proofs announced (closed loop with stewards).
    pub proofs: Option<usize>,
    /// What all units together leave their base points by (up and down added), in MW.
    pub moved_mw: f64,
}

/// To a millionth, and no minus zero.
pub fn rounded(value: f64) -> f64 {
    (value * 1e6).round() / 1e6 + 0.0
}

/// What both kinds of run know at their end.
pub(super) struct End<'a> {
    pub(super) grid: &'a Grid,
    pub(super) base_flow_mw: &'a [f64],
    pub(super) output_mw: &'a [f64],
    pub(super) unit_in: &'a [bool],
    pub(super) flow_mw: &'a [f64],
    /// Load lost per bus, feeders included, in MW.
    pub(super) lost_mw: Vec<f64>,
    /// Lines that followed.
    pub(super) followed: Vec<usize>,
}

impl End<'_> {
    fn moved(&self, unit: usize) -> bool {
        (self.output_mw[unit] - self.grid.units[unit].base_mw).abs() > MOVED_MW
    }

    fn units_moved_percent(&self, outage: Outage) -> f64 {
        let own =
            |u: &usize| self.grid.units[*u].status != UnitStatus::Off && outage.unit() != Some(*u);
        let all = (0..self.output_mw.len()).filter(own).count();
        let moved = (0..self.output_mw.len()).filter(own).filter(|&u| self.moved(u)).count();
        rounded(if all == 0 { 0.0 } else { 100.0 * moved as f64 / all as f64 })
    }

    fn areas_touched(&self, outage: Outage) -> usize {
        let grid = self.grid;
        let mut touched = vec![false; grid.areas.len()];
        for (unit, u) in grid.units.iter().enumerate() {
            touched[grid.buses[u.bus].area] |=
                outage.unit() != Some(unit) && u.status != UnitStatus::Off && self.moved(unit);
        }
        for (bus, lost) in self.lost_mw.iter().enumerate() {
            touched[grid.buses[bus].area] |= *lost > LOST_MW;
        }
        for &line in &self.followed {
            touched[grid.buses[grid.lines[line].from].area] = true;
            touched[grid.buses[grid.lines[line].to].area] = true;
        }
        touched.into_iter().filter(|t| *t).count()
    }

    fn moved_mw(&self, outage: Outage) -> f64 {
        let units = self.grid.units.iter().enumerate();
        let others =
            units.filter(|(u, data)| outage.unit() != Some(*u) && data.status != UnitStatus::Off);
        rounded(others.map(|(u, data)| (self.output_mw[u] - data.base_mw).abs()).sum())
    }

    fn units_off(&self, outage: Outage) -> usize {
        let was_in = |u: usize| self.grid.units[u].status != UnitStatus::Off;
        (0..self.unit_in.len())
            .filter(|&u| was_in(u) && !self.unit_in[u] && outage.unit() != Some(u))
            .count()
    }

    fn reserve_left_mw(&self) -> f64 {
        let units = self.grid.units.iter().enumerate();
        let room = units
            .filter(|(u, data)| self.unit_in[*u] && data.status == UnitStatus::Available)
            .map(|(u, data)| (data.max_mw - self.output_mw[u]).max(0.0));
        rounded(room.sum())
    }

    /// Largest change outside the area of the outage; none where it has no single area.
    fn outside_flow_change_mw(&self, outage: Outage) -> Option<f64> {
        let grid = self.grid;
        let own = outage.area(grid)?;
        let inside = |l: usize| {
            grid.buses[grid.lines[l].from].area == own && grid.buses[grid.lines[l].to].area == own
        };
        let change = (0..grid.lines.len())
            .filter(|&l| !inside(l) && grid.lines[l].closed)
            .map(|l| (self.flow_mw[l] - self.base_flow_mw[l]).abs())
            .fold(0.0, f64::max);
        Some(rounded(change))
    }

    /// The figures that both kinds of run have.
    pub(super) fn row(
        &self,
        form: Form,
        factor: Option<f64>,
        scheme: Balancing,
        outage: Outage,
    ) -> Row {
        let demand: f64 = self.grid.buses.iter().map(|b| b.load_mw.max(0.0)).sum();
        Row {
            form,
            factor,
            scheme,
            outage: outage.name(self.grid),
            kind: match outage {
                Outage::Line(_) => "line",
                Outage::Unit(_) => "unit",
                Outage::Lines(..) => "lines",
            }
            .to_owned(),
            demand_mw: rounded(demand),
            load_lost_mw: rounded(self.lost_mw.iter().sum()),
            units_moved_percent: self.units_moved_percent(outage),
            areas_touched: self.areas_touched(outage),
            lines_followed: self.followed.len(),
            lines_over_rating: 0,
            stages: 0,
            rung: 0,
            beyond: false,
            units_off: self.units_off(outage),
            reserve_left_mw: self.reserve_left_mw(),
            outside_flow_change_mw: self.outside_flow_change_mw(outage),
            freq_rest_dev_mhz: 0.0,
            freq_lowest_hz: None,
            time_back_s: None,
            proofs: None,
            moved_mw: self.moved_mw(outage),
        }
    }
}

impl Row {
    /// The figures of a static cascade.
    pub fn of_cascade(ended: &Ended, outage: Outage, scheme: Balancing) -> Row {
        let state = &ended.state;
        let case = state.case;
        let mut lost_mw = state.lost_mw.clone();
        for (f, shed) in case.grid.feeders.iter().zip(&state.shed_mw) {
            lost_mw[f.bus] += shed;
        }
        let end = End {
            grid: &case.grid,
            base_flow_mw: &case.base_flow_mw,
            output_mw: &state.output_mw,
            unit_in: &state.unit_in,
            flow_mw: &state.flow_mw,
            lost_mw,
            followed: ended.stages.iter().flat_map(|s| s.opened.clone()).collect(),
        };
        let freq = state.freq_dev_hz.iter().copied();
        Row {
            lines_over_rating: overloaded(state).len(),
            stages: ended.stages.len(),
            rung: ended.rung.iter().copied().max().unwrap_or(0),
            beyond: ended.beyond,
            freq_rest_dev_mhz: rounded(
                1e3 * freq.fold(0.0, |m, f| if f.abs() > f64::abs(m) { f } else { m }),
            ),
            ..end.row(case.form, case.factor, scheme, outage)
        }
    }

    /// Load lost as a share of demand, in per cent.
    pub fn load_lost_percent(&self) -> f64 {
        rounded(if self.demand_mw > 0.0 { 100.0 * self.load_lost_mw / self.demand_mw } else { 0.0 })
    }

    /// Whether load was lost at all.
    pub fn has_lost(&self) -> bool {
        self.load_lost_mw > LOST_MW
    }

    /// The row as text fields, in the order of [`HEADS`].
    pub fn fields(&self) -> Vec<String> {
        let maybe = |v: Option<f64>| v.map(|v| v.to_string()).unwrap_or_default();
        vec![
            self.form.word().to_owned(),
            maybe(self.factor),
            self.scheme.word().to_owned(),
            self.outage.clone(),
            self.kind.clone(),
            self.demand_mw.to_string(),
            self.load_lost_mw.to_string(),
            self.load_lost_percent().to_string(),
            self.units_moved_percent.to_string(),
            self.areas_touched.to_string(),
            self.lines_followed.to_string(),
            self.lines_over_rating.to_string(),
            self.stages.to_string(),
            self.rung.to_string(),
            self.beyond.to_string(),
            self.units_off.to_string(),
            self.reserve_left_mw.to_string(),
            maybe(self.outside_flow_change_mw),
            self.freq_rest_dev_mhz.to_string(),
            maybe(self.freq_lowest_hz),
            maybe(self.time_back_s),
            self.proofs.map(|p| p.to_string()).unwrap_or_default(),
            self.moved_mw.to_string(),
        ]
    }

    /// A row from its text fields; none if they are not a row.
    pub fn from_fields(fields: &[&str]) -> Option<Row> {
        if fields.len() != HEADS.len() {
            return None;
        }
        let maybe = |text: &str| -> Option<Option<f64>> {
            if text.is_empty() { Some(None) } else { text.parse().ok().map(Some) }
        };
        Some(Row {
            form: [Form::AsItIs, Form::Divided].into_iter().find(|f| f.word() == fields[0])?,
            factor: maybe(fields[1])?,
            scheme: Balancing::ALL.into_iter().find(|s| s.word() == fields[2])?,
            outage: fields[3].to_owned(),
            kind: fields[4].to_owned(),
            demand_mw: fields[5].parse().ok()?,
            load_lost_mw: fields[6].parse().ok()?,
            units_moved_percent: fields[8].parse().ok()?,
            areas_touched: fields[9].parse().ok()?,
            lines_followed: fields[10].parse().ok()?,
            lines_over_rating: fields[11].parse().ok()?,
            stages: fields[12].parse().ok()?,
            rung: fields[13].parse().ok()?,
            beyond: fields[14].parse().ok()?,
            units_off: fields[15].parse().ok()?,
            reserve_left_mw: fields[16].parse().ok()?,
            outside_flow_change_mw: maybe(fields[17])?,
            freq_rest_dev_mhz: fields[18].parse().ok()?,
            freq_lowest_hz: maybe(fields[19])?,
            time_back_s: maybe(fields[20])?,
            proofs: if fields[21].is_empty() { None } else { Some(fields[21].parse().ok()?) },
            moved_mw: fields[22].parse().ok()?,
        })
    }
}
