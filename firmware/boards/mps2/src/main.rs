//! The steward on the MPS2 machines of the emulator.
//!
//! Contract: I/O and constants only; everything that decides is in
//! `hedgerow-firmware`. The link is chosen by a feature, the address and the
//! boot id by the emulator's command line: `board ADDRESS [BOOT_ID]`.
#![no_std]
#![no_main]

#[cfg(feature = "fifo")]
#[path = "fifo.rs"]
mod link;
#[cfg(all(feature = "uart", not(feature = "fifo")))]
#[path = "uart.rs"]
mod link;
mod meter;
mod pins;
#[allow(dead_code)] // the other link and the other bin use the rest
mod semi;
mod vectors;

use cortex_m_rt::entry;
use embedded_io::Read;
use hedgerow_firmware::boot::{Identity, Phase};
use hedgerow_firmware::node::BoardNode;
use hedgerow_firmware::pins::{AlarmContact, Heartbeat, turn};
use hedgerow_protocol::auth::{Key, REHEARSAL_KEY};
use hedgerow_protocol::message::Effort;
use link::Link;
use static_cell::ConstStaticCell;

/// Bytes read at once.
const BITE: usize = 64;

#[entry]
fn main() -> ! {
    static NODE: ConstStaticCell<BoardNode> = ConstStaticCell::new(BoardNode::blank());
    let mut words = [0; 64];
    let (address, boot_id) = who(semi::command_line(&mut words));
    let node = NODE.take();
    node.wake(Key::new(&REHEARSAL_KEY), boot_id);
    node.introduce(Identity { address, core: env!("HEDGEROW_CORE"), last_fault: 0 });
    #[cfg(feature = "baked")]
    if node.load(include_bytes!(env!("HEDGEROW_CHARTER"))).is_err() {
        semi::exit_with(2);
    }
    let mut alarm = AlarmContact::new(pins::ALARM).unwrap_or_else(|never| match never {});
    let mut heartbeat = Heartbeat::new(pins::HEARTBEAT);
    let mut link = Link::open();
    let mut bite = [0; BITE];
    let mut cost = 0;
    loop {
        let begin = meter::now();
        let ticked = turn(node, &mut link).unwrap_or_else(|never| match never {});
        cost += meter::instructions(begin, meter::now());
        if let Some(tick) = ticked {
            let Ok(()) = alarm.show(node.steward().verdict());
            let Ok(()) = heartbeat.beat();
            if cfg!(feature = "measure") {
                report(node, &mut link, tick, cost);
            }
            cost = 0;
        }
        if node.phase() == Phase::Stopped {
            semi::exit();
        }
        if node.pending_tick().is_some() {
            continue;
        }
        let Ok(read) = link.read(&mut bite);
        if read == 0 {
            // The other side has closed its end: nobody is left to talk to.
            semi::exit();
        }
        let begin = meter::now();
        node.receive(bite.get(..read).unwrap_or_default());
        cost += meter::instructions(begin, meter::now());
    }
}

/// Address and boot id of a command line; 1 each if they are not there.
fn who(line: &str) -> (u8, u32) {
    let mut words = line.split_ascii_whitespace().skip_while(|word| *word != "board").skip(1);
    let address = words.next().and_then(|word| word.parse().ok()).unwrap_or(1);
    let boot_id = words.next().and_then(|word| word.parse().ok()).unwrap_or(1);
    (address, boot_id)
}

fn report(node: &mut BoardNode, link: &mut Link, tick: u32, instructions: u32) {
    let effort = Effort {
        tick,
        instructions,
        stack_bytes: meter::stack_bytes(),
        rebuilt: node.steward().has_rebuilt(),
    };
    node.report(effort, &mut |_, frame| {
        let Ok(()) = embedded_io::Write::write_all(link, frame);
    });
}

#[panic_handler]
fn panic(_: &core::panic::PanicInfo<'_>) -> ! {
    semi::exit_with(4)
}

#[cortex_m_rt::exception]
unsafe fn HardFault(_: &cortex_m_rt::ExceptionFrame) -> ! {
    semi::exit_with(5)
}
