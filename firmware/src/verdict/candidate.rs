//! Which dual vectors are worth trying as a proof.
//!
//! Contract: pure arithmetic on physical duals; any vector is allowed, so a bad
//! choice can only miss. When no point meets the limits the duals run away along
//! a proof: the dual itself, what it gained over a tick, and what it gained
//! over several ticks all tend to it, at different speeds.
//!
//! Source: infeasibility from differences of iterates, G. Banjac, P. Goulart,
//! B. Stellato and S. Boyd, "Infeasibility detection in the alternating
//! direction method of multipliers for convex optimization", 2019.

use super::dust;

/// Ticks between the duals that are kept for the longer difference.
const SPAN_TICKS: u16 = 10;

/// Number of candidates per tick.
pub const CANDIDATES: usize = 3;

/// Duals of earlier ticks.
#[derive(Clone, Debug)]
pub struct Candidates<const R: usize> {
    last: [f32; R],
    older: [f32; R],
    newer: [f32; R],
    age_ticks: u16,
}

impl<const R: usize> Candidates<R> {
    /// Nothing seen yet.
    pub const fn new() -> Self {
        Self { last: [0.0; R], older: [0.0; R], newer: [0.0; R], age_ticks: 0 }
    }

    /// The vectors to try this tick: the dual, its gain over the tick, its gain
    /// over ten to twenty ticks (since the start while younger).
    ///
    /// Shapes: `dual` physical, one entry per row, as are the results.
    /// Cost: 9 rows flops.
    pub fn next(&mut self, dual: &[f32; R]) -> [[f32; R]; CANDIDATES] {
        let mut found = [*dual, gain(dual, &self.last), gain(dual, &self.older)];
        self.age_ticks += 1;
        if self.age_ticks >= SPAN_TICKS {
            self.age_ticks = 0;
            self.older = self.newer;
            self.newer = *dual;
        }
        self.last = *dual;
        found.iter_mut().for_each(|candidate| dust(candidate));
        found
    }
}

impl<const R: usize> Default for Candidates<R> {
    fn default() -> Self {
        Self::new()
    }
}

fn gain<const R: usize>(now: &[f32; R], before: &[f32; R]) -> [f32; R] {
    let mut out = *now;
    out.iter_mut().zip(before).for_each(|(value, before)| *value -= before);
    out
}

#[cfg(test)]
#[allow(clippy::indexing_slicing)]
mod tests {
    use super::*;
    extern crate std;

    #[test]
    fn gains_span_one_tick_and_ten_to_twenty() {
        let mut candidates = Candidates::<2>::new();
        for tick in 1..=100_u16 {
            let [dual, short, long] = candidates.next(&[f32::from(tick), 0.0]);
            assert_eq!(dual, [f32::from(tick), 0.0]);
            assert_eq!(short, [1.0, 0.0]);
            let least = f32::from(tick.min(SPAN_TICKS));
            assert!(long[0] >= least && long[0] <= f32::from(2 * SPAN_TICKS), "{tick}: {long:?}");
        }
    }
}
