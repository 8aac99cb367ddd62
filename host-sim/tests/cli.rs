//! The program as its users run it: arguments in, text, files and exit codes out.
//!
//! Every test runs the built binary in a directory of its own, with stdout and
//! stderr piped, so what is seen here is what a script sees.

use std::fs;
use std::path::{Path, PathBuf};

use assert_cmd::Command;
use hedgerow::case::builtin_plays;
use serde_json::Value;

/// A directory of one test alone, removed at the end.
struct Dir(PathBuf);

impl Dir {
    fn new(name: &str) -> Self {
        let dir = std::env::temp_dir().join(format!("hedgerow-cli-{name}-{}", std::process::id()));
        fs::create_dir_all(&dir).expect("a directory");
        Self(dir)
    }

    fn path(&self, name: &str) -> PathBuf {
        self.0.join(name)
    }

    fn run(&self, line: &str) -> Ran {
        let output = Command::new(env!("CARGO_BIN_EXE_hedgerow"))
            .current_dir(&self.0)
            .args(line.split_whitespace())
            .output()
            .expect("the program starts");
        let text = |bytes: Vec<u8>| String::from_utf8(bytes).expect("UTF-8");
        Ran { code: output.status.code(), out: text(output.stdout), err: text(output.stderr) }
    }
}

impl Drop for Dir {
    fn drop(&mut self) {
        let _ = fs::remove_dir_all(&self.0);
    }
}

/// What a run left behind.
struct Ran {
    code: Option<i32>,
    out: String,
    err: String,
}

impl Ran {
    #[track_caller]
    fn ended(self, code: i32) -> Self {
        assert_eq!(self.code, Some(code), "stdout:\n{}\nstderr:\n{}", self.out, self.err);
        self
    }

    /// The one document that is all of stdout.
    #[track_caller]
    fn document(&self) -> Value {
        serde_json::from_str(&self.out).unwrap_or_else(|e| panic!("{e}:\n{}", self.out))
    }
}

#[track_caller]
fn has_keys(value: &Value, keys: &[&str]) {
    for key in keys {
        assert!(value.get(key).is_some(), "`{key}` is missing from {value:#}");
    }
}

#[test]
fn the_first_command_runs_the_built_in_play_and_writes_its_report() {
    let dir = Dir::new("first");
    let ran = dir.run("rehearse").ended(0);
    assert!(ran.out.contains("kept"), "{}", ran.out);
    for name in ["Ashmere", "Brackwater", "Cinderholm"] {
        assert!(ran.out.contains(name), "{}", ran.out);
    }
    let out = dir.path("hedgerow-out/quillon");
    for file in ["report.html", "result.json", "trace.csv"] {
        let size = fs::metadata(out.join(file)).map(|meta| meta.len()).unwrap_or(0);
        assert!(size > 1000, "{file} has {size} bytes");
        assert!(ran.out.contains(file), "{} is not named:\n{}", file, ran.out);
    }
    let page = fs::read_to_string(out.join("report.html")).expect("a page");
    assert!(!page.contains("src=\"http") && !page.contains("href=\"http"), "it works offline");
    // Our own directory may be written over; that is what a second look is for.
    dir.run("rehearse --quiet").ended(0);
}

#[test]
fn json_is_one_document_with_every_promised_key() {
    let dir = Dir::new("json");
    let document = dir.run("rehearse absorb --json").ended(0).document();
    has_keys(
        &document,
        &[
            "schema",
            "outcome",
            "broken_by",
            "duration_s",
            "lowest_frequency_hz",
            "highest_frequency_hz",
            "steepest_hz_per_s",
            "settled_s",
            "worst_loading",
            "over_rating_s",
            "areas",
            "events",
            "seed",
            "meta",
        ],
    );
    assert_eq!(
        (&document["schema"], &document["outcome"]),
        (&Value::from(1), &Value::from("kept"))
    );
    assert_eq!(document["broken_by"], Value::Array(Vec::new()));
    assert_eq!(document["duration_s"], 180.0);
    let areas = document["areas"].as_array().expect("areas");
    assert_eq!(areas.len(), 3);
    for area in areas {
        has_keys(
            area,
            &[
                "name",
                "rung",
                "worst_rung",
                "verdict",
                "proofs",
                "shed_mw",
                "ties_off_schedule_mw",
                "units_moved",
                "frames",
            ],
        );
        has_keys(&area["frames"], &["sent", "lost", "refused"]);
        assert_eq!(
            (&area["rung"], &area["worst_rung"]),
            (&Value::from("keep"), &Value::from("keep"))
        );
    }
    let events = document["events"].as_array().expect("events");
    assert!(events.iter().any(|event| event["text"].as_str().unwrap_or("").contains("A2-A3")));
    let written = fs::read_to_string(dir.path("hedgerow-out/absorb/result.json")).expect("a file");
    let written: Value = serde_json::from_str(&written).expect("JSON");
    assert_eq!(written["areas"], document["areas"], "file and stdout tell the same");
}

#[test]
fn the_seed_given_is_the_seed_reported() {
    let dir = Dir::new("seed");
    let document = dir.run("rehearse island --json --seed 99").ended(0).document();
    assert_eq!(document["seed"], 99);
}

#[test]
fn list_names_every_built_in_play() {
    let dir = Dir::new("list");
    let text = dir.run("rehearse --list").ended(0).out;
    let document = dir.run("rehearse --list --json").ended(0).document();
    let listed = document["plays"].as_array().expect("plays");
    assert_eq!(
        (text.lines().count(), listed.len()),
        (builtin_plays().len(), builtin_plays().len())
    );
    for (name, title) in builtin_plays() {
        assert!(text.lines().any(|line| line.starts_with(name) && line.ends_with(title)), "{name}");
    }
    assert!(!dir.path("hedgerow-out").exists(), "nothing is run");
}

#[test]
fn a_mistyped_play_is_wrong_input_and_the_nearest_is_named() {
    let dir = Dir::new("typo");
    let ran = dir.run("rehearse strech").ended(2);
    assert!(
        ran.err.contains("`strech`") && ran.err.contains("did you mean `stretch`"),
        "{}",
        ran.err
    );
    assert!(ran.out.is_empty(), "{}", ran.out);
}

#[test]
fn a_mistyped_option_is_wrong_input() {
    let dir = Dir::new("option");
    let ran = dir.run("rehearse --jsn").ended(2);
    assert!(ran.err.contains("--json"), "{}", ran.err);
}

/// A grid with two faults, far apart.
const BROKEN: &str = r#"format = 1

[grid]
name = "Broken"

[[area]]
name = "North"

[[bus]]
name = "N1"
area = "Nort"
load_mw = 10.0

[[unit]]
name = "G1"
bus = "N1"
kind = "hydro"
max_mw = 20.0
base_mw = 10.0
ramp_mw_per_min = 3.0
"#;

#[test]
fn a_broken_grid_shows_every_fault_at_its_line() {
    let dir = Dir::new("broken");
    fs::write(dir.path("broken.grid.toml"), BROKEN).expect("a file");
    let ran = dir.run("check broken.grid.toml").ended(2);
    for part in ["broken.grid.toml:11:", "`North`", "broken.grid.toml:20:", "ramp_mw_per_s"] {
        assert!(ran.err.contains(part), "no {part} in:\n{}", ran.err);
    }
    fs::write(
        dir.path("broken.play.toml"),
        "format = 1\ngrid = \"broken.grid.toml\"\n[run]\nduration_s = 10.0\n",
    )
    .expect("a file");
    let ran = dir.run("rehearse broken.play.toml").ended(2);
    assert!(ran.err.contains("broken.grid.toml:11:") && ran.err.contains(":20:"), "{}", ran.err);
    assert!(!dir.path("hedgerow-out").exists(), "nothing is run");
}

#[test]
fn a_new_play_passes_its_check_and_can_be_rehearsed() {
    let dir = Dir::new("new");
    let ran = dir.run("new mine").ended(0);
    assert!(ran.out.contains("hedgerow rehearse"), "{}", ran.out);
    dir.run("check mine/starter.play.toml").ended(0);
    dir.run("check mine/starter.grid.toml").ended(0);
    let document = dir.run("rehearse mine/starter.play.toml --out r --json").ended(0).document();
    assert_eq!(document["grid"], "Starter");
    assert!(dir.path("r/report.html").exists());
    let refused = dir.run("new mine").ended(2);
    assert!(refused.err.contains("--force"), "{}", refused.err);
}

#[test]
fn a_directory_given_is_written_over_only_by_force() {
    let dir = Dir::new("force");
    fs::create_dir_all(dir.path("r")).expect("a directory");
    fs::write(dir.path("r/report.html"), "mine").expect("a file");
    dir.run("rehearse island --out r --quiet").ended(2);
    assert_eq!(fs::read_to_string(dir.path("r/report.html")).expect("still there"), "mine");
    dir.run("rehearse island --out r --quiet --force").ended(0);
    assert_ne!(fs::read_to_string(dir.path("r/report.html")).expect("a page"), "mine");
}

#[test]
fn check_without_a_file_reads_every_built_in_play() {
    let dir = Dir::new("check");
    let text = dir.run("check").ended(0).out;
    let document = dir.run("check --json").ended(0).document();
    for (name, _) in builtin_plays() {
        assert!(text.contains(&format!("play        {name} (")), "{name} is missing:\n{text}");
        let plays = document["plays"].as_array().expect("plays");
        assert!(plays.iter().any(|play| play["name"] == *name), "{name}");
    }
}

/// A bus record of the Common Data Format: number, type, load, generation.
fn bus(number: u32, kind: u32, load: &str, generation: &str) -> String {
    format!(
        "{number:>4} {:<12} {:>2}{:>3} {kind:>2} 1.0000   0.00{load:>9}{:>10}{generation:>8}{:>8}\n",
        format!("Bus {number}"),
        1,
        1,
        "0.0",
        "0.0"
    )
}

/// A branch record: ends and reactance.
fn branch(from: u32, to: u32, reactance: &str) -> String {
    format!(
        "{from:>4} {to:>4}  1  1 1 0{:>10}{reactance:>11}{:>10}{:>5}{:>6}{:>6} {:>4} {:>1} {:>6} {:>7}\n",
        "0.01", "0.0", "", "", "", "", "", "0.0", "0.0"
    )
}

#[test]
fn import_writes_a_grid_that_passes_its_check() {
    let dir = Dir::new("import");
    let case = [
        format!(" 01/02/03 {:<20} {:>6}  1973 W THREE BUSES\n", "WRITTEN HERE", "100.0"),
        "BUS DATA FOLLOWS                            3 ITEMS\n".to_owned(),
        bus(1, 3, "0.0", "90.0") + &bus(2, 0, "50.0", "0.0") + &bus(3, 0, "40.0", "0.0"),
        "-999\nBRANCH DATA FOLLOWS                         3 ITEMS\n".to_owned(),
        branch(1, 2, "0.1") + &branch(2, 3, "0.2") + &branch(1, 3, "0.2"),
        "-999\nEND OF DATA\n".to_owned(),
    ];
    fs::write(dir.path("three.cdf"), case.concat()).expect("a file");
    let ran = dir.run("import three.cdf").ended(0);
    assert!(ran.out.contains("three.grid.toml") && ran.out.contains("rules"), "{}", ran.out);
    let document = dir.run("check three.grid.toml --json").ended(0).document();
    assert_eq!((&document["buses"], &document["lines"]), (&Value::from(3), &Value::from(3)));
    assert_eq!(document["load_mw"], 90.0);
    dir.run("import three.cdf").ended(2);
}

#[test]
fn nothing_is_coloured_when_piped() {
    let dir = Dir::new("colour");
    fs::write(dir.path("broken.grid.toml"), BROKEN).expect("a file");
    for line in ["rehearse island", "rehearse --help", "check broken.grid.toml", "rehearse nosuch"]
    {
        let ran = dir.run(line);
        assert!(!ran.out.contains('\u{1b}') && !ran.err.contains('\u{1b}'), "{line}");
    }
}

#[test]
fn droop_alone_ends_with_a_broken_limit_and_code_1() {
    let dir = Dir::new("droop");
    let document = dir.run("rehearse lean --scheme droop --json").ended(1).document();
    assert_eq!(document["outcome"], "broken");
    let broken = document["broken_by"].as_array().expect("sentences");
    let frequency = |s: &Value| s.as_str().is_some_and(|s| s.contains("Frequency"));
    assert!(broken.iter().any(frequency), "{broken:?}");
}

#[test]
fn compare_sets_the_other_schemes_beside_the_first() {
    let dir = Dir::new("compare");
    let document = dir.run("rehearse lean --compare --json").ended(0).document();
    let schemes: Vec<&str> = document["compare"]
        .as_array()
        .expect("runs")
        .iter()
        .filter_map(|run| run["scheme"].as_str())
        .collect();
    assert_eq!((&document["scheme"], schemes.len()), (&Value::from("steward"), 2));
    assert!(schemes.iter().any(|scheme| scheme.contains("droop")), "{schemes:?}");
}

#[test]
fn every_command_has_a_help_with_an_example() {
    let dir = Dir::new("help");
    for command in ["rehearse", "check", "import", "new"] {
        let ran = dir.run(&format!("{command} --help")).ended(0);
        assert!(ran.out.contains("Example") && ran.out.contains("hedgerow "), "{command}");
    }
    assert!(Path::new(env!("CARGO_BIN_EXE_hedgerow")).exists());
}
