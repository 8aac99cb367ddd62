//! What a tick costs: instructions by the machine's counter, stack by its paint.
//!
//! Contract: right only under `-icount shift=8`, where an instruction takes
//! 256 ns of the emulator's clock. Instructions are not cycles.

/// Nanoseconds of the emulator's clock per instruction.
const NS_PER_INSTRUCTION: u64 = 256;

/// Free-running 32-bit up-counter of the machine's FPGA block, and its rate.
#[cfg(not(hedgerow_an505))]
const COUNTER: (*const u32, u64) = (0x4002_8018 as *const u32, 25_000_000);
#[cfg(hedgerow_an505)]
const COUNTER: (*const u32, u64) = (0x4030_2018 as *const u32, 20_000_000);

/// What the start-up code fills the free memory with.
const PAINT: u32 = 0xCCCC_CCCC;

unsafe extern "C" {
    static _stack_start: u32;
    static _stack_end: u32;
}

/// Counter now.
#[inline(always)]
pub fn now() -> u32 {
    core::sync::atomic::compiler_fence(core::sync::atomic::Ordering::SeqCst);
    // SAFETY: a readable register of every machine this board runs on.
    let now = unsafe { COUNTER.0.read_volatile() };
    core::sync::atomic::compiler_fence(core::sync::atomic::Ordering::SeqCst);
    now
}

/// Instructions between two readings.
pub fn instructions(begin: u32, end: u32) -> u32 {
    let ns = u64::from(end.wrapping_sub(begin)) * (1_000_000_000 / COUNTER.1);
    ((ns + NS_PER_INSTRUCTION / 2) / NS_PER_INSTRUCTION) as u32
}

/// Bytes between the stack's start and the lowest word that was ever written.
pub fn stack_bytes() -> u32 {
    let (start, end) = (&raw const _stack_start, &raw const _stack_end);
    let mut word = end;
    // SAFETY: all words between the two symbols are RAM that belongs to the stack.
    while word < start && unsafe { word.read_volatile() } == PAINT {
        word = unsafe { word.add(1) };
    }
    start as u32 - word as u32
}
