//! The hex blocks of `WIRE.md`, for the golden tests.

use std::collections::BTreeMap;

/// The page itself.
pub const PAGE: &str = include_str!("../../WIRE.md");

/// The hex of each named block: example -> row -> bytes.
pub fn examples() -> BTreeMap<&'static str, BTreeMap<&'static str, Vec<u8>>> {
    let mut blocks = BTreeMap::new();
    for block in PAGE.split("```hex ").skip(1) {
        let body = block.split("```").next().expect("split gives a first part");
        let (name, lines) = body.split_once('\n').expect("a block has lines");
        let mut rows = BTreeMap::<_, Vec<u8>>::new();
        let mut row = "";
        for line in lines.lines() {
            let (label, hex) = line.split_at(8);
            if !label.trim().is_empty() {
                row = label.trim();
            }
            let bytes = hex
                .split_whitespace()
                .map(|pair| u8::from_str_radix(pair, 16).expect("two hex digits"));
            rows.entry(row).or_default().extend(bytes);
        }
        assert!(blocks.insert(name, rows).is_none(), "{name} is there twice");
    }
    blocks
}

/// Bytes as the page writes them.
pub fn hex(bytes: &[u8]) -> String {
    bytes.iter().map(|byte| format!("{byte:02X} ")).collect()
}
