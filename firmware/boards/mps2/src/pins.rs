//! Alarm contact and heartbeat: the two LEDs of the machine's FPGA block.

use core::convert::Infallible;
use embedded_hal::digital::{ErrorType, OutputPin};

/// LED register: one bit each.
#[cfg(not(hedgerow_an505))]
const LEDS: *mut u32 = 0x4002_8000 as *mut u32;
#[cfg(hedgerow_an505)]
const LEDS: *mut u32 = 0x4030_2000 as *mut u32;

/// One LED.
pub struct Led(u32);

/// The alarm contact, lit while all is well.
pub const ALARM: Led = Led(0);
/// The heartbeat.
pub const HEARTBEAT: Led = Led(1);

impl Led {
    fn set(&mut self, on: bool) {
        // SAFETY: a register of every machine this board runs on; nothing else writes it.
        unsafe {
            let others = LEDS.read_volatile() & !(1 << self.0);
            LEDS.write_volatile(others | u32::from(on) << self.0);
        }
    }
}

impl ErrorType for Led {
    type Error = Infallible;
}

impl OutputPin for Led {
    fn set_low(&mut self) -> Result<(), Infallible> {
        self.set(false);
        Ok(())
    }

    fn set_high(&mut self) -> Result<(), Infallible> {
        self.set(true);
        Ok(())
    }
}
