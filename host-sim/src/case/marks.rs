//! Where the values of an entry stood, and the names other entries may refer to.
//!
//! Contract: a place is a byte range of the file's text. An entry with a missing
//! or wrong value is marked broken; checks across values leave it alone.

use std::collections::BTreeMap;
use std::ops::Range;

/// Where the values of one entry stood in the file.
#[derive(Clone, Debug, Default)]
pub(crate) struct Marks {
    /// Place of the entry's heading.
    pub heading: Range<usize>,
    /// Whether a value was missing or wrong, so that checks across keys are idle.
    pub broken: bool,
    /// Places of the values that were asked for.
    pub values: BTreeMap<&'static str, Range<usize>>,
}

impl Marks {
    /// Marks of an entry that is not there: broken, so that nothing is checked against it.
    pub fn of_nothing() -> Self {
        Self { broken: true, ..Self::default() }
    }

    /// Place of a key's value, or of the heading where the key is absent.
    pub fn of(&self, key: &str) -> Range<usize> {
        self.values.get(key).unwrap_or(&self.heading).clone()
    }

    /// Whether the file gives the key.
    pub fn has(&self, key: &str) -> bool {
        self.values.contains_key(key)
    }
}

/// Names that can be referred to.
#[derive(Debug, Default)]
pub(crate) struct Names {
    /// Index of each name.
    pub indices: BTreeMap<String, usize>,
}

impl Names {
    /// Names in order; of two equal ones the first counts.
    pub fn of<'a>(names: impl IntoIterator<Item = &'a str>) -> Self {
        let mut indices = BTreeMap::new();
        for (index, name) in names.into_iter().enumerate() {
            indices.entry(name.to_owned()).or_insert(index);
        }
        Self { indices }
    }
}
