//! The HAL's serial port, as the steward wants it: blocking reads, `embedded-io` 0.7.

use embedded_io::ErrorKind;
use stm32f4xx_hal::nb::{self, block};
use stm32f4xx_hal::serial::{Instance, Serial};

/// A serial port of the HAL.
pub struct Port<U: Instance>(pub Serial<U>);

impl<U: Instance> embedded_io::ErrorType for Port<U> {
    type Error = ErrorKind;
}

impl<U: Instance> embedded_io::Read for Port<U>
where
    Serial<U>: embedded_hal_nb::serial::Read<u8>,
{
    /// One byte, then what is there already.
    fn read(&mut self, into: &mut [u8]) -> Result<usize, ErrorKind> {
        let mut count = 0;
        for slot in into {
            let byte = match (count, embedded_hal_nb::serial::Read::read(&mut self.0)) {
                (0, Err(nb::Error::WouldBlock)) => {
                    block!(embedded_hal_nb::serial::Read::read(&mut self.0))
                }
                (_, Err(nb::Error::WouldBlock)) => break,
                (_, Err(nb::Error::Other(error))) => Err(error),
                (_, Ok(byte)) => Ok(byte),
            };
            *slot = byte.map_err(|_| ErrorKind::Other)?;
            count += 1;
        }
        Ok(count)
    }
}

impl<U: Instance> embedded_io::Write for Port<U>
where
    Serial<U>: embedded_io_06::Write,
{
    fn write(&mut self, bytes: &[u8]) -> Result<usize, ErrorKind> {
        embedded_io_06::Write::write(&mut self.0, bytes).map_err(|_| ErrorKind::Other)
    }

    fn flush(&mut self) -> Result<(), ErrorKind> {
        embedded_io_06::Write::flush(&mut self.0).map_err(|_| ErrorKind::Other)
    }
}
