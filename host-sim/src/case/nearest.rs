//! The nearest of a list of words, for suggestions.
//!
//! Contract: a suggestion is made only when at most half of the longer word has
//! to change; beyond that a wrong guess misleads more than it helps.

/// How many single-character edits lead from one word to the other, case ignored.
///
/// Cost: one row of the table at a time, `len(a) * len(b)` steps.
/// Source: V. I. Levenshtein, "Binary codes capable of correcting deletions,
/// insertions, and reversals", Soviet Physics Doklady 10 (1966).
pub(crate) fn edits(a: &str, b: &str) -> usize {
    let b: Vec<char> = b.to_lowercase().chars().collect();
    let mut row: Vec<usize> = (0..=b.len()).collect();
    for (i, from) in a.to_lowercase().chars().enumerate() {
        let mut diagonal = row[0];
        row[0] = i + 1;
        for (j, &to) in b.iter().enumerate() {
            let swap = diagonal + usize::from(from != to);
            diagonal = row[j + 1];
            row[j + 1] = swap.min(row[j] + 1).min(diagonal + 1);
        }
    }
    row[b.len()]
}

/// The word of the list nearest to the one found, if any is near enough.
pub(crate) fn nearest<'a>(
    found: &str,
    words: impl IntoIterator<Item = &'a str>,
) -> Option<&'a str> {
    words
        .into_iter()
        .map(|word| (edits(found, word), word))
        .min_by_key(|&(distance, _)| distance)
        .filter(|&(distance, word)| 2 * distance <= found.chars().count().max(word.chars().count()))
        .map(|(_, word)| word)
}

/// `did you mean ...?` or, when nothing is near, the words themselves.
pub(crate) fn suggestion<'a>(found: &str, noun: &str, words: &[&'a str]) -> String {
    const SHOWN: usize = 24;
    match nearest(found, words.iter().copied()) {
        Some(word) => format!("did you mean `{word}`?"),
        None if words.is_empty() => format!("there is no {noun} yet"),
        None => {
            let shown: Vec<String> = words.iter().take(SHOWN).map(|w| format!("`{w}`")).collect();
            let more = if words.len() > SHOWN { ", ..." } else { "" };
            format!("{noun} can be {}{more}", shown.join(", "))
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn counts_edits_of_hand_worked_pairs() {
        assert_eq!(edits("kitten", "sitting"), 3);
        assert_eq!(edits("", "abc"), 3);
        assert_eq!(edits("Line", "line"), 0);
    }

    #[test]
    fn suggests_a_close_word_and_lists_when_none_is_close() {
        let keys = ["reactance_pu", "rating_mw"];
        assert_eq!(nearest("reactance", keys), Some("reactance_pu"));
        assert_eq!(nearest("zzz", keys), None);
        assert!(suggestion("zzz", "key", &keys).contains("`rating_mw`"));
    }
}
