//! Fixed columns to records.
//!
//! Contract: fields are cut by column, never by blanks, since neighbours may
//! touch; a blank field is 0. Lines may end in CR LF; what follows the end mark
//! of a section, and every section but the two first, is not read.
//!
//! Columns (from 1): title 32-37 MVA base, 46-73 name; bus 1-4 number, 6-17
//! name, 19-20 area, 25-26 type, 41-49 load MW, 60-67 generation MW; branch 1-4
//! and 6-9 buses, 30-40 reactance, 51-55 rating, 77-82 ratio, 84-90 shift.

use std::ops::Range;

use super::super::problems::Problem;

/// Type code of the bus that balances the solved case.
const SLACK: i64 = 3;

/// A file as it stands.
#[derive(Debug)]
pub(super) struct Case {
    pub title: String,
    pub base_mva: f64,
    pub buses: Vec<BusRecord>,
    pub branches: Vec<BranchRecord>,
    /// What of the file was read otherwise than it says.
    pub notes: Vec<String>,
}

/// A bus record.
#[derive(Debug)]
pub(super) struct BusRecord {
    pub number: i64,
    pub label: String,
    pub area: i64,
    pub is_slack: bool,
    pub load_mw: f64,
    pub generation_mw: f64,
}

/// A branch record; ends are indices of buses.
#[derive(Debug)]
pub(super) struct BranchRecord {
    pub from: usize,
    pub to: usize,
    pub reactance_pu: f64,
    pub rating_mw: f64,
    pub ratio: f64,
    pub shift_deg: f64,
}

/// A line with its place in the text.
#[derive(Clone, Copy)]
struct Card<'t> {
    text: &'t str,
    start: usize,
}

impl<'t> Card<'t> {
    /// Columns `first` to `last`, counted from 1, as far as the line goes.
    fn cut(self, first: usize, last: usize) -> (&'t str, Range<usize>) {
        let at =
            |count: usize| self.text.char_indices().nth(count).map_or(self.text.len(), |(i, _)| i);
        let (from, to) = (at(first - 1), at(last));
        (self.text[from..to].trim(), self.start + from..self.start + to)
    }

    /// The whole line.
    fn span(self) -> Range<usize> {
        self.start..self.start + self.text.len()
    }

    /// A number in columns; blank is 0.
    fn number(self, columns: (usize, usize), what: &str, log: &mut Vec<Problem>) -> f64 {
        let (field, span) = self.cut(columns.0, columns.1);
        if field.is_empty() {
            return 0.0;
        }
        match field.parse::<f64>() {
            Ok(value) if value.is_finite() => value,
            _ => {
                let title = format!("no {what} in columns {} to {}", columns.0, columns.1);
                log.push(Problem::new(span, title).found(format!("this is `{field}`")));
                0.0
            }
        }
    }

    /// A whole number in columns; blank is 0.
    fn whole(self, columns: (usize, usize), what: &str, log: &mut Vec<Problem>) -> i64 {
        let value = self.number(columns, what, log);
        if value.fract() != 0.0 {
            let (_, span) = self.cut(columns.0, columns.1);
            log.push(Problem::new(span, format!("{what} must be a whole number")));
        }
        value as i64
    }
}

/// The lines of a text with their places, without line ends.
fn cards(source: &str) -> Vec<Card<'_>> {
    let mut start = 0;
    source
        .split_inclusive('\n')
        .map(|line| {
            let card = Card { text: line.trim_end_matches(['\n', '\r']), start };
            start += line.len();
            card
        })
        .collect()
}

/// Read a file, or say everything that is wrong with it.
pub(super) fn read(source: &str) -> Result<Case, Vec<Problem>> {
    let mut log = Vec::new();
    let cards = cards(source);
    let mut case = Case {
        title: String::new(),
        base_mva: 0.0,
        buses: Vec::new(),
        branches: Vec::new(),
        notes: Vec::new(),
    };
    read_title(&cards, &mut case, &mut log);
    for card in section(&cards, "BUS DATA FOLLOWS", &mut case.notes, &mut log) {
        read_bus(card, &mut case, &mut log);
    }
    for card in section(&cards, "BRANCH DATA FOLLOWS", &mut case.notes, &mut log) {
        read_branch(card, &mut case, &mut log);
    }
    if log.is_empty() { Ok(case) } else { Err(log) }
}

/// The title is the last line before the buses; some files put a `TAPE` line above it.
fn read_title(cards: &[Card<'_>], case: &mut Case, log: &mut Vec<Problem>) {
    let buses = cards.iter().position(|card| heads(card, "BUS DATA FOLLOWS")).unwrap_or(0);
    let Some(title) = cards[..buses].iter().rev().find(|card| !card.text.trim().is_empty()) else {
        let problem = Problem::new(0..0, "no title line before `BUS DATA FOLLOWS`")
            .right("a Common Data Format file begins with a title that gives the MVA base in columns 32 to 37");
        log.push(problem);
        return;
    };
    title.cut(46, 73).0.clone_into(&mut case.title);
    case.base_mva = title.number((32, 37), "MVA base", log);
    if case.base_mva <= 0.0 && log.is_empty() {
        let problem = Problem::new(title.span(), "no MVA base in columns 32 to 37")
            .right("a number above 0, such as 100.0");
        log.push(problem);
    }
}

/// Whether a line is the heading of a section.
fn heads(card: &Card<'_>, heading: &str) -> bool {
    card.text.trim_start().to_ascii_uppercase().starts_with(heading)
}

/// The records of a section; its heading's count is a remark, not a rule.
fn section<'t>(
    cards: &[Card<'t>],
    heading: &str,
    notes: &mut Vec<String>,
    log: &mut Vec<Problem>,
) -> Vec<Card<'t>> {
    let Some(at) = cards.iter().position(|card| heads(card, heading)) else {
        log.push(Problem::new(0..0, format!("no section `{heading}`")));
        return Vec::new();
    };
    let rest = &cards[at + 1..];
    let ends = |card: &Card<'_>| card.text.trim_start().starts_with("-999");
    let Some(end) = rest.iter().position(ends) else {
        let problem = Problem::new(cards[at].span(), format!("section `{heading}` does not end"))
            .right("a section ends with a line that begins with -999; the file may be cut off");
        log.push(problem);
        return Vec::new();
    };
    let records: Vec<Card<'t>> =
        rest[..end].iter().copied().filter(|card| !card.text.trim().is_empty()).collect();
    let words = cards[at].text.split_whitespace();
    let promised = words.filter_map(|word| word.parse::<usize>().ok()).next();
    if let Some(count) = promised.filter(|&count| count != records.len()) {
        notes.push(format!(
            "the heading `{heading}` promises {count} items; the {} that stand there were read",
            records.len()
        ));
    }
    records
}

fn read_bus(card: Card<'_>, case: &mut Case, log: &mut Vec<Problem>) {
    let bus = BusRecord {
        number: card.whole((1, 4), "bus number", log),
        label: card.cut(6, 17).0.to_owned(),
        area: card.whole((19, 20), "area number", log),
        is_slack: card.whole((25, 26), "bus type", log) == SLACK,
        load_mw: card.number((41, 49), "load", log),
        generation_mw: card.number((60, 67), "generation", log),
    };
    let number = bus.number;
    let (_, span) = card.cut(1, 4);
    if number <= 0 {
        log.push(
            Problem::new(span, "a bus number must be above 0").found(format!("this is {number}")),
        );
    } else if case.buses.iter().any(|other| other.number == number) {
        log.push(Problem::new(span, format!("two buses have the number {number}")));
    }
    case.buses.push(bus);
}

fn read_branch(card: Card<'_>, case: &mut Case, log: &mut Vec<Problem>) {
    let mut end = |columns: (usize, usize)| {
        let number = card.whole(columns, "bus number", log);
        let found = case.buses.iter().position(|bus| bus.number == number);
        if found.is_none() {
            let (_, span) = card.cut(columns.0, columns.1);
            let problem = Problem::new(span, format!("there is no bus {number}"))
                .found("a branch must end at a bus of the section above");
            log.push(problem);
        }
        found.unwrap_or(0)
    };
    let (from, to) = (end((1, 4)), end((6, 9)));
    let branch = BranchRecord {
        from,
        to,
        reactance_pu: card.number((30, 40), "reactance", log),
        rating_mw: card.number((51, 55), "rating", log),
        ratio: card.number((77, 82), "ratio", log),
        shift_deg: card.number((84, 90), "phase shift", log),
    };
    case.branches.push(branch);
}
