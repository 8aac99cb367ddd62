//! Whole plays on emulated boards, and benches that end badly.
//!
//! Contract: everything here needs the emulator and is ignored without it;
//! `tests/run` installs it and runs all. A board takes a core of its own, so the
//! tests take turns. Without HEDGEROW_LONG=1 plays are cut to a part.

use std::process::{Child, Command, Stdio};
use std::sync::{Mutex, MutexGuard, PoisonError};
use std::time::{Duration, Instant};

use clap::Parser;
use hedgerow::bench::image::Images;
use hedgerow::bench::logbook::{Direction, Logbook, read};
use hedgerow::bench::node::{Core, LinkKind, NodeKind};
use hedgerow::bench::{Benched, Setup, bench};
use hedgerow::case::model::{Event, Grid, Happening, Play};
use hedgerow::case::{builtin_play, builtin_plays};
use hedgerow::cli::{self, Cli, Ending, Failure};
use hedgerow::record::Scheme;
use hedgerow::rehearsal::rehearse;

/// One bench at a time, so that the speed that is asserted is that of one.
fn turn() -> MutexGuard<'static, ()> {
    static TURN: Mutex<()> = Mutex::new(());
    TURN.lock().unwrap_or_else(PoisonError::into_inner)
}

fn is_long() -> bool {
    std::env::var_os("HEDGEROW_LONG").is_some_and(|value| value == "1")
}

/// A built-in play, cut to this length unless the long set is asked for.
fn play(name: &str, short_s: f64) -> (Grid, Play) {
    let (grid, mut play) = builtin_play(name).unwrap();
    if !is_long() {
        play.run.duration_s = play.run.duration_s.min(short_s);
    }
    (grid, play)
}

fn setup(grid: &Grid, core: Core, link: LinkKind, measuring: bool) -> Setup {
    let mut images = Images::default();
    images.measuring = measuring;
    Setup {
        link,
        images,
        side_by_side: true,
        time_out: Duration::from_secs(30),
        ..Setup::of(vec![NodeKind::Emulated(core); grid.areas.len()])
    }
}

fn benched((grid, play): &(Grid, Play), setup: &Setup) -> Benched {
    let done = bench(grid, play, setup, None, &mut |_| true).unwrap();
    assert!(done.attended.lost.is_empty(), "{}: {:?}", play.name, done.attended.lost);
    done
}

/// Every frame of a play equal to the twin's, and as many as there must be.
fn assert_equal_bytes(case: &(Grid, Play), setup: &Setup) {
    let done = benched(case, setup);
    let name = &case.1.name;
    assert_eq!(done.difference, None, "{name}");
    // Orders and status at least, from every board in every tick that it was there.
    let ticks = done.attended.recording.series.times_s.len() as u64;
    assert!(done.frames_compared >= 2 * ticks * (done.boards.len() as u64 - 1), "{name}");
    println!(
        "{name}: {} frames equal in {ticks} ticks, {:.1} times real time",
        done.frames_compared,
        done.times_real()
    );
}

#[test]
#[ignore = "needs the emulator: run tests/run"]
fn all_plays_on_m4f_boards_say_the_same_bytes_as_in_process() {
    let _turn = turn();
    for (name, _) in builtin_plays() {
        let case = play(name, 100.0);
        assert_equal_bytes(&case, &setup(&case.0, Core::M4, LinkKind::Fifo, false));
    }
}

/// Plays on a core with a measuring image, whose effort frames must change no other.
fn assert_equal_bytes_on(core: Core, short_s: f64) {
    let _turn = turn();
    let plays: Vec<&str> = match is_long() {
        true => builtin_plays().iter().map(|(name, _)| *name).collect(),
        false => vec!["quillon"],
    };
    for name in plays {
        let case = play(name, short_s);
        assert_equal_bytes(&case, &setup(&case.0, core, LinkKind::Fifo, true));
    }
}

#[test]
#[ignore = "needs the emulator: run tests/run"]
fn soft_float_m3_boards_say_the_same_bytes_as_in_process() {
    assert_equal_bytes_on(Core::M3, 15.0);
}

#[test]
#[ignore = "needs the emulator: run tests/run"]
fn m7f_boards_say_the_same_bytes_as_in_process() {
    assert_equal_bytes_on(Core::M7, 60.0);
}

#[test]
#[ignore = "needs the emulator: run tests/run"]
fn m33f_boards_say_the_same_bytes_as_in_process() {
    assert_equal_bytes_on(Core::M33, 60.0);
}

#[test]
#[ignore = "needs the emulator: run tests/run"]
fn the_uart_link_carries_a_play_without_a_wrong_byte() {
    let _turn = turn();
    let (grid, mut short) = builtin_play("quillon").unwrap();
    short.run.duration_s = 6.0;
    let setup = setup(&grid, Core::M4, LinkKind::Uart, false);
    assert_equal_bytes(&(grid, short), &setup);
}

#[test]
#[ignore = "needs the emulator: run tests/run"]
fn a_bench_leaves_the_same_record_as_a_rehearsal() {
    let _turn = turn();
    let (grid, mut short) = builtin_play("silent-neighbour").unwrap();
    short.run.duration_s = 60.0;
    // The play lets a board die; here a new one takes over too.
    short.events.push(Event { at_s: 40.0, what: Happening::StewardReturns { area: 1 } });
    let died = Event { at_s: 20.0, what: Happening::StewardDies { area: 1 } };
    short.events.insert(0, died);
    short.events.sort_by(|a, b| a.at_s.total_cmp(&b.at_s));
    let case = (grid, short);
    let done = benched(&case, &setup(&case.0, Core::M4, LinkKind::Fifo, false));
    assert!(done.boards.iter().any(|board| board.area == 1 && board.boots == 2));
    let mut rehearsed = rehearse(&case.0, &case.1, Scheme::Steward, &mut |_| true).unwrap();
    rehearsed.frames = done.attended.recording.frames.clone();
    assert_eq!(done.attended.recording, rehearsed);
}

#[test]
#[ignore = "needs the emulator: run tests/run"]
fn three_m4f_boards_run_at_least_eight_times_faster_than_real_time() {
    let _turn = turn();
    let (grid, mut short) = builtin_play("quillon").unwrap();
    short.run.duration_s = 60.0;
    let setup = Setup { side_by_side: false, ..setup(&grid, Core::M4, LinkKind::Fifo, false) };
    let case = (grid, short);
    // The best of three: other programs may want the two processors too.
    let best = (0..3).map(|_| benched(&case, &setup).times_real()).fold(0.0, f64::max);
    println!("three Cortex-M4F boards: {best:.1} times real time at 100 ms ticks");
    assert!(best >= 8.0, "{best:.1} times real time");
}

#[test]
#[ignore = "needs the emulator: run tests/run"]
fn m4f_ticks_without_a_rebuild_cost_the_same_instructions() {
    let _turn = turn();
    let case = play("quillon", 60.0);
    let done = benched(&case, &setup(&case.0, Core::M4, LinkKind::Fifo, true));
    for board in &done.boards {
        let name = &case.0.areas[board.area].name;
        // The first tick comes with the start-up conversation in its bill.
        let efforts = || board.efforts.iter().filter(|effort| effort.tick > 0);
        let plain: Vec<u32> = efforts()
            .filter(|effort| effort.is_plain())
            .map(|effort| effort.instructions)
            .collect();
        let rebuilt =
            efforts().filter(|effort| !effort.is_plain()).map(|effort| effort.instructions);
        let (low, high) = (plain.iter().min().unwrap(), plain.iter().max().unwrap());
        let (worst, count) = rebuilt.fold((0, 0), |(most, n), insns| (insns.max(most), n + 1));
        println!(
            "{name}: {low} to {high} in {} ticks; {count} with a rebuild or a proof, at most {worst}",
            plain.len()
        );
        assert!(plain.len() > 500, "{name}");
        let odd = efforts().filter(|effort| {
            effort.is_plain() && f64::from(effort.instructions) > 1.05 * f64::from(*low)
        });
        let odd: Vec<_> = odd.map(|effort| (effort.tick, effort.instructions)).collect();
        println!(
            "  above the least by 5 %: {} ticks, say {:?}",
            odd.len(),
            odd.iter().take(8).collect::<Vec<_>>()
        );
        assert!(f64::from(*high) <= 1.05 * f64::from(*low), "{name}: {low} to {high}");
        assert!(worst <= 2 * high, "{name}: a rebuild takes {worst}, other ticks {high}");
        assert!(*high <= 1_000_000, "{name}: a whole tick takes {high}");
    }
}

/// Emulators started by a process: number and command line of each.
fn emulators_of(parent: u32) -> Vec<(u32, String)> {
    let listed = Command::new("ps").args(["-eo", "pid=,ppid=,args="]).output().unwrap();
    let text = String::from_utf8_lossy(&listed.stdout).into_owned();
    let row = |line: &str| {
        let mut words = line.split_whitespace();
        let (pid, ppid) = (words.next()?.parse().ok()?, words.next()?.parse::<u32>().ok()?);
        let args = words.collect::<Vec<_>>().join(" ");
        (ppid == parent && args.starts_with("qemu-system-arm")).then_some((pid, args))
    };
    text.lines().filter_map(row).collect()
}

/// Whether a process is there and no zombie.
fn is_alive(pid: u32) -> bool {
    let stat = std::fs::read_to_string(format!("/proc/{pid}/stat")).unwrap_or_default();
    let state = stat.rsplit_once(')').map(|(_, rest)| rest.trim_start().starts_with('Z'));
    state == Some(false)
}

fn signal(name: &str, pid: u32) {
    assert!(Command::new("kill").args([name, &pid.to_string()]).status().unwrap().success());
}

/// Directories of boards that a process has made.
fn places_of(pid: u32) -> usize {
    let start = format!("hedgerow-bench-{pid}-");
    let entries = std::fs::read_dir(std::env::temp_dir()).unwrap();
    entries.flatten().filter(|e| e.file_name().to_string_lossy().starts_with(&start)).count()
}

/// Wait until something holds; false if it does not within 20 s.
fn comes_true(mut holds: impl FnMut() -> bool) -> bool {
    let deadline = Instant::now() + Duration::from_secs(20);
    while Instant::now() < deadline {
        if holds() {
            return true;
        }
        std::thread::sleep(Duration::from_millis(20));
    }
    false
}

#[test]
#[ignore = "needs the emulator: run tests/run"]
fn a_board_killed_in_mid_run_is_named_at_once_and_the_others_go_on() {
    let _turn = turn();
    let (grid, mut short) = builtin_play("quillon").unwrap();
    short.run.duration_s = 20.0;
    let setup = setup(&grid, Core::M4, LinkKind::Fifo, false);
    let path = std::env::temp_dir().join(format!("hedgerow-killed-{}.hlog", std::process::id()));
    let (mut tick, mut killed) = (0_u32, None);
    let mut longest = Duration::ZERO;
    let done = bench(&grid, &short, &setup, Some(Logbook::create(&path).unwrap()), &mut |_| {
        tick += 1;
        if tick == 50 {
            let boards = emulators_of(std::process::id());
            let brackwater = boards.iter().find(|(_, args)| args.contains("arg=board,arg=2"));
            signal("-9", brackwater.unwrap().0);
            killed = Some(Instant::now());
        } else if let Some(at) = killed.take() {
            longest = at.elapsed();
        }
        true
    })
    .unwrap();
    let [lost] = &done.attended.lost[..] else { panic!("{:?}", done.attended.lost) };
    assert_eq!((grid.areas[lost.area].name.as_str(), lost.tick), ("Brackwater", 50));
    assert!(lost.why.contains("process ended"), "{}", lost.why);
    assert!(longest < setup.time_out, "missed after {longest:?}");
    let recording = &done.attended.recording;
    assert_eq!(recording.series.times_s.len(), 200);
    assert_eq!(recording.end.steward_alive, [true, false, true]);
    assert_eq!(done.difference, None);
    let book = read(&path).unwrap();
    std::fs::remove_file(&path).unwrap();
    assert_eq!(book.left_over, 0);
    let said = |area: u8| {
        let own = book.entries.iter().filter(|e| e.area == area);
        own.filter(|e| e.direction == Direction::FromSteward).map(|e| e.tick).max()
    };
    assert_eq!([said(0), said(1), said(2)], [Some(199), Some(49), Some(199)]);
    assert!(emulators_of(std::process::id()).is_empty());
    assert_eq!(places_of(std::process::id()), 0);
}

/// What [`a_bench_in_a_child`] finds in its environment: where to write.
const CHILD_OUT: &str = "HEDGEROW_TEST_BENCH_OUT";

/// Not a test of its own: the process that the tests below interrupt and kill.
#[test]
#[ignore = "started by other tests"]
fn a_bench_in_a_child() {
    if let Some(out) = std::env::var_os(CHILD_OUT) {
        std::process::exit(run_cli(&["bench", "quillon", "--out", &out.to_string_lossy()]));
    }
}

/// The program's command line in this process: its exit code.
fn run_cli(args: &[&str]) -> i32 {
    let line = std::iter::once("hedgerow").chain(args.iter().copied());
    match cli::run(&Cli::parse_from(line)) {
        Ok(Ending::Kept) => 0,
        Ok(Ending::Broken) => 1,
        Ok(Ending::Interrupted) => 130,
        Err(Failure::Input(_)) => 2,
        Err(Failure::Environment(_)) => 3,
    }
}

/// A child that benches, its emulators once all three run, and its output directory.
fn benching_child(name: &str) -> (Child, Vec<u32>, std::path::PathBuf) {
    let out = std::env::temp_dir().join(format!("hedgerow-{name}-{}", std::process::id()));
    let mut child = Command::new(std::env::current_exe().unwrap())
        .args(["--exact", "boards::a_bench_in_a_child", "--ignored"])
        .env(CHILD_OUT, &out)
        .stdout(Stdio::null())
        .stderr(Stdio::null())
        .spawn()
        .unwrap();
    let pid = child.id();
    let book = out.join("logbook.hlog");
    // The first build of the image may take its time.
    let deadline = Instant::now() + Duration::from_secs(300);
    while Instant::now() < deadline {
        let entries = read(&book).map_or(0, |book| book.entries.len());
        // One that has ended will never get there.
        if entries > 1_000 || child.try_wait().unwrap().is_some() {
            break;
        }
        std::thread::sleep(Duration::from_millis(50));
    }
    let boards = emulators_of(pid).into_iter().map(|(pid, _)| pid).collect();
    (child, boards, out)
}

#[test]
#[ignore = "needs the emulator: run tests/run"]
fn ctrl_c_ends_a_bench_in_order_and_leaves_nothing_behind() {
    let _turn = turn();
    let (mut child, boards, out) = benching_child("interrupted");
    assert_eq!(boards.len(), 3);
    signal("-INT", child.id());
    let status = child.wait().unwrap();
    assert_eq!(status.code(), Some(130));
    assert!(boards.iter().all(|&pid| !is_alive(pid)));
    assert_eq!(places_of(child.id()), 0);
    for file in ["result.json", "report.html", "logbook.hlog"] {
        assert!(out.join(file).is_file(), "{file} is missing");
    }
    std::fs::remove_dir_all(&out).unwrap();
}

#[test]
#[ignore = "needs the emulator: run tests/run"]
fn a_bench_that_is_killed_leaves_no_process_and_no_directory_behind() {
    let _turn = turn();
    let (mut child, boards, out) = benching_child("killed");
    assert_eq!(boards.len(), 3);
    signal("-9", child.id());
    child.wait().unwrap();
    assert!(comes_true(|| boards.iter().all(|&pid| !is_alive(pid))), "boards outlive their bench");
    assert!(comes_true(|| places_of(child.id()) == 0), "directories outlive their bench");
    let book = read(&out.join("logbook.hlog")).unwrap();
    assert!(book.entries.len() > 1_000);
    std::fs::remove_dir_all(&out).unwrap();
}
