//! The steward on a Raspberry Pi Pico: UART0 to the plant, LED heartbeat, alarm output.
//!
//! Contract: I/O and constants only. **Compile-checked; never run on hardware.**
//! Bytes that arrive while the steward computes are lost: the plant waits for each
//! status before it sends again.
//!
//! | pin | use |
//! |---|---|
//! | GP0, GP1 | UART0 TX and RX, 115 200 baud, 3.3 V |
//! | GP15 | alarm contact driver, high while all is well |
//! | GP25 | LED, changes with every tick |
#![no_std]
#![no_main]

mod port;

use embedded_hal::delay::DelayNs;
use embedded_io::Read;
use hedgerow_firmware::boot::{Identity, Phase};
use hedgerow_firmware::node::BoardNode;
use hedgerow_firmware::pins::{AlarmContact, Heartbeat, turn};
use hedgerow_protocol::auth::{Key, REHEARSAL_KEY};
use port::Port;
use rp_pico::hal::clocks::{Clock, init_clocks_and_plls};
use rp_pico::hal::fugit::RateExtU32;
use rp_pico::hal::uart::{DataBits, StopBits, UartConfig, UartPeripheral};
use rp_pico::hal::{Sio, Timer, Watchdog, pac};
use rp_pico::{Pins, XOSC_CRYSTAL_FREQ};
use static_cell::ConstStaticCell;

/// Address until a charter brings one.
const ADDRESS: u8 = 1;
/// Baud rate of the link.
const BAUD: u32 = 115_200;
/// How long a stopped or failed board waits between two looks at nothing, ms.
const IDLE_MS: u32 = 1000;

#[rp_pico::entry]
fn main() -> ! {
    static NODE: ConstStaticCell<BoardNode> = ConstStaticCell::new(BoardNode::blank());
    let (Some(mut pac), Some(node)) = (pac::Peripherals::take(), NODE.try_take()) else { halt() };
    let mut watchdog = Watchdog::new(pac.WATCHDOG);
    let Ok(clocks) = init_clocks_and_plls(
        XOSC_CRYSTAL_FREQ,
        pac.XOSC,
        pac.CLOCKS,
        pac.PLL_SYS,
        pac.PLL_USB,
        &mut pac.RESETS,
        &mut watchdog,
    ) else {
        halt()
    };
    let mut timer = Timer::new(pac.TIMER, &mut pac.RESETS, &clocks);
    let sio = Sio::new(pac.SIO);
    let pins = Pins::new(pac.IO_BANK0, pac.PADS_BANK0, sio.gpio_bank0, &mut pac.RESETS);
    let wires = (pins.gpio0.into_function(), pins.gpio1.into_function());
    let config = UartConfig::new(BAUD.Hz(), DataBits::Eight, None, StopBits::One);
    let uart = UartPeripheral::new(pac.UART0, wires, &mut pac.RESETS);
    let Ok(uart) = uart.enable(config, clocks.peripheral_clock.freq()) else { halt() };
    let mut link = Port(uart);
    let Ok(mut alarm) = AlarmContact::new(pins.gpio15.into_push_pull_output());
    let mut heartbeat = Heartbeat::new(pins.led.into_push_pull_output());

    // The crystal starts at a different moment each time; better than nothing, never 0.
    node.wake(Key::new(&REHEARSAL_KEY), timer.get_counter_low() | 1);
    node.introduce(Identity { address: ADDRESS, core: "cortex-m0+", last_fault: 0 });
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
    loop {
        timer.delay_ms(IDLE_MS);
    }
}

/// Nothing can be done: the alarm contact stays open.
fn halt() -> ! {
    loop {
        cortex_m::asm::wfe();
    }
}

#[panic_handler]
fn panic(_: &core::panic::PanicInfo<'_>) -> ! {
    halt()
}
