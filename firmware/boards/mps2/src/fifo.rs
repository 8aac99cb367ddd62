//! Frames through `tx.fifo` and `rx.fifo` in the emulator's working directory.
//!
//! Contract: opened in the order tx, rx; the host opens in the same order.

use crate::semi::{self, File, Mode};
use core::convert::Infallible;

/// Both pipes.
pub struct Link {
    rx: File,
    tx: File,
}

impl Link {
    /// Open both pipes; without them there is nobody to talk to.
    pub fn open() -> Self {
        let Some(tx) = semi::open(b"tx.fifo\0", Mode::Write) else { semi::exit_with(3) };
        let Some(rx) = semi::open(b"rx.fifo\0", Mode::Read) else { semi::exit_with(3) };
        Self { rx, tx }
    }
}

impl embedded_io::ErrorType for Link {
    type Error = Infallible;
}

impl embedded_io::Read for Link {
    fn read(&mut self, into: &mut [u8]) -> Result<usize, Infallible> {
        Ok(self.rx.read(into))
    }
}

impl embedded_io::Write for Link {
    fn write(&mut self, bytes: &[u8]) -> Result<usize, Infallible> {
        self.tx.write(bytes);
        Ok(bytes.len())
    }

    fn flush(&mut self) -> Result<(), Infallible> {
        Ok(())
    }
}
