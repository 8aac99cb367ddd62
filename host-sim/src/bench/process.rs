//! The process of an emulated board, and what it leaves behind: nothing.
//!
//! Contract: an [`Emulator`] that is dropped kills its process, waits for it and
//! removes its directory with pipes and sockets. Should this program itself be
//! killed, a keeper, a shell that waits for our end of its input to close, does
//! the same. The board is in a process group of its own, so that Ctrl-C
//! reaches this program alone, which then stops it in order.
//!
//! A board that waits for a byte blocks the emulator as a whole, SIGTERM
//! included; hence SIGKILL throughout.

use super::image::how_to_install;
use super::node::{Core, LinkKind};
use super::wire::{Wire, open_pipe};
use nix::sys::stat::Mode;
use nix::unistd::mkfifo;
use std::fs::File;
use std::io::ErrorKind;
use std::os::fd::OwnedFd;
use std::os::unix::fs::DirBuilderExt;
use std::os::unix::net::UnixListener;
use std::os::unix::process::CommandExt;
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Stdio};
use std::sync::atomic::{AtomicU32, Ordering};
use std::thread::sleep;
use std::time::{Duration, Instant};
use thiserror::Error;

/// The emulator's program.
const EMULATOR: &str = "qemu-system-arm";
/// Pause between two looks at whether a board has opened its pipes.
const PAUSE: Duration = Duration::from_millis(1);
/// What the keeper does once its input closes; PID and directory are its arguments.
const KEEPER: &str = r#"read -r _; kill -9 "$1" 2>/dev/null; rm -rf -- "$2""#;

/// Why a board could not be started.
#[derive(Debug, Error)]
pub enum StartError {
    /// The emulator is not installed.
    #[error("{EMULATOR} is not installed: {}", how_to_install(*.0))]
    NoEmulator(Core),
    /// The system refuses something.
    #[error("cannot {what}: {why}")]
    System {
        /// What was tried.
        what: &'static str,
        /// What the system said.
        why: std::io::Error,
    },
    /// The emulator ended before the board spoke.
    #[error("the emulator ended at once: {0}")]
    Ended(String),
    /// The board did not open its link.
    #[error("the board does not open its link within {0} s")]
    Silent(u64),
}

fn system(what: &'static str) -> impl FnOnce(std::io::Error) -> StartError {
    move |why| StartError::System { what, why }
}

/// A directory that goes when its owner goes.
#[derive(Debug)]
struct Place(PathBuf);

impl Place {
    fn new() -> Result<Self, StartError> {
        static NUMBER: AtomicU32 = AtomicU32::new(0);
        let number = NUMBER.fetch_add(1, Ordering::Relaxed);
        let name = format!("hedgerow-bench-{}-{number}", std::process::id());
        let path = std::env::temp_dir().join(name);
        std::fs::DirBuilder::new()
            .mode(0o700)
            .create(&path)
            .map_err(system("make a directory for a board"))?;
        Ok(Self(path))
    }
}

impl Drop for Place {
    fn drop(&mut self) {
        let _gone = std::fs::remove_dir_all(&self.0);
    }
}

/// A process that is killed and waited for when its owner goes.
#[derive(Debug)]
struct Guard(Child);

impl Drop for Guard {
    fn drop(&mut self) {
        let _ended = self.0.kill();
        let _waited = self.0.wait();
    }
}

/// An emulated board. Fields are dropped in order: board, then directory, then keeper.
#[derive(Debug)]
pub struct Emulator {
    board: Guard,
    place: Place,
    _keeper: Guard,
}

/// What to start.
#[derive(Clone, Copy, Debug)]
pub struct Start<'a> {
    /// Core of the board.
    pub core: Core,
    /// Image that it runs.
    pub image: &'a Path,
    /// How bytes get to it.
    pub link: LinkKind,
    /// Its address before it has a charter.
    pub address: u8,
    /// Number of its boot, not 0.
    pub boot: u32,
    /// How long it may take to open its link.
    pub patience: Duration,
}

impl Emulator {
    /// Start a board and open its link.
    ///
    /// Errors: [`StartError`]; nothing is left behind.
    pub fn start(start: &Start<'_>) -> Result<(Self, Wire), StartError> {
        let deadline = Instant::now() + start.patience;
        let image = start.image.canonicalize().map_err(system("find the image"))?;
        let place = Place::new()?;
        match start.link {
            LinkKind::Fifo => {
                for name in ["rx.fifo", "tx.fifo"] {
                    mkfifo(&place.0.join(name), Mode::S_IRUSR | Mode::S_IWUSR)
                        .map_err(|e| system("make a pipe for a board")(e.into()))?;
                }
                // The board opens tx first; this end must be open for it, and does not wait.
                let from_board = open_pipe(&place.0.join("tx.fifo"), false)
                    .map_err(system("open a board's pipe"))?;
                let mut emulator = Self::spawn(start, &image, place)?;
                let rx = emulator.place.0.join("rx.fifo");
                let to_board = emulator.until(start, deadline, || match open_pipe(&rx, true) {
                    Err(e) if e.raw_os_error() == Some(nix::errno::Errno::ENXIO as i32) => Ok(None),
                    opened => opened.map(Some),
                })?;
                Ok((emulator, Wire::new(from_board, to_board)))
            }
            LinkKind::Uart => {
                // The emulator is the client: a server drops what comes before it is connected to.
                let listener = UnixListener::bind(place.0.join("uart.sock"))
                    .map_err(system("make a socket for a board"))?;
                listener.set_nonblocking(true).map_err(system("listen for a board"))?;
                let mut emulator = Self::spawn(start, &image, place)?;
                let stream = emulator.until(start, deadline, || match listener.accept() {
                    Err(e) if e.kind() == ErrorKind::WouldBlock => Ok(None),
                    accepted => accepted.map(|(stream, _)| Some(stream)),
                })?;
                let ends = stream.set_nonblocking(true).and_then(|()| stream.try_clone());
                let other = ends.map_err(system("set up a board's socket"))?;
                let as_file = |stream| File::from(OwnedFd::from(stream));
                Ok((emulator, Wire::new(as_file(stream), as_file(other))))
            }
        }
    }

    /// How the process ended, if it has, with the last it said.
    pub fn ending(&mut self) -> Option<String> {
        let status = self.board.0.try_wait().ok().flatten()?;
        let said = std::fs::read_to_string(self.place.0.join("said")).unwrap_or_default();
        let telling =
            |line: &&str| !line.trim().is_empty() && !line.contains("icount sleep disabled");
        let last = said.lines().rev().find(telling);
        Some(match last {
            Some(line) => format!("{status}, it said: {line}"),
            None => status.to_string(),
        })
    }

    /// Wait until the process has ended by itself; false if it has not by then.
    pub fn wait(&mut self, deadline: Instant) -> bool {
        loop {
            if matches!(self.board.0.try_wait(), Ok(Some(_))) {
                return true;
            }
            if Instant::now() >= deadline {
                return false;
            }
            sleep(PAUSE);
        }
    }

    fn spawn(start: &Start<'_>, image: &Path, place: Place) -> Result<Self, StartError> {
        let said = File::create(place.0.join("said")).map_err(system("note what a board says"))?;
        let also = said.try_clone().map_err(system("note what a board says"))?;
        let mut command = Command::new(EMULATOR);
        command
            .current_dir(&place.0)
            .process_group(0)
            .args(["-M", start.core.machine(), "-kernel"])
            .arg(image)
            .args(["-display", "none", "-monitor", "none", "-parallel", "none"])
            // Virtual time is instructions counted, and nothing else.
            .args(["-icount", "shift=8,sleep=off", "-semihosting-config"])
            .arg(format!(
                "enable=on,target=native,arg=board,arg={},arg={}",
                start.address, start.boot
            ))
            .stdin(Stdio::null())
            .stdout(said)
            .stderr(also);
        match start.link {
            LinkKind::Fifo => command.args(["-serial", "none"]),
            LinkKind::Uart => command
                .args(["-chardev", "socket,id=u0,path=uart.sock,server=off"])
                .args(["-serial", "chardev:u0"]),
        };
        let board = command.spawn().map_err(|e| match e.kind() {
            ErrorKind::NotFound => StartError::NoEmulator(start.core),
            _ => system("start the emulator")(e),
        })?;
        let board = Guard(board);
        let keeper = Command::new("sh")
            .args(["-c", KEEPER, "keeper", &board.0.id().to_string()])
            .arg(&place.0)
            .process_group(0)
            .stdin(Stdio::piped())
            .stdout(Stdio::null())
            .stderr(Stdio::null())
            .spawn()
            .map_err(system("start a keeper for the emulator"))?;
        Ok(Self { board, place, _keeper: Guard(keeper) })
    }

    /// Try until something is there, the process ends or the deadline has passed.
    fn until<T>(
        &mut self,
        start: &Start<'_>,
        deadline: Instant,
        mut attempt: impl FnMut() -> std::io::Result<Option<T>>,
    ) -> Result<T, StartError> {
        loop {
            if let Some(there) = attempt().map_err(system("open a board's link"))? {
                return Ok(there);
            }
            if let Some(how) = self.ending() {
                return Err(StartError::Ended(how));
            }
            if Instant::now() >= deadline {
                return Err(StartError::Silent(start.patience.as_secs()));
            }
            sleep(PAUSE);
        }
    }
}
