//! Whatever the bytes, reading ends in a value or in problems that can be shown.

use proptest::prelude::*;

use super::super::builtin::{GRID_TEXT, builtin_grid, builtin_text};
use super::super::{cdf, parse_grid, parse_play};
use super::SMALL;

/// A text with one stretch of it replaced by something else.
fn damaged(text: &str, at: usize, len: usize, put: &str) -> String {
    let chars: Vec<char> = text.chars().collect();
    let at = at % (chars.len() + 1);
    let end = (at + len).min(chars.len());
    chars[..at].iter().copied().chain(put.chars()).chain(chars[end..].iter().copied()).collect()
}

proptest! {
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::with_cases(256) })]

    #[test]
    fn survives_damaged_grid_files(at: usize, len in 0usize..40, put in "[a-z0-9\\[\\]\"=. \n\u{e9}-]{0,8}") {
        for text in [SMALL, GRID_TEXT] {
            let text = damaged(text, at, len, &put);
            if let Err(problems) = parse_grid(&text, "damaged.grid.toml") {
                prop_assert!(!problems.list().is_empty());
                prop_assert!(problems.to_string().contains("damaged.grid.toml"));
            }
        }
    }

    #[test]
    fn survives_damaged_play_files(at: usize, len in 0usize..40, put in "[a-z0-9\\[\\]\"=. \n-]{0,8}") {
        let text = damaged(builtin_text("shed").expect("a built-in play"), at, len, &put);
        if let Err(problems) = parse_play(&text, "damaged.play.toml", &builtin_grid()) {
            prop_assert!(!problems.list().is_empty());
            prop_assert!(problems.to_string().contains("damaged.play.toml"));
        }
    }

    #[test]
    fn survives_any_bytes_as_an_import(bytes in proptest::collection::vec(any::<u8>(), 0..400)) {
        let mut source = b" 01/02/03 X                     100.0\nBUS DATA FOLLOWS\n".to_vec();
        source.extend(bytes);
        source.extend(b"\n-999\nBRANCH DATA FOLLOWS\n-999\n");
        if let Err(problems) = cdf::import(&source, "damaged.cdf") {
            prop_assert!(problems.to_string().contains("damaged.cdf"));
        }
    }
}
