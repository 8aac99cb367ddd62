//! The proof that steward and protocol have no panic path.
//!
//! Contract: calls all that a board calls, with bytes that the compiler knows
//! nothing about. The panic handler calls a function that does not exist, so a
//! panic path that survives is a link error; it says that there is one, not where.
#![no_std]
#![no_main]

use core::hint::black_box;
use cortex_m_rt::entry;
use hedgerow_firmware::boot::{Identity, Phase};
use hedgerow_firmware::node::BoardNode;
use hedgerow_protocol::auth::Key;
use hedgerow_protocol::message::Effort;
use static_cell::ConstStaticCell;

unsafe extern "C" {
    fn PANIC_PATH_LEFT_IN_FIRMWARE() -> !;
}

#[panic_handler]
fn panic(_: &core::panic::PanicInfo<'_>) -> ! {
    // SAFETY: never called; it does not even link.
    unsafe { PANIC_PATH_LEFT_IN_FIRMWARE() }
}

#[entry]
fn main() -> ! {
    static NODE: ConstStaticCell<BoardNode> = ConstStaticCell::new(BoardNode::blank());
    // A second `take` would be a panic path of the cell's own.
    let Some(node) = NODE.try_take() else { loop {} };
    let bytes = black_box([0_u8; 64]);
    let length = black_box(0_usize);
    let some = bytes.get(..length).unwrap_or_default();
    #[cfg(feature = "deliberate-panic")]
    black_box(some.first().unwrap());
    node.wake(Key::new(some), black_box(1));
    node.introduce(Identity { address: black_box(1), core: "probe", last_fault: 0 });
    let mut out = |to: u8, frame: &[u8]| {
        black_box((to, frame));
    };
    black_box(node.load(some).is_ok());
    loop {
        node.receive(black_box(some));
        node.answer(&mut out);
        if let Some(tick) = node.pending_tick() {
            node.tick(tick, &mut out);
            let rebuilt = node.steward().has_rebuilt();
            node.report(Effort { tick, instructions: 0, stack_bytes: 0, rebuilt }, &mut out);
        }
        black_box((node.counts(), node.phase() == Phase::Stopped, node.steward().verdict()));
    }
}
