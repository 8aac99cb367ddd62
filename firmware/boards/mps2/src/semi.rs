//! Semihosting: what the emulator does for a board on `bkpt 0xab`.
//!
//! Contract: each call blocks the whole machine until the host is done. Numbers
//! are those of Arm's "Semihosting for AArch32 and AArch64".

const OPEN: u32 = 0x01;
const WRITE: u32 = 0x05;
const READ: u32 = 0x06;
const COMMAND_LINE: u32 = 0x15;
const EXIT: u32 = 0x18;
const EXIT_EXTENDED: u32 = 0x20;
/// "The application ended": the reason both exits give.
const ENDED: u32 = 0x2_0026;

/// How a file is opened.
#[derive(Clone, Copy)]
pub enum Mode {
    /// `rb`
    Read = 1,
    /// `wb`
    Write = 5,
}

/// A file or pipe of the host.
#[derive(Clone, Copy)]
pub struct File(u32);

fn call(number: u32, argument: *const u32) -> u32 {
    let mut result = number;
    // SAFETY: the emulator reads and writes only what the argument block names,
    // and every caller's block names memory it has borrowed for the call.
    unsafe {
        core::arch::asm!("bkpt 0xab", inout("r0") result, in("r1") argument, options(nostack));
    }
    result
}

/// Open a file in the emulator's working directory; `name` ends with a zero byte.
pub fn open(name: &[u8], mode: Mode) -> Option<File> {
    let length = name.len() as u32 - 1;
    let block = [name.as_ptr() as u32, mode as u32, length];
    let handle = call(OPEN, block.as_ptr());
    (handle != u32::MAX).then_some(File(handle))
}

impl File {
    /// Read what is there, at least one byte; 0 = the other side has closed.
    pub fn read(self, into: &mut [u8]) -> usize {
        let block = [self.0, into.as_mut_ptr() as u32, into.len() as u32];
        let left = call(READ, block.as_ptr()) as usize;
        into.len().saturating_sub(left)
    }

    /// Write all; what the host does not take is lost.
    pub fn write(self, bytes: &[u8]) {
        let block = [self.0, bytes.as_ptr() as u32, bytes.len() as u32];
        call(WRITE, block.as_ptr());
    }
}

/// The words that the emulator was started with (`arg=` of its semihosting options), or nothing.
pub fn command_line(buffer: &mut [u8]) -> &str {
    let block = [buffer.as_mut_ptr() as u32, buffer.len() as u32];
    if call(COMMAND_LINE, block.as_ptr()) != 0 {
        return "";
    }
    let length = buffer.iter().position(|&byte| byte == 0).unwrap_or(0);
    buffer.get(..length).and_then(|used| core::str::from_utf8(used).ok()).unwrap_or("")
}

/// End the emulator with exit status 0.
pub fn exit() -> ! {
    // For this call the reason itself stands in place of a block.
    call(EXIT, ENDED as *const u32);
    stop()
}

/// End the emulator with this exit status.
pub fn exit_with(status: u32) -> ! {
    let block = [ENDED, status];
    call(EXIT_EXTENDED, block.as_ptr());
    stop()
}

fn stop() -> ! {
    loop {
        cortex_m::asm::wfi();
    }
}
