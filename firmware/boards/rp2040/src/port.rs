//! The HALs still speak version 0.6 of `embedded-io`; the steward speaks 0.7.

use embedded_io::ErrorKind;

/// A serial port of a HAL, as the steward wants it.
pub struct Port<S>(pub S);

impl<S> embedded_io::ErrorType for Port<S> {
    type Error = ErrorKind;
}

impl<S: embedded_io_06::Read> embedded_io::Read for Port<S> {
    fn read(&mut self, into: &mut [u8]) -> Result<usize, ErrorKind> {
        self.0.read(into).map_err(|_| ErrorKind::Other)
    }
}

impl<S: embedded_io_06::Write> embedded_io::Write for Port<S> {
    fn write(&mut self, bytes: &[u8]) -> Result<usize, ErrorKind> {
        self.0.write(bytes).map_err(|_| ErrorKind::Other)
    }

    fn flush(&mut self) -> Result<(), ErrorKind> {
        self.0.flush().map_err(|_| ErrorKind::Other)
    }
}
