//! Frames through UART0, driven by its receive interrupt.
//!
//! Contract: the interrupt fills a ring; when it is full the interrupt stays off
//! until somebody reads, so that nothing is lost. Reading waits for a byte asleep.

use core::cell::UnsafeCell;
use core::convert::Infallible;
use core::sync::atomic::{AtomicUsize, Ordering};

/// Registers of UART0; the M33 machine has it at another address.
const BASE: usize = if cfg!(hedgerow_an505) { 0x4020_0000 } else { 0x4000_4000 };
const DATA: usize = BASE;
const STATE: usize = BASE + 4;
const CONTROL: usize = BASE + 8;
const CLEAR: usize = BASE + 12;
const DIVIDER: usize = BASE + 16;

const TX_FULL: u32 = 1;
const RX_FULL: u32 = 2;
const ENABLED: u32 = 3;
const RX_INTERRUPT: u32 = 8;
const RX_CLEAR: u32 = 2;

/// Set-enable registers of the interrupt controller.
const INTERRUPT_ENABLE: usize = 0xE000_E100;

/// Bytes of the ring.
const ROOM: usize = 256;

/// Bytes between the interrupt, which writes, and the main loop, which reads.
struct Ring {
    bytes: UnsafeCell<[u8; ROOM]>,
    written: AtomicUsize,
    read: AtomicUsize,
}

// SAFETY: one writer (the interrupt) and one reader (the main loop); each place
// is handed over by the counters.
unsafe impl Sync for Ring {}

static RING: Ring = Ring {
    bytes: UnsafeCell::new([0; ROOM]),
    written: AtomicUsize::new(0),
    read: AtomicUsize::new(0),
};

fn get(register: usize) -> u32 {
    // SAFETY: only registers named above are passed.
    unsafe { (register as *const u32).read_volatile() }
}

fn set(register: usize, value: u32) {
    // SAFETY: only registers named above are passed.
    unsafe { (register as *mut u32).write_volatile(value) }
}

impl Ring {
    fn push(&self, byte: u8) -> bool {
        let (written, read) =
            (self.written.load(Ordering::Relaxed), self.read.load(Ordering::Acquire));
        if written.wrapping_sub(read) >= ROOM {
            return false;
        }
        // SAFETY: the place is free, and only the interrupt writes.
        unsafe { (*self.bytes.get())[written % ROOM] = byte };
        self.written.store(written.wrapping_add(1), Ordering::Release);
        true
    }

    fn pop(&self) -> Option<u8> {
        let (written, read) =
            (self.written.load(Ordering::Acquire), self.read.load(Ordering::Relaxed));
        if written == read {
            return None;
        }
        // SAFETY: the place is filled, and only the main loop reads.
        let byte = unsafe { (*self.bytes.get())[read % ROOM] };
        self.read.store(read.wrapping_add(1), Ordering::Release);
        Some(byte)
    }

    fn is_full(&self) -> bool {
        let (written, read) =
            (self.written.load(Ordering::Relaxed), self.read.load(Ordering::Acquire));
        written.wrapping_sub(read) >= ROOM
    }

    fn is_empty(&self) -> bool {
        self.written.load(Ordering::Acquire) == self.read.load(Ordering::Relaxed)
    }
}

/// The receive interrupt; named in the table of interrupts.
#[unsafe(no_mangle)]
extern "C" fn UART0_RX() {
    // Acknowledged before the byte is read, or the next one's interrupt may be lost.
    set(CLEAR, RX_CLEAR);
    while get(STATE) & RX_FULL != 0 {
        if RING.is_full() {
            set(CONTROL, ENABLED);
            return;
        }
        RING.push(get(DATA) as u8);
    }
}

/// UART0.
pub struct Link(());

impl Link {
    /// Switch the UART and its interrupt on.
    pub fn open() -> Self {
        // Any divider of 16 or more will do: the emulator has no baud rate.
        set(DIVIDER, 16);
        set(CONTROL, ENABLED | RX_INTERRUPT);
        let irq = crate::vectors::UART0_RX_IRQ;
        set(INTERRUPT_ENABLE + 4 * (irq / 32), 1 << (irq % 32));
        Self(())
    }
}

impl embedded_io::ErrorType for Link {
    type Error = Infallible;
}

impl embedded_io::Read for Link {
    fn read(&mut self, into: &mut [u8]) -> Result<usize, Infallible> {
        loop {
            let mut count = 0;
            for slot in into.iter_mut() {
                let Some(byte) = RING.pop() else { break };
                *slot = byte;
                count += 1;
            }
            set(CONTROL, ENABLED | RX_INTERRUPT);
            // A byte that waited while the ring was full raises no interrupt any more.
            cortex_m::interrupt::free(|_| UART0_RX());
            if count > 0 || into.is_empty() {
                return Ok(count);
            }
            // Masked, so that no byte slips in between the look and the sleep; it wakes all the same.
            cortex_m::interrupt::disable();
            if RING.is_empty() {
                cortex_m::asm::wfi();
            }
            // SAFETY: no critical section is open here.
            unsafe { cortex_m::interrupt::enable() };
        }
    }
}

impl embedded_io::Write for Link {
    fn write(&mut self, bytes: &[u8]) -> Result<usize, Infallible> {
        for &byte in bytes {
            while get(STATE) & TX_FULL != 0 {}
            set(DATA, u32::from(byte));
        }
        Ok(bytes.len())
    }

    fn flush(&mut self) -> Result<(), Infallible> {
        Ok(())
    }
}
