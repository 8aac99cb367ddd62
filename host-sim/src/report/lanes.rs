//! Rungs and verdicts over time, one lane per area, at the foot of the picture.
//!
//! Contract: the band is the rung, with its word in it where it fits; the strip
//! below is the verdict, told by height as well as by colour.

use super::picture::{Frame, LANE, LEFT, RIGHT, WIDTH, short};
use super::svg::{ALARM, Anchor, Drawing, INK, SLATE};
use super::{rung_word, verdict_word};
use crate::case::model::Grid;
use crate::record::SaidVerdict;

/// Runs of equal values as (first sample, last sample + 1, value).
fn spells<T: Copy + PartialEq>(values: &[T]) -> Vec<(usize, usize, T)> {
    let mut out: Vec<(usize, usize, T)> = Vec::new();
    for (i, v) in values.iter().enumerate() {
        match out.last_mut() {
            Some(last) if last.2 == *v => last.1 = i + 1,
            _ => out.push((i, i + 1, *v)),
        }
    }
    out
}

/// Fill of a rung: darker the more is given up; the word is written in it too.
fn rung_fill(rung: u8) -> &'static str {
    ["#e4efe7", "#f3e2b3", "#e3b27a", "#c9736b"][usize::from(rung.min(3))]
}

/// Fill of a verdict strip; height tells it too.
fn verdict_look(verdict: SaidVerdict) -> (&'static str, f64) {
    match verdict {
        SaidVerdict::Settled => ("#8fb79b", 2.0),
        SaidVerdict::Working => ("#7d8f9b", 4.0),
        SaidVerdict::Impossible => (ALARM, 8.0),
        SaidVerdict::Blind => (INK, 6.0),
    }
}

/// Draw a lane per area, and the legend below them.
pub(super) fn draw_lanes(out: &mut Drawing, frame: &Frame, grid: &Grid, top: f64) {
    let title = "Rung (band) and verdict (strip below it) by area";
    out.styled_text((LEFT, top - 8.0), Anchor::Start, 12.5, INK, r#"font-weight="600""#, title);
    let times = &frame.recording.series.times_s;
    let until = |i: usize| frame.x(times.get(i).copied().unwrap_or(frame.end_s));
    let empty = (Vec::new(), Vec::new());
    for (a, area) in grid.areas.iter().enumerate() {
        let y = top + a as f64 * LANE;
        let s = &frame.recording.series;
        out.text((WIDTH - RIGHT + 12.0, y + 15.0), Anchor::Start, 11.0, INK, &short(&area.name));
        for (from, to, rung) in spells(s.rung.get(a).unwrap_or(&empty.0)) {
            let (x0, x1) = (until(from), until(to));
            out.rect(
                (x0, y),
                (x1 - x0, 21.0),
                rung_fill(rung),
                r##"stroke="#ffffff" stroke-width="0.6""##,
            );
            if x1 - x0 > 46.0 {
                out.text((x0 + 5.0, y + 14.5), Anchor::Start, 11.0, INK, rung_word(rung));
            } else if x1 - x0 > 9.0 {
                out.text((x0 + 2.0, y + 14.5), Anchor::Start, 9.0, INK, &rung.to_string());
            }
        }
        for (from, to, verdict) in spells(s.verdict.get(a).unwrap_or(&empty.1)) {
            let (fill, height) = verdict_look(verdict);
            let (x0, x1) = (until(from), until(to));
            out.rect((x0, y + 22.5), ((x1 - x0).max(0.8), height), fill, "");
        }
    }
    lane_legend(out, top + grid.areas.len() as f64 * LANE + 6.0);
}

fn lane_legend(out: &mut Drawing, y: f64) {
    let mut x = LEFT;
    for rung in 0..=3u8 {
        out.rect((x, y), (16.0, 10.0), rung_fill(rung), "");
        out.text(
            (x + 20.0, y + 9.0),
            Anchor::Start,
            10.5,
            SLATE,
            &format!("{rung} {}", rung_word(rung)),
        );
        x += 82.0;
    }
    x += 20.0;
    for verdict in
        [SaidVerdict::Settled, SaidVerdict::Working, SaidVerdict::Impossible, SaidVerdict::Blind]
    {
        let (fill, height) = verdict_look(verdict);
        out.rect((x, y + 9.0 - height), (16.0, height), fill, "");
        out.text((x + 20.0, y + 9.0), Anchor::Start, 10.5, SLATE, verdict_word(verdict));
        x += 90.0;
    }
}
