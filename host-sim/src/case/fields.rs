//! Typed look-ups in a parsed table: every wrong value becomes a problem at its place.
//!
//! Contract: a look-up returns a usable value in any case; when the file's value
//! is missing or wrong, the problem is logged, the entry is marked broken and a
//! placeholder returned, so that all problems of a file come out in one reading.
//! The keys asked for are the keys that exist: [`Fields::finish`] reports others.

use std::ops::Range;

use toml::Spanned;
use toml::de::{DeTable, DeValue};

use super::bounds::Bounds;
use super::marks::{Marks, Names};
use super::nearest::suggestion;
use super::problems::Problem;

/// One table under reading.
pub(crate) struct Fields<'a, 'i> {
    table: &'a DeTable<'i>,
    noun: &'static str,
    asked: Vec<&'static str>,
    marks: Marks,
    log: &'a mut Vec<Problem>,
}

impl<'a, 'i> Fields<'a, 'i> {
    /// Start reading a table; `noun` names an entry, such as `a line`.
    pub fn new(
        table: &'a DeTable<'i>,
        heading: Range<usize>,
        noun: &'static str,
        log: &'a mut Vec<Problem>,
    ) -> Self {
        let marks = Marks { heading, ..Marks::default() };
        Self { table, noun, asked: Vec::new(), marks, log }
    }

    /// Report the keys nobody asked for and hand over the places.
    pub fn finish(mut self) -> Marks {
        for key in self.table.keys() {
            let name = key.get_ref().as_ref();
            if !self.asked.contains(&name) {
                self.marks.broken = true;
                let problem = Problem::new(key.span(), format!("unknown key `{name}`"))
                    .found(format!("{} has no such key", self.noun))
                    .right(suggestion(name, "a key", &self.asked));
                self.log.push(problem);
            }
        }
        self.marks
    }

    /// Log a problem of this entry and mark it broken.
    pub fn wrong(&mut self, problem: Problem) {
        self.marks.broken = true;
        self.log.push(problem);
    }

    /// Place of a key's value, or of the heading.
    pub fn place(&self, key: &str) -> Range<usize> {
        self.marks.of(key)
    }

    /// The value of a key, marked as asked for.
    pub fn value(&mut self, key: &'static str) -> Option<&'a Spanned<DeValue<'i>>> {
        if !self.asked.contains(&key) {
            self.asked.push(key);
        }
        let value = self.table.get(key)?;
        self.marks.values.insert(key, value.span());
        Some(value)
    }

    /// A key that must be there.
    fn needed(&mut self, key: &'static str) -> Option<&'a Spanned<DeValue<'i>>> {
        let value = self.value(key);
        if value.is_none() {
            let problem = Problem::new(self.marks.heading.clone(), format!("`{key}` is missing"))
                .found(format!("{} needs `{key}`", self.noun));
            self.wrong(problem);
        }
        value
    }

    /// A value of another type than it should be.
    fn mistyped(&mut self, key: &str, value: &Spanned<DeValue<'i>>, right: &str) {
        let problem = Problem::new(value.span(), format!("`{key}` must be {right}"))
            .found(format!("this is {}", type_name(value.get_ref())));
        self.wrong(problem);
    }

    /// A number out of a value, checked.
    fn checked(&mut self, key: &str, value: &Spanned<DeValue<'i>>, bounds: Bounds) -> Option<f64> {
        let Some(number) = to_number(value.get_ref()) else {
            self.mistyped(key, value, "a number");
            return None;
        };
        if bounds.hold(number) {
            return Some(number);
        }
        let title = if number.is_finite() {
            format!("`{key}` is out of range")
        } else {
            format!("`{key}` must be finite")
        };
        let problem = Problem::new(value.span(), title)
            .found(format!("this is {number}"))
            .right(format!("`{key}` goes {bounds}"));
        self.wrong(problem);
        None
    }

    /// A number that must be there; a placeholder of 1 stands in for a wrong one.
    pub fn need_number(&mut self, key: &'static str, bounds: Bounds) -> f64 {
        self.needed(key).and_then(|value| self.checked(key, value, bounds)).unwrap_or(1.0)
    }

    /// A number that may be there.
    pub fn maybe_number(&mut self, key: &'static str, bounds: Bounds) -> Option<f64> {
        let value = self.value(key)?;
        self.checked(key, value, bounds)
    }

    /// A number with a default.
    pub fn number(&mut self, key: &'static str, default: f64, bounds: Bounds) -> f64 {
        self.maybe_number(key, bounds).unwrap_or(default)
    }

    /// A whole number with a default.
    pub fn whole(&mut self, key: &'static str, default: u64, least: u64, most: u64) -> u64 {
        let Some(value) = self.value(key) else {
            return default;
        };
        let DeValue::Integer(digits) = value.get_ref() else {
            self.mistyped(key, value, "a whole number");
            return default;
        };
        match u64::from_str_radix(digits.as_str(), digits.radix()) {
            Ok(number) if (least..=most).contains(&number) => number,
            _ => {
                let problem = Problem::new(value.span(), format!("`{key}` is out of range"))
                    .found(format!("this is {digits}"))
                    .right(format!("`{key}` goes from {least} to {most}"));
                self.wrong(problem);
                default
            }
        }
    }

    /// Yes or no, with a default.
    pub fn flag(&mut self, key: &'static str, default: bool) -> bool {
        let Some(value) = self.value(key) else {
            return default;
        };
        match value.get_ref() {
            DeValue::Boolean(flag) => *flag,
            _ => {
                self.mistyped(key, value, "true or false");
                default
            }
        }
    }

    /// A text that may be there.
    pub fn maybe_text(&mut self, key: &'static str) -> Option<&'a str> {
        let value = self.value(key)?;
        self.as_text(key, value)
    }

    /// A text that must be there.
    pub fn need_text(&mut self, key: &'static str) -> Option<&'a str> {
        let value = self.needed(key)?;
        self.as_text(key, value)
    }

    fn as_text(&mut self, key: &str, value: &'a Spanned<DeValue<'i>>) -> Option<&'a str> {
        match value.get_ref() {
            DeValue::String(text) => Some(text.as_ref()),
            _ => {
                self.mistyped(key, value, "a text in quotes");
                None
            }
        }
    }

    /// A name: something to call an entry by, in tables and on a map.
    pub fn need_name(&mut self) -> String {
        let Some(name) = self.need_text("name") else {
            return String::new();
        };
        self.check_name("name", name);
        name.to_owned()
    }

    /// A name that may be left out.
    pub fn name_or(&mut self, default: impl FnOnce() -> String) -> String {
        match self.maybe_text("name") {
            Some(name) => {
                self.check_name("name", name);
                name.to_owned()
            }
            None => default(),
        }
    }

    fn check_name(&mut self, key: &str, name: &str) {
        const LONGEST: usize = 40;
        let bad = if name.is_empty() {
            "it is empty"
        } else if name.trim() != name {
            "it begins or ends with a blank"
        } else if name.chars().any(char::is_control) {
            "it holds a control character"
        } else if name.chars().count() > LONGEST {
            "it is longer than 40 characters"
        } else {
            return;
        };
        let problem = Problem::new(self.place(key), "a name nobody can refer to").found(bad);
        self.wrong(problem);
    }

    /// One of a few words.
    pub fn choice<T: Copy>(&mut self, key: &'static str, words: &[(&str, T)], default: T) -> T {
        let Some(text) = self.maybe_text(key) else {
            return default;
        };
        self.pick(key, text, words).unwrap_or(default)
    }

    /// One of a few words, which must be there.
    pub fn need_choice<T: Copy>(&mut self, key: &'static str, words: &[(&str, T)]) -> Option<T> {
        let text = self.need_text(key)?;
        self.pick(key, text, words)
    }

    fn pick<T: Copy>(&mut self, key: &str, text: &str, words: &[(&str, T)]) -> Option<T> {
        let found = words.iter().find(|(word, _)| *word == text).map(|&(_, value)| value);
        if found.is_none() {
            let known: Vec<&str> = words.iter().map(|&(word, _)| word).collect();
            let problem = Problem::new(self.place(key), format!("`{key}` cannot be `{text}`"))
                .found("not one of the words it can be")
                .right(format!("`{key}` is one of {}", quoted(&known)));
            self.wrong(problem);
        }
        found
    }

    /// The index of a named thing; 0 stands in for a wrong one.
    pub fn need_reference(&mut self, key: &'static str, noun: &str, names: &Names) -> usize {
        match self.need_text(key) {
            Some(text) => self.resolve(self.place(key), text, noun, names),
            None => 0,
        }
    }

    /// The indices of exactly two named things.
    pub fn need_two(&mut self, key: &'static str, noun: &str, names: &Names) -> (usize, usize) {
        let Some(value) = self.needed(key) else {
            return (0, 0);
        };
        let items = match value.get_ref() {
            DeValue::Array(items) => items.as_ref(),
            _ => &[],
        };
        let [a, b] = items else {
            self.mistyped(key, value, &format!("a list of two {noun}s"));
            return (0, 0);
        };
        match (a.get_ref(), b.get_ref()) {
            (DeValue::String(first), DeValue::String(second)) => (
                self.resolve(a.span(), first, noun, names),
                self.resolve(b.span(), second, noun, names),
            ),
            _ => {
                self.mistyped(key, value, &format!("a list of two {noun}s"));
                (0, 0)
            }
        }
    }

    fn resolve(&mut self, span: Range<usize>, text: &str, noun: &str, names: &Names) -> usize {
        if let Some(&index) = names.indices.get(text) {
            return index;
        }
        let known: Vec<&str> = names.indices.keys().map(String::as_str).collect();
        let problem = Problem::new(span, format!("there is no {noun} `{text}`"))
            .found("nothing has this name")
            .right(suggestion(text, noun, &known));
        self.wrong(problem);
        0
    }

    /// Two numbers in brackets, as a place on the map.
    pub fn maybe_pair(&mut self, key: &'static str) -> Option<(f64, f64)> {
        let value = self.value(key)?;
        let pair = match value.get_ref() {
            DeValue::Array(items) => match items.as_ref() {
                [a, b] => to_number(a.get_ref()).zip(to_number(b.get_ref())),
                _ => None,
            },
            _ => None,
        };
        let pair = pair.filter(|(x, y)| x.is_finite() && y.is_finite());
        if pair.is_none() {
            self.mistyped(key, value, "two finite numbers, [x, y]");
        }
        pair
    }
}

/// Words in back-ticks, separated by commas.
pub(crate) fn quoted(words: &[&str]) -> String {
    let quoted: Vec<String> = words.iter().map(|word| format!("`{word}`")).collect();
    quoted.join(", ")
}

/// A number of the file; whole numbers count.
fn to_number(value: &DeValue<'_>) -> Option<f64> {
    match value {
        DeValue::Float(digits) => digits.as_str().parse().ok(),
        DeValue::Integer(digits) if digits.radix() == 10 => digits.as_str().parse().ok(),
        DeValue::Integer(digits) => {
            i64::from_str_radix(digits.as_str(), digits.radix()).ok().map(|whole| whole as f64)
        }
        _ => None,
    }
}

/// What a reader calls a value's type.
pub(crate) fn type_name(value: &DeValue<'_>) -> &'static str {
    match value {
        DeValue::String(_) => "a text",
        DeValue::Integer(_) => "a whole number",
        DeValue::Float(_) => "a number",
        DeValue::Boolean(_) => "true or false",
        DeValue::Datetime(_) => "a date or time",
        DeValue::Array(_) => "a list",
        DeValue::Table(_) => "a table",
    }
}
