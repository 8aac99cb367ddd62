//! The interrupt table: one entry is used, by the UART link.

/// An entry of the table.
#[repr(C)]
pub union Vector {
    handler: unsafe extern "C" fn(),
    unused: u32,
}

unsafe extern "C" {
    fn DefaultHandler();
    #[cfg(not(feature = "fifo"))]
    fn UART0_RX();
}

/// External interrupts of the machine in use.
const COUNT: usize = 64;
/// UART0's receive interrupt.
#[cfg(not(feature = "fifo"))]
pub const UART0_RX_IRQ: usize = if cfg!(hedgerow_an505) { 32 } else { 0 };

#[unsafe(link_section = ".vector_table.interrupts")]
#[unsafe(no_mangle)]
static __INTERRUPTS: [Vector; COUNT] = table();

const fn table() -> [Vector; COUNT] {
    #[cfg_attr(feature = "fifo", expect(unused_mut))]
    let mut table = [const { Vector { handler: DefaultHandler } }; COUNT];
    #[cfg(not(feature = "fifo"))]
    {
        table[UART0_RX_IRQ] = Vector { handler: UART0_RX };
    }
    table
}
