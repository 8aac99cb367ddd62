//! Small helpers for hand-written SVG: escaping, ticks, reduction, colours.
//!
//! Contract: coordinates are written with one decimal, so that the same data
//! give the same bytes. Text is escaped here and nowhere else.

use std::fmt::Write as _;

/// Dark text.
pub(crate) const INK: &str = "#23302b";
/// Quiet text and axes.
pub(crate) const SLATE: &str = "#5b6b70";
/// Grid lines.
pub(crate) const HAIR: &str = "#dfe6e1";
/// Beyond a limit.
pub(crate) const ALARM: &str = "#b3261e";
/// Close to a limit.
pub(crate) const WARN: &str = "#b07a14";
/// Within limits.
pub(crate) const HEDGE: &str = "#3c7a52";

/// Colours of areas and curves, told apart in grey too by `DASHES`.
const COLOURS: [&str; 10] = [
    "#2f6f4f", "#3f5f8a", "#b07a14", "#8a3f63", "#2b8290", "#7a8a2e", "#9a5a3a", "#5a4f9a",
    "#4d4d4d", "#c05a7a",
];

/// Dash patterns, so that colour is never alone.
const DASHES: [&str; 5] = ["", "7 3", "2 2.5", "10 3 2 3", "4 2 1 2"];

/// Colour of the n-th thing.
pub(crate) fn colour(index: usize) -> &'static str {
    COLOURS[index % COLOURS.len()]
}

/// Dash pattern of the n-th thing.
pub(crate) fn dash(index: usize) -> &'static str {
    DASHES[index % DASHES.len()]
}

/// Text with the characters XML reserves written out.
pub(crate) fn escaped(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for c in text.chars() {
        match c {
            '&' => out.push_str("&amp;"),
            '<' => out.push_str("&lt;"),
            '>' => out.push_str("&gt;"),
            '"' => out.push_str("&quot;"),
            c if c.is_control() => out.push(' '),
            c => out.push(c),
        }
    }
    out
}

/// A drawing under construction.
#[derive(Clone, Debug, Default)]
pub(crate) struct Drawing {
    body: String,
}

/// Where a text stands against its point.
#[derive(Clone, Copy, Debug)]
pub(crate) enum Anchor {
    Start,
    Middle,
    End,
}

impl Drawing {
    /// Add raw elements.
    pub(crate) fn raw(&mut self, element: &str) {
        self.body.push_str(element);
        self.body.push('\n');
    }

    /// A straight line.
    pub(crate) fn line(
        &mut self,
        from: (f64, f64),
        to: (f64, f64),
        colour: &str,
        width: f64,
        dash: &str,
    ) {
        let ((x1, y1), (x2, y2)) = (from, to);
        let _ = writeln!(
            self.body,
            r#"<line x1="{x1:.1}" y1="{y1:.1}" x2="{x2:.1}" y2="{y2:.1}" stroke="{colour}" stroke-width="{width:.1}"{}/>"#,
            dashed(dash)
        );
    }

    /// A polyline.
    pub(crate) fn curve(&mut self, points: &[(f64, f64)], colour: &str, width: f64, dash: &str) {
        if points.is_empty() {
            return;
        }
        let _ = write!(self.body, r#"<polyline points=""#);
        for (x, y) in points {
            let _ = write!(self.body, "{x:.1},{y:.1} ");
        }
        let _ = writeln!(
            self.body,
            r#"" fill="none" stroke="{colour}" stroke-width="{width:.1}" stroke-linejoin="round"{}/>"#,
            dashed(dash)
        );
    }

    /// A rectangle.
    pub(crate) fn rect(&mut self, at: (f64, f64), size: (f64, f64), fill: &str, more: &str) {
        let ((x, y), (w, h)) = (at, size);
        let _ = writeln!(
            self.body,
            r#"<rect x="{x:.1}" y="{y:.1}" width="{w:.1}" height="{h:.1}" fill="{fill}" {more}/>"#
        );
    }

    /// A piece of text.
    pub(crate) fn text(
        &mut self,
        at: (f64, f64),
        anchor: Anchor,
        size: f64,
        colour: &str,
        text: &str,
    ) {
        self.styled_text(at, anchor, size, colour, "", text);
    }

    /// A piece of text with further attributes.
    pub(crate) fn styled_text(
        &mut self,
        at: (f64, f64),
        anchor: Anchor,
        size: f64,
        colour: &str,
        more: &str,
        text: &str,
    ) {
        let anchor = match anchor {
            Anchor::Start => "start",
            Anchor::Middle => "middle",
            Anchor::End => "end",
        };
        let (x, y) = at;
        let _ = writeln!(
            self.body,
            r#"<text x="{x:.1}" y="{y:.1}" text-anchor="{anchor}" font-size="{size:.1}" fill="{colour}" {more}>{}</text>"#,
            escaped(text)
        );
    }

    /// The finished drawing.
    pub(crate) fn finish(self, width: f64, height: f64, title: &str) -> String {
        let title = escaped(title);
        format!(
            r#"<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {width:.0} {height:.0}" width="{width:.0}" height="{height:.0}" role="img" aria-label="{title}" font-family="system-ui, 'Segoe UI', 'DejaVu Sans', sans-serif">
<title>{title}</title>
{}</svg>
"#,
            self.body
        )
    }
}

fn dashed(dash: &str) -> String {
    match dash {
        "" => String::new(),
        pattern => format!(r#" stroke-dasharray="{pattern}""#),
    }
}

/// Round ticks that cover a range: step 1, 2 or 5 times a power of ten.
pub(crate) fn ticks(low: f64, high: f64, about: usize) -> Vec<f64> {
    let span = high - low;
    if !(span.is_finite() && span > 0.0) {
        return vec![low];
    }
    let raw = span / about.max(1) as f64;
    let power = 10f64.powf(raw.log10().floor());
    let step = [1.0, 2.0, 5.0, 10.0].iter().map(|m| m * power).find(|s| *s >= raw).unwrap_or(raw);
    let first = (low / step - 1e-9).ceil() as i64;
    let last = (high / step + 1e-9).floor() as i64;
    // At most `about + 1` ticks by the choice of the step; the bound guards rounding.
    (first..=last.min(first + 4 * about as i64)).map(|i| i as f64 * step).collect()
}

/// Decimals that tell neighbouring ticks apart.
pub(crate) fn decimals(ticks: &[f64]) -> usize {
    match ticks {
        [a, b, ..] => (-(b - a).abs().log10().floor()).clamp(0.0, 6.0) as usize,
        _ => 1,
    }
}

/// Difference in pixels that nobody sees.
const UNSEEN_PX: f64 = 0.05;

/// Reduce samples to first, lowest, highest and last of each pixel column,
/// and level stretches to their ends.
///
/// Not finite samples break nothing: they are left out.
pub(crate) fn reduced(points: impl Iterator<Item = (f64, f64)>) -> Vec<(f64, f64)> {
    let mut out: Vec<(f64, f64)> = Vec::new();
    let mut column: Vec<(f64, f64)> = Vec::new();
    for (x, y) in points.filter(|p| p.0.is_finite() && p.1.is_finite()) {
        if column.first().is_some_and(|c| c.0.floor() != x.floor()) {
            flush(&mut column, &mut out);
        }
        column.push((x, y));
    }
    flush(&mut column, &mut out);
    out
}

/// Append a point, or move the last one along while the curve is level.
fn append(out: &mut Vec<(f64, f64)>, point: (f64, f64)) {
    let level = |p: &(f64, f64)| (p.1 - point.1).abs() < UNSEEN_PX;
    match out.as_mut_slice() {
        [.., before, last] if level(before) && level(last) => last.0 = point.0,
        _ => out.push(point),
    }
}

fn flush(column: &mut Vec<(f64, f64)>, out: &mut Vec<(f64, f64)>) {
    let by = |a: &&(f64, f64), b: &&(f64, f64)| a.1.total_cmp(&b.1);
    let mut kept: Vec<(f64, f64)> =
        [column.first(), column.iter().min_by(by), column.iter().max_by(by), column.last()]
            .into_iter()
            .flatten()
            .copied()
            .collect();
    kept.sort_by(|a, b| a.0.total_cmp(&b.0));
    kept.dedup();
    kept.into_iter().for_each(|p| append(out, p));
    column.clear();
}
