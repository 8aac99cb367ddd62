//! How a steward's memory grows with what it can hold, and the largest area for a chip.
//!
//! Contract: the size of a steward is a polynomial of degree two in its three
//! capacities, since its tables are vectors and matrices over them. Its
//! coefficients come from the sizes of stewards of ten capacities, computed by
//! the compiler; what an image really takes is measured, and only the
//! difference between two capacities is taken from the polynomial.

use hedgerow_firmware::node::Node;
use serde::Serialize;
use std::mem::size_of;

/// Lines per bus that an area is taken to have.
pub const LINES_PER_BUS: f64 = 1.5;
/// Unknowns per bus: units, feeders and two per tie.
pub const UNKNOWNS_PER_BUS: f64 = 29.0 / 32.0;
/// Room that is left beside the deepest stack seen, as a share of it.
pub const STACK_MARGIN: f64 = 0.25;
/// Most buses that a charter can name.
const BUSES_MAX: usize = 64;

/// What a steward's build can hold.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
pub struct Capacity {
    /// Buses.
    pub buses: usize,
    /// Unknowns.
    pub unknowns: usize,
    /// Rows.
    pub rows: usize,
}

impl Capacity {
    /// Capacity for an area of usual shape with this many buses.
    pub fn usual(buses: usize) -> Self {
        let share = |per_bus: f64| (per_bus * buses as f64).ceil() as usize;
        Self { buses, unknowns: share(UNKNOWNS_PER_BUS), rows: share(LINES_PER_BUS) + 1 }
    }
}

/// Size of a steward with its frames, bytes, by the polynomial.
pub fn node_bytes(capacity: Capacity) -> f64 {
    // In units of 8, the step of the ten sizes; Newton's form on the grid 1, 2, 3.
    let [b, x, r] =
        [capacity.buses, capacity.unknowns, capacity.rows].map(|value| (value as f64 - 8.0) / 8.0);
    let size = |bytes: usize| bytes as f64;
    let origin = size(size_of::<Node<8, 8, 8>>());
    let [b1, x1, r1] =
        [size_of::<Node<16, 8, 8>>(), size_of::<Node<8, 16, 8>>(), size_of::<Node<8, 8, 16>>()]
            .map(|bytes| size(bytes) - origin);
    let [b2, x2, r2] = [
        (size_of::<Node<24, 8, 8>>(), b1),
        (size_of::<Node<8, 24, 8>>(), x1),
        (size_of::<Node<8, 8, 24>>(), r1),
    ]
    .map(|(bytes, first)| size(bytes) - origin - 2.0 * first);
    let bx = size(size_of::<Node<16, 16, 8>>()) - origin - b1 - x1;
    let br = size(size_of::<Node<16, 8, 16>>()) - origin - b1 - r1;
    let xr = size(size_of::<Node<8, 16, 16>>()) - origin - x1 - r1;
    let pairs = |n: f64| n * (n - 1.0) / 2.0;
    origin
        + b1 * b
        + x1 * x
        + r1 * r
        + b2 * pairs(b)
        + x2 * pairs(x)
        + r2 * pairs(r)
        + bx * b * x
        + br * b * r
        + xr * x * r
}

/// What an image of known capacity was measured to take.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Taken {
    /// What the image holds.
    pub capacity: Capacity,
    /// Flash, bytes: the code does not grow with the capacity.
    pub flash_bytes: f64,
    /// Static RAM, bytes.
    pub static_ram_bytes: f64,
    /// Deepest stack seen, bytes.
    pub stack_bytes: f64,
}

/// The largest area for a chip.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Largest {
    /// Buses; 0 = not even the smallest.
    pub buses: usize,
    /// RAM that it takes, bytes.
    pub ram_bytes: f64,
    /// What ends it: `ram`, `flash`, or `charter`, which names no more than 64 buses.
    pub ended_by: &'static str,
}

/// RAM for a capacity, bytes: measured static RAM, moved by the polynomial, and
/// the deepest stack with its margin, taken to grow with the unknowns.
pub fn ram_bytes(taken: &Taken, capacity: Capacity) -> f64 {
    // The charter's own buffer holds the lower half of a square of buses.
    let charter = |buses: usize| 2.0 * (buses * buses) as f64;
    let grown = node_bytes(capacity) - node_bytes(taken.capacity) + charter(capacity.buses)
        - charter(taken.capacity.buses);
    let unknowns = capacity.unknowns as f64 / (taken.capacity.unknowns as f64).max(1.0);
    let stack = taken.stack_bytes * unknowns.max(1.0) * (1.0 + STACK_MARGIN);
    taken.static_ram_bytes + grown + stack
}

/// The largest area of usual shape that a chip holds.
pub fn largest(taken: &Taken, flash_bytes: f64, ram_given_bytes: f64) -> Largest {
    if taken.flash_bytes > flash_bytes {
        return Largest { buses: 0, ram_bytes: 0.0, ended_by: "flash" };
    }
    let fits = |buses: usize| ram_bytes(taken, Capacity::usual(buses)) <= ram_given_bytes;
    let buses = (1..=BUSES_MAX).take_while(|&buses| fits(buses)).last().unwrap_or(0);
    let ended_by = if buses == BUSES_MAX { "charter" } else { "ram" };
    Largest { buses, ram_bytes: ram_bytes(taken, Capacity::usual(buses)), ended_by }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn formula(buses: usize, unknowns: usize, rows: usize) -> f64 {
        node_bytes(Capacity { buses, unknowns, rows })
    }

    #[test]
    fn the_polynomial_gives_the_compilers_sizes_off_its_own_points_to_the_last_kilobyte() {
        let cases = [
            (formula(32, 32, 56), size_of::<Node<32, 32, 56>>()),
            (formula(64, 104, 112), size_of::<Node<64, 104, 112>>()),
            (formula(16, 40, 24), size_of::<Node<16, 40, 24>>()),
        ];
        for (by_formula, by_compiler) in cases {
            assert!((by_formula - by_compiler as f64).abs() < 64.0, "{by_formula} {by_compiler}");
        }
    }

    fn taken() -> Taken {
        let capacity = Capacity { buses: 32, unknowns: 56, rows: 56 };
        Taken { capacity, flash_bytes: 80e3, static_ram_bytes: 40e3, stack_bytes: 4e3 }
    }

    #[test]
    fn an_image_as_it_is_takes_what_was_measured() {
        let taken = taken();
        assert_eq!(ram_bytes(&taken, taken.capacity), 40e3 + 5e3);
    }

    #[test]
    fn more_ram_never_holds_less_and_too_little_flash_holds_nothing() {
        let taken = taken();
        let mut last = 0;
        for kib in [16, 32, 64, 128, 256] {
            let buses = largest(&taken, 1e6, f64::from(kib) * 1024.0).buses;
            assert!(buses >= last, "{kib} KiB holds {buses}, less RAM held {last}");
            last = buses;
        }
        assert!(last > 32);
        assert_eq!(largest(&taken, 70e3, 1e6).ended_by, "flash");
        assert_eq!(
            largest(&taken, 1e6, 1e9),
            Largest {
                buses: 64,
                ram_bytes: ram_bytes(&taken, Capacity::usual(64)),
                ended_by: "charter",
            }
        );
    }
}
