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
///
/// Failing that, the shortest word that holds the one found (`damping` in `load_damping`).
pub(crate) fn nearest<'a>(
    found: &str,
    words: impl IntoIterator<Item = &'a str>,
) -> Option<&'a str> {
    const PART_MIN: usize = 4;
    let words: Vec<&str> = words.into_iter().collect();
    let length = |word: &str| word.chars().count();
    let close = words
        .iter()
        .map(|&word| (edits(found, word), word))
        .min_by_key(|&(distance, _)| distance)
        .filter(|&(distance, word)| 2 * distance <= length(found).max(length(word)))
        .map(|(_, word)| word);
    let holding = || {
        let holds = |word: &&&str| length(found) >= PART_MIN && word.contains(found);
        words.iter().filter(holds).copied().min_by_key(|word| length(word))
    };
    close.or_else(holding)
}

/// `did you mean ...?` or, when nothing is near, the words themselves.
pub(crate) fn suggestion(found: &str, noun: &str, words: &[&str]) -> String {
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
        assert_eq!(nearest("damping", ["load_damping", "damping_mw_per_hz"]), Some("load_damping"));
        assert!(suggestion("zzz", "key", &keys).contains("`rating_mw`"));
    }
}
