//! Bytes to and from a board, with a deadline on everything.
//!
//! Contract: a [`Wire`] cuts the stream into frames at delimiters and checks
//! nothing else. No call waits beyond its deadline; a far end that is gone is
//! told apart from one that is silent.

use nix::errno::Errno;
use nix::poll::{PollFd, PollFlags, PollTimeout, poll};
use std::fs::{File, OpenOptions};
use std::io::{ErrorKind, Read, Write};
use std::os::fd::AsFd;
use std::os::unix::fs::OpenOptionsExt;
use std::path::Path;
use std::time::Instant;
use thiserror::Error;

use hedgerow_protocol::cobs::DELIMITER;

/// Bytes read at once: more than a board says in a tick.
const BITE: usize = 16 * 1024;

/// Why a wire gave nothing or took nothing.
#[derive(Debug, Error)]
pub enum WireError {
    /// The deadline has passed.
    #[error("it does not answer in time")]
    Silent,
    /// The far end is gone.
    #[error("its link is closed")]
    Closed,
    /// The system refuses.
    #[error("its link fails: {0}")]
    System(#[from] std::io::Error),
}

/// A two-way byte stream to a board.
#[derive(Debug)]
pub struct Wire {
    from_board: File,
    to_board: File,
    held: Vec<u8>,
    used: usize,
    scanned: usize,
}

impl Wire {
    /// Take two ends that do not block.
    pub fn new(from_board: File, to_board: File) -> Self {
        Self { from_board, to_board, held: Vec::new(), used: 0, scanned: 0 }
    }

    /// Send all of it.
    ///
    /// Errors: [`WireError`]; part of it may have been sent.
    pub fn send(&mut self, mut bytes: &[u8], deadline: Instant) -> Result<(), WireError> {
        while !bytes.is_empty() {
            match self.to_board.write(bytes) {
                Ok(0) => return Err(WireError::Closed),
                Ok(sent) => bytes = bytes.get(sent..).unwrap_or_default(),
                Err(e) if e.kind() == ErrorKind::BrokenPipe => return Err(WireError::Closed),
                Err(e) if e.kind() == ErrorKind::Interrupted => {}
                Err(e) if e.kind() == ErrorKind::WouldBlock => {
                    wait(&self.to_board, PollFlags::POLLOUT, deadline)?;
                }
                Err(e) => return Err(e.into()),
            }
        }
        Ok(())
    }

    /// The next frame, delimiter included; idle delimiters are skipped.
    ///
    /// Errors: [`WireError`]; what has arrived of a frame is kept for the next call.
    pub fn next(&mut self, deadline: Instant) -> Result<Vec<u8>, WireError> {
        loop {
            if let Some(frame) = self.cut() {
                return Ok(frame);
            }
            self.fill(deadline)?;
        }
    }

    /// A whole frame out of what is held.
    fn cut(&mut self) -> Option<Vec<u8>> {
        loop {
            let fresh = self.held.get(self.scanned..)?;
            let Some(end) = fresh.iter().position(|&byte| byte == DELIMITER) else {
                self.scanned = self.held.len();
                return None;
            };
            let end = self.scanned + end + 1;
            let frame = self.held.get(self.used..end)?.to_vec();
            (self.used, self.scanned) = (end, end);
            if frame.len() > 1 {
                return Some(frame);
            }
        }
    }

    fn fill(&mut self, deadline: Instant) -> Result<(), WireError> {
        if self.used > 0 {
            self.held.drain(..self.used);
            self.scanned -= self.used;
            self.used = 0;
        }
        let mut bite = [0; BITE];
        loop {
            match self.from_board.read(&mut bite) {
                Ok(0) => return Err(WireError::Closed),
                Ok(read) => {
                    self.held.extend_from_slice(bite.get(..read).unwrap_or_default());
                    return Ok(());
                }
                Err(e) if e.kind() == ErrorKind::ConnectionReset => return Err(WireError::Closed),
                Err(e) if e.kind() == ErrorKind::Interrupted => {}
                Err(e) if e.kind() == ErrorKind::WouldBlock => {
                    wait(&self.from_board, PollFlags::POLLIN, deadline)?;
                }
                Err(e) => return Err(e.into()),
            }
        }
    }
}

/// Wait until a file is ready, or its far end has closed.
fn wait(file: &File, what: PollFlags, deadline: Instant) -> Result<(), WireError> {
    loop {
        let left = deadline.saturating_duration_since(Instant::now());
        // Rounded up, so that a deadline below a millisecond away is not a busy loop.
        let millis = left.as_millis().saturating_add(1).min(60_000) as u16;
        let mut fds = [PollFd::new(file.as_fd(), what)];
        match poll(&mut fds, PollTimeout::from(millis)) {
            Ok(0) if Instant::now() >= deadline => return Err(WireError::Silent),
            Ok(0) | Err(Errno::EINTR) => {}
            Ok(_) => return Ok(()),
            Err(e) => return Err(WireError::System(e.into())),
        }
    }
}

/// Open an end of a named pipe without blocking; to write, somebody must be reading.
///
/// Errors: what the system says, `ENXIO` for a pipe that nobody reads yet.
pub fn open_pipe(path: &Path, to_write: bool) -> std::io::Result<File> {
    OpenOptions::new()
        .read(!to_write)
        .write(to_write)
        .custom_flags(nix::fcntl::OFlag::O_NONBLOCK.bits())
        .open(path)
}
