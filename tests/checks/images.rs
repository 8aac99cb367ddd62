//! Images of the boards: that they link, that they fit, and that nothing in them can panic.
//!
//! Contract: everything here needs the board targets and is ignored without
//! them; `tests/run` runs all. The linker script of the M4F board gives 96 KiB of
//! flash and 48 KiB of RAM, so an image that links keeps to that.

use std::path::PathBuf;
use std::process::{Command, Output, Stdio};

/// Most that the M4F image may take, less than its linker script allows: growth is to be noticed.
const FLASH_BYTES: u64 = 90 * 1024;
/// Most static RAM; the deepest stack seen on the built-in grid is 4 656 bytes.
const STATIC_BYTES: u64 = 44 * 1024;
/// Most instructions per iteration of the law, 29 unknowns and 49 rows, 5 rows at work.
const LAW_INSTRUCTIONS: u64 = 11_200;

fn boards() -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("../firmware/boards")
}

fn build(arguments: &[&str]) -> Output {
    let mut command = Command::new(boards().join("build"));
    command.args(arguments).stdin(Stdio::null()).output().expect("the script runs")
}

fn built(arguments: &[&str]) -> PathBuf {
    let done = build(arguments);
    assert!(done.status.success(), "{}", String::from_utf8_lossy(&done.stderr));
    let out = String::from_utf8(done.stdout).expect("a path is text");
    PathBuf::from(out.lines().last().expect("the last line is the image"))
}

#[test]
#[ignore = "needs the board targets: run tests/run"]
fn nothing_in_steward_and_protocol_can_panic() {
    built(&["probe"]);
}

#[test]
#[ignore = "needs the board targets: run tests/run"]
fn a_deliberate_unwrap_does_not_link() {
    let done = build(&["probe", "--deliberate-panic"]);
    let said = String::from_utf8_lossy(&done.stderr);
    assert_eq!(done.status.code(), Some(1), "{said}");
    assert!(said.contains("undefined symbol: PANIC_PATH_LEFT_IN_FIRMWARE"), "{said}");
}

#[test]
#[ignore = "needs the board targets: run tests/run"]
fn boards_that_people_own_compile_on_their_hals() {
    built(&["rp2040"]);
    built(&["nucleo"]);
}

#[test]
#[ignore = "needs the board targets: run tests/run"]
fn m4f_image_fits_with_room_to_notice_growth() {
    let sizes = hedgerow::fit::elf::sizes(&built(&["m4"])).expect("an image has sections");
    assert!(sizes.flash_bytes() <= FLASH_BYTES, "{} bytes of flash", sizes.flash_bytes());
    assert!(sizes.static_ram_bytes() <= STATIC_BYTES, "{} bytes of RAM", sizes.static_ram_bytes());
}

#[test]
#[ignore = "needs the emulator: run tests/run"]
fn an_iteration_of_the_law_stays_cheap() {
    built(&["m4"]);
    let image = boards().join("target/thumbv7em-none-eabihf/release/law");
    let done = Command::new("qemu-system-arm")
        .args(["-M", "mps2-an386", "-display", "none", "-monitor", "none", "-serial", "none"])
        .args(["-icount", "shift=8,sleep=off"])
        .args(["-semihosting-config", "enable=on,target=native", "-kernel"])
        .arg(image)
        .stdin(Stdio::null())
        .output()
        .expect("the emulator runs");
    let said = String::from_utf8_lossy(&done.stdout) + String::from_utf8_lossy(&done.stderr);
    let figure = said.lines().find_map(|line| line.strip_prefix("law ")).expect("a figure");
    let instructions: u64 = figure.trim().parse().expect("a number");
    assert!(instructions <= LAW_INSTRUCTIONS, "{instructions} instructions per iteration");
}
