//! Figures over all outages, per rating factor, form and scheme.
//!
//! Contract: made from rows alone and in their order, so that a resumed sweep
//! has the same totals to the last bit.

use serde::Serialize;

use super::row::Row;
use super::{Balancing, Form};

/// Figures over the outages of one factor, form and scheme.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Totals {
    /// Rating factor; none = ratings of the file.
    pub factor: Option<f64>,
    /// Form of the grid.
    pub form: Form,
    /// Scheme.
    pub scheme: Balancing,
    /// Outages.
    pub outages: usize,
    /// Share of outages with load lost, in per cent.
    pub with_loss_percent: f64,
    /// Mean load lost as a share of demand over all outages, in per cent.
    pub mean_lost_percent: f64,
    /// Worst load lost as a share of demand, in per cent.
    pub worst_lost_percent: f64,
    /// Mean share of units that had to move, in per cent.
    pub mean_moved_percent: f64,
    /// Mean number of areas touched.
    pub mean_areas_touched: f64,
    /// Lines that followed, over all outages.
    pub lines_followed: usize,
    /// Outages after which a line stays above its rating.
    pub with_over_rating: usize,
    /// Outages by lowest rung: keep, lean, stretch, shed.
    pub by_rung: [usize; 4],
    /// Outages that not even the lowest rung could meet.
    pub beyond: usize,
    /// Largest flow change outside the outage's area at rung `keep`, in MW.
    pub worst_outside_at_keep_mw: f64,
    /// Lowest frequency of all, in Hz (closed loop).
    pub freq_lowest_hz: Option<f64>,
}

/// Totals of consecutive rows with the same factor, form and scheme.
pub fn totals(rows: &[Row]) -> Vec<Totals> {
    rows.chunk_by(|a, b| (a.factor, a.form, a.scheme) == (b.factor, b.form, b.scheme))
        .filter_map(of_group)
        .collect()
}

fn of_group(rows: &[Row]) -> Option<Totals> {
    let first = rows.first()?;
    let count = rows.len() as f64;
    let mean = |value: &dyn Fn(&Row) -> f64| {
        super::row::rounded(rows.iter().map(value).sum::<f64>() / count)
    };
    let mut by_rung = [0; 4];
    rows.iter().for_each(|r| by_rung[usize::from(r.rung.min(3))] += 1);
    let outside = rows.iter().filter(|r| r.rung == 0).filter_map(|r| r.outside_flow_change_mw);
    let lowest = rows.iter().filter_map(|r| r.freq_lowest_hz).fold(f64::INFINITY, f64::min);
    Some(Totals {
        factor: first.factor,
        form: first.form,
        scheme: first.scheme,
        outages: rows.len(),
        with_loss_percent: mean(&|r| if r.has_lost() { 100.0 } else { 0.0 }),
        mean_lost_percent: mean(&Row::load_lost_percent),
        worst_lost_percent: rows.iter().map(Row::load_lost_percent).fold(0.0, f64::max),
        mean_moved_percent: mean(&|r| r.units_moved_percent),
        mean_areas_touched: mean(&|r| r.areas_touched as f64),
        lines_followed: rows.iter().map(|r| r.lines_followed).sum(),
        with_over_rating: rows.iter().filter(|r| r.lines_over_rating > 0).count(),
        by_rung,
        beyond: rows.iter().filter(|r| r.beyond).count(),
        worst_outside_at_keep_mw: outside.fold(0.0, f64::max),
        freq_lowest_hz: lowest.is_finite().then_some(lowest),
    })
}

/// The worst rows: most load lost, then most lines that followed or stay over
/// rating, then the deepest rung, then most units moved; ties in the rows' order.
pub fn worst(rows: &[Row], count: usize) -> Vec<&Row> {
    let mut order: Vec<&Row> = rows.iter().collect();
    let key = |r: &Row| {
        [
            r.load_lost_mw,
            (r.lines_followed + r.lines_over_rating) as f64,
            f64::from(r.rung),
            r.units_moved_percent,
        ]
    };
    order.sort_by(|a, b| {
        let pairs = key(a).into_iter().zip(key(b));
        pairs.fold(std::cmp::Ordering::Equal, |so_far, (x, y)| so_far.then(y.total_cmp(&x)))
    });
    order.truncate(count);
    order
}
