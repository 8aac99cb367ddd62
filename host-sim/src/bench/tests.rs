//! The bench against boards that are threads of this process: no emulator needed.

use super::logbook::{Direction, Logbook, read};
use super::node::{Core, LinkKind, NodeKind};
use super::notes::{Notes, Shared};
use super::staff::Bencher;
use super::talk::{TalkError, opened};
use super::wire::Wire;
use super::{BenchError, Setup};
use crate::case::builtin_play;
use crate::case::model::{Grid, Play};
use crate::charter::Area;
use crate::record::Scheme;
use crate::rehearsal::{Attended, RehearsalError, Seat, Staff, attend, rehearse};
use hedgerow_firmware::boot::{Identity, Phase};
use hedgerow_firmware::node::Node;
use hedgerow_protocol::auth::{Key, REHEARSAL_KEY};
use hedgerow_protocol::frame::{Header, seal};
use hedgerow_protocol::message::{CharterState, Message, Refusal, Status};
use std::cell::RefCell;
use std::fs::File;
use std::io::Write as _;
use std::os::fd::OwnedFd;
use std::os::unix::net::UnixStream;
use std::rc::Rc;
use std::thread::JoinHandle;
use std::time::{Duration, Instant};

/// What a board in a test does wrong.
#[derive(Clone, Copy, Debug, PartialEq)]
enum Fault {
    None,
    /// It ends before it answers this tick.
    DiesAt(u32),
    /// It never answers this tick.
    HangsAt(u32),
    /// It flips the last bit of one number in this tick.
    LiesAt(u32),
    /// It says no hello at its boot, only when it is asked.
    Shy,
    /// It never says anything.
    Mute,
    /// It holds too few buses.
    Small,
    /// It takes the charter and reads back another.
    Forgetful,
    /// It will not run.
    Unwilling,
}

/// A board that is a thread; B buses at most.
struct FakeBoard<const B: usize> {
    wire: Wire,
    out: File,
    key: Key,
    node: Node<B, 104, 112>,
    fault: Fault,
}

/// A deadline that no test reaches.
fn late() -> Instant {
    Instant::now() + Duration::from_secs(30)
}

impl<const B: usize> FakeBoard<B> {
    fn run(mut self) {
        if matches!(self.fault, Fault::Shy | Fault::Mute) {
            self.node.answer(&mut |_, _| {});
        }
        loop {
            self.answer();
            if self.node.phase() == Phase::Stopped || !self.tick() {
                return;
            }
            match self.wire.next(late()) {
                Ok(wire) if self.fault != Fault::Mute => self.node.receive(&wire),
                Ok(_) => {}
                Err(_) => return,
            }
        }
    }

    fn answer(&mut self) {
        let Self { node, out, key, fault, .. } = self;
        let told_to_run = node.phase() == Phase::Running;
        node.answer(&mut |_, frame| {
            let mut raw = frame.to_vec();
            let Some((header, message)) = opened(&mut raw, key) else { return };
            let changed = match (message, *fault) {
                (Message::CharterState(state), Fault::Forgetful) => {
                    Message::CharterState(CharterState { hash: [7; 16], ..state })
                }
                (Message::CharterState(state), Fault::Unwilling) if told_to_run => {
                    let refused = Some(Refusal::OtherCharter);
                    Message::CharterState(CharterState { refused, ..state })
                }
                (other, _) => other,
            };
            out.write_all(&resealed(&header, &changed, key)).unwrap();
        });
    }

    /// Tick if there is something to tick for; false to end.
    fn tick(&mut self) -> bool {
        let Some(tick) = self.node.pending_tick() else { return true };
        match self.fault {
            Fault::DiesAt(at) if tick == at => return false,
            Fault::HangsAt(at) if tick == at => {
                while self.wire.next(late()).is_ok() {}
                return false;
            }
            _ => {}
        }
        let Self { node, out, key, fault, .. } = self;
        node.tick(tick, &mut |_, frame| {
            let mut raw = frame.to_vec();
            let frame = match opened(&mut raw, key) {
                Some((header, Message::Status(status))) if *fault == Fault::LiesAt(tick) => {
                    let load_mw = f32::from_bits(status.load_mw.to_bits() ^ 1);
                    resealed(&header, &Message::Status(Status { load_mw, ..status }), key)
                }
                _ => frame.to_vec(),
            };
            out.write_all(&frame).unwrap();
        });
        true
    }
}

fn resealed(header: &Header, message: &Message<'_>, key: &Key) -> Vec<u8> {
    let (mut raw, mut wire) = ([0; 512], [0; 512]);
    seal(header, message, key, &mut raw, &mut wire).unwrap().to_vec()
}

fn file(stream: UnixStream) -> File {
    File::from(OwnedFd::from(stream))
}

/// A board on a thread, and the host's end of the wire to it.
fn fake_board(address: u8, fault: Fault) -> (Wire, JoinHandle<()>) {
    let (host, board) = UnixStream::pair().unwrap();
    host.set_nonblocking(true).unwrap();
    let (host, other) = (host.try_clone().unwrap(), host);
    let (board, out) = (board.try_clone().unwrap(), board);
    let thread = std::thread::spawn(move || match fault {
        Fault::Small => serve::<8>(board, out, address, fault),
        _ => serve::<64>(board, out, address, fault),
    });
    (Wire::new(file(host), file(other)), thread)
}

fn serve<const B: usize>(board: UnixStream, out: UnixStream, address: u8, fault: Fault) {
    // Reads block in the call, so that the host's end closing ends the thread.
    let spare = file(out.try_clone().unwrap());
    let mut node = Node::new(Key::new(&REHEARSAL_KEY), 1);
    node.introduce(Identity { address, core: "thread", last_fault: 0 });
    let key = Key::new(&REHEARSAL_KEY);
    FakeBoard::<B> { wire: Wire::new(file(board), spare), out: file(out), key, node, fault }.run();
}

/// Seats a faulty board in one area and sound ones in the others.
struct Benchers {
    inner: Bencher,
    faulty: usize,
    fault: Fault,
}

impl Staff for Benchers {
    fn seat(
        &mut self,
        area: &Area,
        name: &str,
        _boot: u32,
    ) -> Result<Box<dyn Seat>, RehearsalError> {
        let fault = if area.index == self.faulty { self.fault } else { Fault::None };
        let (wire, _thread) = fake_board(area.address(), fault);
        let seat = self.inner.seated(area, name, Core::M4, wire, None);
        match seat {
            Ok(seat) => Ok(Box::new(seat)),
            Err(why) => Err(RehearsalError::Seat { area: name.to_owned(), why: Box::new(why) }),
        }
    }
}

/// Run a play with a faulty board in the first area.
fn run(
    (grid, play): (&Grid, &Play),
    fault: Fault,
    logbook: Option<Logbook>,
) -> Result<(Attended, Notes), RehearsalError> {
    let shared: Shared = Rc::new(RefCell::new(Notes::keeping(logbook)));
    let setup = Setup {
        link: LinkKind::Fifo,
        start_patience: Duration::from_secs(3),
        time_out: Duration::from_millis(400),
        side_by_side: true,
        ..Setup::of(vec![NodeKind::Emulated(Core::M4); grid.areas.len()])
    };
    let inner = Bencher::new(&setup, shared.clone());
    let staff = Box::new(Benchers { inner, faulty: 0, fault });
    let mut ticks = 0;
    let done = attend(grid, play, staff, &mut |_| {
        ticks += 1;
        shared.borrow_mut().tick_ends(ticks);
        true
    })?;
    Ok((done, super::seat::settle(shared)))
}

fn short_play(name: &str, duration_s: f64) -> (Grid, Play) {
    let (grid, mut play) = builtin_play(name).unwrap();
    play.run.duration_s = duration_s;
    (grid, play)
}

fn refused_with(fault: Fault) -> BenchError {
    let (grid, play) = short_play("quillon", 1.0);
    match run((&grid, &play), fault, None) {
        Err(RehearsalError::Seat { area, why }) => {
            assert_eq!(area, "Ashmere");
            *why.downcast::<BenchError>().unwrap()
        }
        Err(other) => panic!("{other}"),
        Ok(_) => panic!("it ran"),
    }
}

#[test]
fn boards_on_threads_give_the_same_record_as_a_rehearsal() {
    for name in ["quillon", "silent-neighbour"] {
        let (grid, play) = short_play(name, 60.0);
        let (done, notes) = run((&grid, &play), Fault::None, None).unwrap();
        let mut rehearsed = rehearse(&grid, &play, Scheme::Steward, &mut |_| true).unwrap();
        assert!(done.lost.is_empty(), "{:?}", done.lost);
        assert_eq!(notes.boards.len(), grid.areas.len());
        // What a thread counts as refused before its charter is its own affair.
        rehearsed.frames = done.recording.frames.clone();
        assert_eq!(done.recording, rehearsed, "{name}");
    }
}

#[test]
fn a_board_that_ends_in_mid_run_is_named_and_the_others_go_on() {
    let (grid, play) = short_play("quillon", 20.0);
    let (done, _) = run((&grid, &play), Fault::DiesAt(50), None).unwrap();
    let [lost] = &done.lost[..] else { panic!("{:?}", done.lost) };
    assert_eq!((lost.area, lost.tick), (0, 50));
    assert!(!done.recording.stopped);
    assert_eq!(done.recording.series.times_s.len(), 200);
    assert_eq!(done.recording.end.steward_alive, [false, true, true]);
    let told = done.recording.story.iter().find(|told| told.text.contains("is gone"));
    assert_eq!(told.map(|told| told.at_s), Some(5.0));
}

#[test]
fn a_board_that_hangs_is_missed_within_one_time_out() {
    let (grid, play) = short_play("quillon", 10.0);
    let begun = Instant::now();
    let (done, _) = run((&grid, &play), Fault::HangsAt(30), None).unwrap();
    assert_eq!(done.lost.first().map(|lost| lost.tick), Some(30));
    assert!(done.lost[0].why.contains("no status within 0.4 s"), "{:?}", done.lost);
    assert!(begun.elapsed() < Duration::from_secs(20));
}

#[test]
fn a_board_that_missed_its_own_boot_is_asked_for_its_hello() {
    let (grid, play) = short_play("quillon", 1.0);
    let (done, _) = run((&grid, &play), Fault::Shy, None).unwrap();
    assert!(done.lost.is_empty());
}

#[test]
fn a_board_that_says_nothing_is_given_up() {
    let said = refused_with(Fault::Mute);
    assert!(matches!(&said, BenchError::Talk(TalkError::NoHello(_))), "{said}");
    assert!(!said.is_input());
}

#[test]
fn too_small_a_board_is_refused_with_both_numbers() {
    let said = refused_with(Fault::Small);
    assert!(said.is_input());
    assert_eq!(said.to_string(), "the area has 12 buses, the board's build holds 8");
}

#[test]
fn a_board_that_reads_back_another_charter_is_not_run() {
    let said = refused_with(Fault::Forgetful);
    assert!(matches!(&said, BenchError::Talk(TalkError::OtherCharter)), "{said}");
}

#[test]
fn a_board_that_refuses_to_run_says_why() {
    let said = refused_with(Fault::Unwilling).to_string();
    assert!(said.contains("to run") && said.contains("OtherCharter"), "{said}");
}

#[test]
fn the_logbook_holds_every_frame_up_to_the_loss_of_a_board() {
    let path = std::env::temp_dir().join(format!("hedgerow-bench-log-{}", std::process::id()));
    let (grid, play) = short_play("quillon", 10.0);
    let logbook = Logbook::create(&path).unwrap();
    let (_, mut notes) = run((&grid, &play), Fault::DiesAt(40), Some(logbook)).unwrap();
    notes.logbook.as_mut().unwrap().finish().unwrap();
    let found = read(&path).unwrap();
    std::fs::remove_file(&path).unwrap();
    assert_eq!(found.left_over, 0);
    let said = |area: u8| {
        let from = |entry: &&super::logbook::Entry| {
            entry.area == area && entry.direction == Direction::FromSteward
        };
        found.entries.iter().filter(from).map(|entry| entry.tick).max()
    };
    assert_eq!((said(0), said(1)), (Some(39), Some(99)));
}

#[test]
fn boards_and_their_twins_say_the_same_bytes_over_rough_links() {
    let (grid, play) = short_play("rough-link", 40.0);
    let (done, notes) = run((&grid, &play), Fault::None, None).unwrap();
    assert!(done.lost.is_empty(), "{:?}", done.lost);
    assert_eq!(notes.difference, None);
    // Orders, status and terms, of three areas in 400 ticks.
    assert!(notes.frames_compared > 3 * 3 * 400, "{}", notes.frames_compared);
}

#[test]
fn the_first_difference_is_named_by_tick_and_field() {
    let (grid, play) = short_play("quillon", 5.0);
    let (_, notes) = run((&grid, &play), Fault::LiesAt(23), None).unwrap();
    let found = notes.difference.unwrap();
    assert_eq!((found.area.as_str(), found.tick), ("Ashmere", 23));
    assert_eq!((found.message.as_str(), found.field.as_str()), ("Status", "load_mw"));
}
