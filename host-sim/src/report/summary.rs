//! A run in 80 columns of plain text.
//!
//! Contract: no line is wider than 80 characters; colour is added only if asked
//! and never says what the words do not. An outcome is `kept` or `broken` with
//! the limit named, nothing else.

use std::fmt::Write as _;

use super::Bundle;
use super::figures::{AreaFigures, Document, RunFigures, document};
use crate::judge::Outcome;

/// Width of the text.
const COLUMNS: usize = 80;

/// Lines of the story shown before it is cut; the page has all of them.
const STORY_LINES: usize = 24;

/// Whether escape codes may be used.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Colour {
    /// Plain text.
    Off,
    /// With colour, as an addition.
    On,
}

/// What a piece of text is, for its colour.
#[derive(Clone, Copy)]
enum Tone {
    Head,
    Kept,
    Broken,
    Quiet,
}

impl Colour {
    fn paint(self, tone: Tone, text: &str) -> String {
        let code = match tone {
            Tone::Head => "1",
            Tone::Kept => "1;32",
            Tone::Broken => "1;31",
            Tone::Quiet => "2",
        };
        match self {
            Colour::Off => text.to_owned(),
            Colour::On => format!("\x1b[{code}m{text}\x1b[0m"),
        }
    }
}

/// The summary of a bundle.
pub fn text(bundle: &Bundle, colour: Colour) -> String {
    let d = document(bundle);
    let mut out = String::new();
    head(&mut out, &d, colour);
    outcome(&mut out, &d.run, colour);
    story(&mut out, &d, colour);
    figures(&mut out, &d.run, colour);
    areas(&mut out, &d.run, colour);
    judged(&mut out, &d.run, colour);
    if !d.compare.is_empty() {
        section(&mut out, "Side by side", colour);
        out.push_str(&super::compare::text(&d));
    }
    out.push('\n');
    let caution = "Figures of the lossless DC model. A prototype, not certified: no voltage, \
                   reactive power, fault or angle stability is modelled.";
    for line in wrapped(caution, COLUMNS) {
        let _ = writeln!(out, "{}", colour.paint(Tone::Quiet, &line));
    }
    out
}

/// Play, outcome and the limits that were broken, without colour.
pub fn brief(bundle: &Bundle) -> String {
    let d = document(bundle);
    let mut out = format!("{} ({}, seed {})", d.play, d.run.scheme, d.seed);
    outcome(&mut out, &d.run, Colour::Off);
    out
}

/// Break a sentence at spaces so that no line is wider than `width`.
pub(super) fn wrapped(text: &str, width: usize) -> Vec<String> {
    let mut lines: Vec<String> = vec![String::new()];
    for word in text.split_whitespace() {
        let last = lines.len() - 1;
        let used = lines[last].chars().count();
        if used == 0 {
            lines[last].push_str(word);
        } else if used + 1 + word.chars().count() <= width {
            lines[last].push(' ');
            lines[last].push_str(word);
        } else {
            lines.push(word.to_owned());
        }
    }
    lines
}

/// Cut a name to a width, marking that it was cut.
pub(super) fn fitted(text: &str, width: usize) -> String {
    if text.chars().count() <= width {
        return format!("{text:<width$}");
    }
    text.chars().take(width.saturating_sub(1)).chain(['~']).collect()
}

fn section(out: &mut String, name: &str, colour: Colour) {
    let _ = writeln!(out, "\n{}", colour.paint(Tone::Head, name));
}

fn bullets(out: &mut String, sentences: &[String]) {
    for sentence in sentences {
        for (i, line) in wrapped(sentence, COLUMNS - 4).iter().enumerate() {
            let _ = writeln!(out, "  {} {line}", if i == 0 { '-' } else { ' ' });
        }
    }
}

fn head(out: &mut String, d: &Document, colour: Colour) {
    for line in wrapped(&format!("{}: {}", d.play, d.title), COLUMNS) {
        let _ = writeln!(out, "{}", colour.paint(Tone::Head, &line));
    }
    let run = &d.run;
    let facts = format!(
        "{} | scheme {} | {:.1} s in ticks of {} s | seed {}",
        d.grid, run.scheme, run.duration_s, d.tick_s, d.seed
    );
    wrapped(&facts, COLUMNS).iter().for_each(|line| {
        let _ = writeln!(out, "{line}");
    });
}

fn outcome(out: &mut String, run: &RunFigures, colour: Colour) {
    let (tone, word) = match run.outcome {
        Outcome::Kept => (Tone::Kept, "kept"),
        Outcome::Broken => (Tone::Broken, "broken"),
    };
    let stopped = if run.stopped { " (stopped before its end)" } else { "" };
    let _ = writeln!(out, "\nOutcome: {}{stopped}", colour.paint(tone, word));
    bullets(out, &run.broken_by);
}

fn story(out: &mut String, d: &Document, colour: Colour) {
    section(out, "What happened", colour);
    if d.events.is_empty() {
        let _ = writeln!(out, "  nothing");
    }
    for event in d.events.iter().take(STORY_LINES) {
        for (i, line) in wrapped(&event.text, COLUMNS - 12).iter().enumerate() {
            let time = if i == 0 { format!("{:>8.1} s", event.at_s) } else { " ".repeat(10) };
            let _ = writeln!(out, "{time}  {line}");
        }
    }
    if d.events.len() > STORY_LINES {
        let _ = writeln!(out, "            and {} more, in the page", d.events.len() - STORY_LINES);
    }
}

fn row(out: &mut String, name: &str, value: String, where_: String) {
    let line = format!("  {name:<20} {value:>13}  {where_}");
    let _ = writeln!(out, "{}", fitted(&line, COLUMNS).trim_end());
}

/// Sentence on when the frequency came back.
pub(super) fn settling(run: &RunFigures) -> (String, &'static str) {
    if run.settled_s <= 0.0 {
        ("never left".into(), "every area stayed within 10 mHz")
    } else if run.settled_s >= run.duration_s - 0.5 {
        ("not back".into(), "an area was outside 10 mHz at the end")
    } else {
        (format!("{:.2} s", run.settled_s), "last time an area was outside 10 mHz")
    }
}

fn figures(out: &mut String, run: &RunFigures, colour: Colour) {
    section(out, "Figures", colour);
    let at =
        |kind: &str, p: &super::figures::Place| format!("{kind} {}, at {:.2} s", p.name, p.at_s);
    row(
        out,
        "Lowest frequency",
        format!("{:.3} Hz", run.lowest_frequency_hz),
        at("bus", &run.lowest_frequency_at),
    );
    row(
        out,
        "Highest frequency",
        format!("{:.3} Hz", run.highest_frequency_hz),
        at("bus", &run.highest_frequency_at),
    );
    row(
        out,
        "Steepest slope",
        format!("{:+.3} Hz/s", run.steepest_hz_per_s),
        at("over 500 ms,", &run.steepest_at),
    );
    let (value, meaning) = settling(run);
    row(out, "Back within 10 mHz", value, meaning.into());
    row(
        out,
        "Worst loading",
        format!("{:.1} %", 100.0 * run.worst_loading),
        at("of rating, line", &run.worst_loading_at),
    );
    row(
        out,
        "Above rating",
        format!("{:.2} s", run.over_rating_s),
        "any line above 100.1 %, in all".into(),
    );
    if run.black_load_mw > 0.0 {
        row(
            out,
            "Load in the dark",
            format!("{:.1} MW", run.black_load_mw),
            "at buses without supply, at the end".into(),
        );
    }
}

fn area_row(area: &AreaFigures, least: Option<&&'static str>, stewards: bool) -> String {
    let verdict = match (area.steward_alive, area.verdict) {
        (false, _) => "dead",
        (true, Some(word)) => word,
        (true, None) => "-",
    };
    let (rung, worst, least) = match stewards {
        true => (area.rung, area.worst_rung, least.copied().unwrap_or("-")),
        false => ("-", "-", "-"),
    };
    format!(
        "  {} {rung:<7} {worst:<7} {least:<7} {verdict:<10} {:>6} {:>8.2} {:>5} {:>8.2}",
        fitted(&area.name, 12),
        area.proofs,
        area.ties_off_schedule_mw,
        area.units_moved,
        area.shed_mw,
    )
}

fn areas(out: &mut String, run: &RunFigures, colour: Colour) {
    section(out, "Areas at the end", colour);
    for [a, b, c, d, e, f, g, h, i] in [
        ["", "rung", "worst", "least", "verdict", "proofs", "ties off", "units", "shed"],
        ["", "", "", "", "", "", "[MW]", "moved", "[MW]"],
    ] {
        let _ = writeln!(out, "  {a:12} {b:<7} {c:<7} {d:<7} {e:<10} {f:>6} {g:>8} {h:>5} {i:>8}");
    }
    let stewards = run.scheme == "steward";
    for (i, area) in run.areas.iter().enumerate() {
        let _ = writeln!(out, "{}", area_row(area, run.judge.least_rung.get(i), stewards));
    }
    if !stewards {
        return;
    }
    let _ = writeln!(out, "\n  Frames            sent      lost   refused");
    for area in &run.areas {
        let f = area.frames;
        let _ = writeln!(
            out,
            "  {} {:>9} {:>9} {:>9}",
            fitted(&area.name, 12),
            f.sent,
            f.lost,
            f.refused
        );
    }
}

fn judged(out: &mut String, run: &RunFigures, colour: Colour) {
    section(out, "Held against an independent optimum", colour);
    let j = &run.judge;
    let _ = match j.optimum_cost {
        Some(best) => writeln!(out, "  Cost {:.4}, optimum {best:.4}", j.cost),
        None => writeln!(out, "  Cost {:.4}, no reference for it", j.cost),
    };
    if j.shed_mw > 0.0 || j.least_shed_mw > 0.005 {
        let _ = writeln!(out, "  Shed {:.2} MW, least {:.2} MW", j.shed_mw, j.least_shed_mw);
    }
    for f in j.facts.iter().filter(|f| f.name != "rung") {
        let mark = if f.met { "met   " } else { "BROKEN" };
        let line = format!(
            "  {mark} {:<26} {:>9.3} of {:>8.3} {:<6} {}",
            f.name, f.worst, f.limit, f.unit, f.where_
        );
        let _ = writeln!(out, "{}", fitted(&line, COLUMNS).trim_end());
    }
    bullets(out, &j.not_judged);
}
