//! Instructions per iteration of the law: 29 unknowns, 49 rows, as an area of 32 buses has.
//!
//! Contract: prints `law INSTRUCTIONS` on the emulator's console, the mean of
//! [`STEPS`] iterations, and ends.
#![no_std]
#![no_main]

#[path = "../meter.rs"]
#[expect(dead_code, reason = "the board's own meter; this bin needs a part of it")]
mod meter;
#[path = "../semi.rs"]
#[expect(dead_code, reason = "the board's own semihosting; this bin needs a part of it")]
mod semi;
#[path = "../vectors.rs"]
mod vectors;

use cortex_m_rt::entry;
use hedgerow_firmware::law::scale::Column;
use hedgerow_firmware::law::{Iterate, Limits, Problem, Scaled};
use static_cell::ConstStaticCell;

const UNKNOWNS: usize = 29;
const ROWS: usize = 49;
const X: usize = 48;
const R: usize = 56;
/// Iterations measured.
const STEPS: u16 = 100;

#[entry]
fn main() -> ! {
    static SCALED: ConstStaticCell<Scaled<X, R>> = ConstStaticCell::new(Scaled::new());
    static PROBLEM: ConstStaticCell<Problem<X, R>> = ConstStaticCell::new(Problem::new());
    static LIMITS: ConstStaticCell<Limits<X, R>> = ConstStaticCell::new(Limits::new());
    static STATE: ConstStaticCell<Iterate<X, R>> = ConstStaticCell::new(Iterate::new());
    let (scaled, problem) = (SCALED.take(), PROBLEM.take());
    let (limits, state) = (LIMITS.take(), STATE.take());
    fill(scaled, problem);
    scaled.scale(&problem.curvature, &[Column::Own; UNKNOWNS], ROWS, 1, 0..0);
    limits.fill(scaled, problem);
    let begin = meter::now();
    state.run(scaled, limits, scaled.sigma(), 1000.0, STEPS);
    let spent = meter::instructions(begin, meter::now());
    let active = state.dual().iter().filter(|y| **y != 0.0).count();
    semi::print("rows at work ");
    semi::print_number(active as u32);
    semi::print("law ");
    semi::print_number(spent / u32::from(STEPS));
    semi::exit()
}

/// A problem with the balance and some of the lines at work, as on a bad day.
fn fill(scaled: &mut Scaled<X, R>, problem: &mut Problem<X, R>) {
    for row in 0..ROWS {
        for col in 0..UNKNOWNS {
            // Any pattern without zeros and repetition will do.
            let value = ((row * 7 + col * 13 + row * col) % 29) as f32 / 14.0 - 1.0;
            scaled.matrix_mut().put(row, col, if row == 0 { 1.0 } else { value });
        }
        let free = if row % 12 == 1 { 0.5 } else { 20.0 };
        problem.row_low[row] = 2.0 - free;
        problem.row_high[row] = 2.0 + free;
    }
    problem.row_low[0] = 3.0;
    problem.row_high[0] = 3.0;
    for col in 0..UNKNOWNS {
        problem.low[col] = -1.0;
        problem.high[col] = 1.0;
        problem.target[col] = 0.1;
        problem.curvature[col] = 1.0 + 0.1 * col as f32;
        problem.weight[col] = if col > 20 { 0.05 } else { 0.0 };
    }
}

#[panic_handler]
fn panic(_: &core::panic::PanicInfo<'_>) -> ! {
    semi::exit_with(4)
}
