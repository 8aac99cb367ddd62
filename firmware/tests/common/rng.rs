//! A small generator of random numbers: one seed, the same numbers everywhere.
//!
//! Source: S. Vigna's SplitMix64 (public domain), after G. Steele, D. Lea and
//! C. Flood, "Fast splittable pseudorandom number generators", 2014.

/// The generator.
#[derive(Clone, Debug)]
pub struct Rng(u64);

impl Rng {
    /// Start from a seed.
    pub fn new(seed: u64) -> Self {
        Self(seed)
    }

    /// 64 random bits.
    pub fn bits(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        z ^ (z >> 31)
    }

    /// A number from `low` up to `high`.
    pub fn between(&mut self, low: f64, high: f64) -> f64 {
        let unit = (self.bits() >> 11) as f64 / (1_u64 << 53) as f64;
        low + (high - low) * unit
    }

    /// The same as `f32`.
    pub fn between32(&mut self, low: f64, high: f64) -> f32 {
        self.between(low, high) as f32
    }

    /// An index below `count`.
    pub fn index(&mut self, count: usize) -> usize {
        (self.bits() % count.max(1) as u64) as usize
    }

    /// True with a probability.
    pub fn chance(&mut self, probability: f64) -> bool {
        self.between(0.0, 1.0) < probability
    }

    /// Any `f32` bit pattern one time in four, else a number of a few decades.
    pub fn wild(&mut self) -> f32 {
        match self.index(8) {
            0 => f32::from_bits(self.bits() as u32),
            1 => [f32::NAN, f32::INFINITY, f32::NEG_INFINITY, f32::MAX, -0.0][self.index(5)],
            _ => {
                let decade = self.between(-3.0, 5.0);
                (self.between(-1.0, 1.0) * 10_f64.powf(decade)) as f32
            }
        }
    }
}
