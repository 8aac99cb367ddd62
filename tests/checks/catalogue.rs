//! The page that lists every outside check, kept true by a test.
//!
//! Contract: a check that leans on something published says so in one doc line,
//! `Source: WHAT; HOW SURE; tolerance HOW MUCH.`, before its `#[test]`. Data
//! flow: test files of the four crates -> [`entries`] -> [`page`] -> compared
//! with `tests/README.md`; with `HEDGEROW_BLESS=1` in the environment the page
//! is written instead.

use std::fmt::Write as _;
use std::path::{Path, PathBuf};

/// Where test functions stand, and the heading of each part of the page.
const PLACES: [(&str, &str); 4] = [
    ("tests/checks", "Whole programs and networks"),
    ("protocol", "Protocol"),
    ("firmware", "Steward"),
    ("host-sim", "Host"),
];

/// First lines of the page.
const INTRO: &str = "# Outside checks\n\n\
    Every test that holds the program against something published, or against another program: what it checks, where the figures come from, how far off it may be, and where it is.\n\
    This page is made from the `Source:` lines of the tests; `HEDGEROW_BLESS=1 cargo test -p hedgerow-tests --test checks catalogue::` writes it anew.\n";

/// One outside check.
#[derive(Clone, Debug, PartialEq)]
struct Entry {
    what: String,
    source: String,
    tolerance: String,
    file: String,
}

/// Folder of the workspace.
fn root() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).parent().unwrap().to_path_buf()
}

/// Rust files below a folder, in order of their paths; build output left out.
fn rust_files(folder: &Path) -> Vec<PathBuf> {
    let mut found = Vec::new();
    let mut open = vec![folder.to_path_buf()];
    while let Some(folder) = open.pop() {
        let Ok(listed) = std::fs::read_dir(&folder) else { continue };
        for path in listed.map(|entry| entry.unwrap().path()) {
            if path.is_dir() && !path.ends_with("target") {
                open.push(path);
            } else if path.extension().is_some_and(|extension| extension == "rs") {
                found.push(path);
            }
        }
    }
    found.sort();
    found
}

/// Source and tolerance of a `Source:` line.
fn parts(line: &str) -> (String, String) {
    match line.rsplit_once("; tolerance ") {
        Some((source, tolerance)) => {
            (source.to_owned(), tolerance.trim_end_matches('.').to_owned())
        }
        None => (line.trim_end_matches('.').to_owned(), "none stated".to_owned()),
    }
}

/// Name of the function that a line declares.
fn function(line: &str) -> Option<&str> {
    let (_, rest) = line.split_once("fn ")?;
    rest.split(['(', '<']).next().filter(|name| !name.is_empty())
}

/// Checks of a text: a `Source:` line, then `#[test]`, with nothing between them
/// and the function but comments and attributes.
fn entries(text: &str, file: &str) -> Vec<Entry> {
    let mut found = Vec::new();
    let (mut source, mut is_test) = (None, false);
    for line in text.lines().map(str::trim) {
        if let Some(said) = line.strip_prefix("/// Source:") {
            source = Some(said.trim().to_owned());
        } else if line == "#[test]" {
            is_test = true;
        } else if !line.starts_with("//") && !line.starts_with("#[") {
            if let (true, Some(said), Some(name)) = (is_test, source.take(), function(line)) {
                let (source, tolerance) = parts(&said);
                let what = name.replace('_', " ");
                found.push(Entry { what, source, tolerance, file: file.to_owned() });
            }
            (source, is_test) = (None, false);
        }
    }
    found
}

/// The page of all checks.
fn page() -> String {
    let root = root();
    let mut out = INTRO.to_owned();
    for (place, heading) in PLACES {
        let mut rows = String::new();
        for path in rust_files(&root.join(place)) {
            let file = path.strip_prefix(&root).unwrap().display().to_string();
            for entry in entries(&std::fs::read_to_string(&path).unwrap(), &file) {
                let Entry { what, source, tolerance, file } = entry;
                let cells = [what, source, tolerance, format!("`{file}`")];
                let cells = cells.map(|cell| cell.replace('|', "\\|"));
                let _ = writeln!(rows, "| {} |", cells.join(" | "));
            }
        }
        if !rows.is_empty() {
            let _ = write!(
                out,
                "\n## {heading}\n\n| what | source | tolerance | where |\n|---|---|---|---|\n{rows}"
            );
        }
    }
    out
}

#[test]
fn page_of_outside_checks_is_that_of_the_tests() {
    let path = root().join("tests").join("README.md");
    let wanted = page();
    if std::env::var_os("HEDGEROW_BLESS").is_some_and(|value| value == "1") {
        std::fs::write(&path, wanted).unwrap();
        return;
    }
    let found = std::fs::read_to_string(&path).unwrap_or_default();
    let differs = |(a, b): &(&str, &str)| a != b;
    let first = wanted.lines().zip(found.lines()).find(differs);
    assert!(
        wanted == found,
        "tests/README.md is not what the tests say ({} lines against {}); first difference: {first:?}; \
         run with HEDGEROW_BLESS=1",
        found.lines().count(),
        wanted.lines().count()
    );
}

#[test]
fn only_sources_of_tests_are_listed() {
    let text = "/// Says.\n/// Source: A. Uthor 1999; from memory; tolerance 1 %.\n#[test]\n\
        #[allow(unused)]\nfn holds_what_is_printed() {}\n\
        /// Source: not of a test; tolerance none.\nfn helper() {}\n\
        /// Source: of a constant.\nconst X: f64 = 1.0;\n#[test]\nfn has_no_source() {}\n\
        /// Source: B. Ook, no tolerance.\n#[test]\nfn says_nothing_of_distance() {}\n";
    let row = |what: &str, source: &str, tolerance: &str| Entry {
        what: what.to_owned(),
        source: source.to_owned(),
        tolerance: tolerance.to_owned(),
        file: "x.rs".to_owned(),
    };
    let expected = vec![
        row("holds what is printed", "A. Uthor 1999; from memory", "1 %"),
        row("says nothing of distance", "B. Ook, no tolerance", "none stated"),
    ];
    assert_eq!(entries(text, "x.rs"), expected);
}

#[test]
fn sources_of_the_outside_checks_here_keep_to_the_form() {
    let mut seen = 0;
    for path in rust_files(&root().join("tests/checks")) {
        let file = path.display().to_string();
        for entry in entries(&std::fs::read_to_string(&path).unwrap(), &file) {
            let length = entry.source.len() + entry.tolerance.len();
            assert!(length <= 300, "{}: {length} characters", entry.what);
            seen += 1;
        }
    }
    assert!(seen > 50, "{seen}");
}
