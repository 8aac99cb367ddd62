//! The steward on a NUCLEO-F446RE: USART2 (the ST-LINK's port), LED heartbeat, alarm output.
//!
//! Contract: I/O and constants only. **Compile-checked; never run on hardware.**
//! Bytes that arrive while the steward computes are lost: the plant waits for each
//! status before it sends again.
//!
//! | pin | use |
//! |---|---|
//! | PA2, PA3 | USART2 TX and RX, 115 200 baud: the virtual port of the ST-LINK |
//! | PA5 | LED LD2, changes with every tick |
//! | PA8 | alarm contact driver (D7), high while all is well |
#![no_std]
#![no_main]

mod port;

use cortex_m_rt::entry;
use embedded_io::Read;
use hedgerow_firmware::boot::{Identity, Phase};
use hedgerow_firmware::node::BoardNode;
use hedgerow_firmware::pins::{AlarmContact, Heartbeat, turn};
use hedgerow_protocol::auth::{Key, REHEARSAL_KEY};
use port::Port;
use static_cell::ConstStaticCell;
use stm32f4xx_hal::prelude::*;
use stm32f4xx_hal::serial::Config;
use stm32f4xx_hal::{pac, rcc};

/// Address until a charter brings one.
const ADDRESS: u8 = 1;
/// Baud rate of the link.
const BAUD: u32 = 115_200;

#[entry]
fn main() -> ! {
    static NODE: ConstStaticCell<BoardNode> = ConstStaticCell::new(BoardNode::blank());
    let parts = (pac::Peripherals::take(), cortex_m::Peripherals::take(), NODE.try_take());
    let (Some(device), Some(mut core), Some(node)) = parts else { halt() };
    let mut rcc = device.RCC.freeze(rcc::Config::hsi().sysclk(84.MHz()));
    let pins = device.GPIOA.split(&mut rcc);
    let config = Config::default().baudrate(BAUD.bps());
    let Ok(uart) = device.USART2.serial::<u8>((pins.pa2, pins.pa3), config, &mut rcc) else {
        halt()
    };
    let mut link = Port(uart);
    let Ok(mut alarm) = AlarmContact::new(pins.pa8.into_push_pull_output());
    let mut heartbeat = Heartbeat::new(pins.pa5.into_push_pull_output());

    // The cycle counter differs by the supply's rise; better than nothing, never 0.
    core.DCB.enable_trace();
    core.DWT.enable_cycle_counter();
    node.wake(Key::new(&REHEARSAL_KEY), cortex_m::peripheral::DWT::cycle_count() | 1);
    node.introduce(Identity { address: ADDRESS, core: "cortex-m4f", last_fault: 0 });
    #[cfg(feature = "baked")]
    let _refused_charters_leave_the_board_waiting =
        node.load(include_bytes!(env!("HEDGEROW_CHARTER")));

    let mut bite = [0; 64];
    while node.phase() != Phase::Stopped {
        match turn(node, &mut link) {
            Ok(Some(_)) => {
                let Ok(()) = alarm.show(node.steward().verdict());
                let Ok(()) = heartbeat.beat();
                continue;
            }
            Ok(None) | Err(_) => {}
        }
        // Line noise shows as an error: the frame it spoilt is refused by its checksum.
        let read = Read::read(&mut link, &mut bite).unwrap_or(0);
        node.receive(bite.get(..read).unwrap_or_default());
    }
    halt()
}

/// Nothing is left to do.
fn halt() -> ! {
    loop {
        cortex_m::asm::wfi();
    }
}

#[panic_handler]
fn panic(_: &core::panic::PanicInfo<'_>) -> ! {
    halt()
}
