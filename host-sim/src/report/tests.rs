//! The formats against a small run with known figures.

use super::figures::Meta;
use super::*;
use crate::judge::judge;

fn with_bundle<T>(change: impl Fn(&mut Recording), check: impl Fn(&Bundle) -> T) -> T {
    let (grid, play, mut run) = sample::two_areas();
    change(&mut run);
    let judgement = judge(&grid, &play, &run);
    let (_, _, mut droop) = sample::two_areas();
    droop.scheme = Scheme::Droop;
    let droop_judgement = judge(&grid, &play, &droop);
    let others = [(droop, droop_judgement)];
    let meta = Meta { version: "0.1.0".into(), run_wall_s: 1.0, judge_wall_s: 0.1 };
    let bundle = Bundle {
        grid: &grid,
        play: &play,
        recording: &run,
        judgement: &judgement,
        others: &others,
        meta: &meta,
    };
    check(&bundle)
}

fn scratch(name: &str) -> PathBuf {
    let dir = std::env::temp_dir().join(format!("hedgerow-report-{name}-{}", std::process::id()));
    let _ = std::fs::remove_dir_all(&dir);
    dir
}

#[test]
fn json_has_the_promised_fields() {
    with_bundle(
        |_| (),
        |bundle| {
            let v: serde_json::Value =
                serde_json::from_str(&json::document(bundle).unwrap()).unwrap();
            assert_eq!(v["schema"], 1);
            assert_eq!(v["outcome"], "kept");
            assert_eq!(v["broken_by"], serde_json::json!([]));
            assert_eq!(v["lowest_frequency_hz"], 49.812);
            assert_eq!(v["lowest_frequency_at"]["name"], "A2");
            assert_eq!(v["worst_loading"], 1.084);
            assert_eq!(v["settled_s"], 14.2);
            assert_eq!(v["seed"], 7);
            assert_eq!(v["areas"][0]["rung"], "keep");
            assert_eq!(v["areas"][0]["verdict"], "settled");
            assert_eq!(v["areas"][1]["frames"]["sent"], 600);
            assert_eq!(v["events"][0]["text"], "line A1-A2 opens");
            assert_eq!(v["judge"]["least_rung"], serde_json::json!(["keep", "keep"]));
            assert_eq!(v["compare"][0]["scheme"], "droop");
            assert_eq!(v["meta"]["version"], "0.1.0");
        },
    );
}

#[test]
fn broken_runs_say_why_in_every_format() {
    let change = |run: &mut Recording| run.end.island_freq_dev_hz[0] = 0.02;
    with_bundle(change, |bundle| {
        let why = "Frequency is 20.00 mHz off nominal";
        assert!(json::document(bundle).unwrap().contains(why));
        assert!(summary::text(bundle, summary::Colour::Off).contains(why));
        assert!(html::page(bundle).contains(why));
    });
}

#[test]
fn the_summary_fits_80_columns_and_has_no_escape_codes_unless_asked() {
    let change = |run: &mut Recording| {
        for i in 0..60 {
            run.story
                .push(crate::record::Told { at_s: f64::from(i), text: "a long tale ".repeat(12) });
        }
        run.proofs.push(sample::proof(1, 2.0, true));
    };
    with_bundle(change, |bundle| {
        let plain = summary::text(bundle, summary::Colour::Off);
        for line in plain.lines() {
            assert!(line.chars().count() <= 80, "{line}");
        }
        assert!(!plain.contains('\x1b'));
        assert!(plain.contains("and 37 more"));
        assert!(summary::text(bundle, summary::Colour::On).contains("\x1b[1;32mkept"));
    });
}

#[test]
fn no_report_calls_a_run_good_or_safe() {
    with_bundle(
        |_| (),
        |bundle| {
            let all = summary::text(bundle, summary::Colour::Off) + &html::page(bundle);
            let words: Vec<String> = all
                .to_lowercase()
                .split(|c: char| !c.is_alphanumeric())
                .map(str::to_owned)
                .collect();
            assert!(!words.iter().any(|w| w == "good" || w == "safe"));
            assert!(words.iter().any(|w| w == "certified"));
        },
    );
}

#[test]
fn the_page_escapes_names_and_needs_no_network() {
    with_bundle(
        |_| (),
        |bundle| {
            let page = html::page(bundle);
            assert!(!page.contains("Two <areas>"));
            assert!(page.contains("Two &lt;areas&gt;"));
            assert!(!page.contains("<script"));
            assert!(!page.replace("http://www.w3.org/2000/svg", "").contains("http"));
        },
    );
}

#[test]
fn csv_has_a_row_per_sample_and_a_unit_per_column() {
    with_bundle(
        |_| (),
        |bundle| {
            let text = csv::trace(bundle.grid, bundle.recording).unwrap();
            let mut reader = ::csv::Reader::from_reader(text.as_bytes());
            let head: Vec<String> = reader.headers().unwrap().iter().map(str::to_owned).collect();
            for name in &head {
                let known = ["_s", "_hz", "_mw", "_percent", " rung", " verdict"];
                assert!(known.iter().any(|k| name.ends_with(k)), "{name}");
            }
            let column = head.iter().position(|h| h == "line A1-A2 loading_percent").unwrap();
            let rows: Vec<_> = reader.records().map(Result::unwrap).collect();
            assert_eq!(rows.len(), 301);
            assert_eq!(&rows[0][column], "50");
        },
    );
}

#[test]
fn a_picture_does_not_grow_with_the_run() {
    let (grid, _, mut run) = sample::two_areas();
    let short = picture::svg(&grid, &[], &run).len();
    let s = &mut run.series;
    let n = 60_000;
    s.times_s = (0..n).map(|i| f64::from(i) * 0.1).collect();
    for table in [&mut s.area_freq_dev_hz, &mut s.line_flow_mw, &mut s.unit_setpoint_mw] {
        for values in table.iter_mut() {
            *values = (0..n).map(|i| f64::from(i % 97)).collect();
        }
    }
    let long = picture::svg(&grid, &[], &run).len();
    assert!(long < 20 * short.max(20_000), "{short} {long}");
}

#[test]
fn reduction_keeps_the_extremes_of_each_pixel_column() {
    let points = (0..1000).map(|i| (f64::from(i) / 100.0, if i == 555 { 9.0 } else { 0.0 }));
    let kept = svg::reduced(points);
    assert!(kept.len() <= 40, "{}", kept.len());
    assert!(kept.iter().any(|p| p.1 == 9.0));
    assert!(kept.windows(2).all(|w| w[0].0 <= w[1].0));
}

#[test]
fn ticks_are_round_and_inside_the_range() {
    assert_eq!(svg::ticks(0.0, 30.0, 6), [0.0, 5.0, 10.0, 15.0, 20.0, 25.0, 30.0]);
    assert!(svg::ticks(49.8, 50.02, 4).iter().all(|t| (49.8..=50.02).contains(t)));
    assert_eq!(svg::ticks(1.0, 1.0, 4), [1.0]);
}

#[test]
fn an_empty_run_still_draws() {
    let (grid, _, mut run) = sample::two_areas();
    run.series = crate::record::Series::default();
    assert!(picture::svg(&grid, &[], &run).ends_with("</svg>\n"));
    assert!(csv::trace(&grid, &run).unwrap().starts_with("time_s"));
}

#[test]
fn a_map_without_positions_still_places_every_bus() {
    let (mut grid, _, run) = sample::ring();
    grid.buses.iter_mut().for_each(|b| b.position = None);
    let drawn = map::svg(&grid, &run.end);
    assert!(!drawn.contains("NaN") && !drawn.contains("inf"));
    grid.buses.iter().for_each(|b| assert!(drawn.contains(&format!(">{}</text>", b.name))));
}

#[test]
fn refuses_a_directory_with_files_unless_told() {
    let dir = scratch("occupied");
    std::fs::create_dir_all(&dir).unwrap();
    std::fs::write(dir.join("thesis.tex"), "mine").unwrap();
    with_bundle(
        |_| (),
        |bundle| {
            for existing in [Existing::Refuse, Existing::ReplaceOwn] {
                let error = write_all(&dir, bundle, existing).unwrap_err();
                assert!(error.to_string().contains("--force"), "{error}");
            }
            assert!(!dir.join(RESULT_FILE).exists());
            write_all(&dir, bundle, Existing::Replace).unwrap();
            write_all(&dir, bundle, Existing::ReplaceOwn).unwrap();
            assert!(write_all(&dir, bundle, Existing::Refuse).is_err());
        },
    );
    assert_eq!(std::fs::read_to_string(dir.join("thesis.tex")).unwrap(), "mine");
    std::fs::remove_dir_all(&dir).unwrap();
}

#[test]
fn the_same_run_gives_the_same_bytes() {
    let of = || with_bundle(|_| (), |b| html::page(b) + &json::document(b).unwrap());
    assert_eq!(of(), of());
}
