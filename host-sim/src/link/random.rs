//! Named random streams: one seed for a run, one stream for each purpose.
//!
//! Contract: the same seed and name give the same numbers on every machine, in
//! every release, whatever the order in which streams are made. Only 32-bit
//! integers are drawn from the generator; what is made of them is written here,
//! since libraries do not promise that their distributions stay as they are.

use hedgerow_protocol::auth::digest16;
use rand::SeedableRng;
use rand::rngs::ChaCha8Rng;

pub use rand::Rng;

/// The stream of this name.
///
/// The 32 seed bytes of the generator are two 16-byte halves: the first bytes
/// of SHA-256 over the half's number (0 or 1), the seed (little-endian) and the
/// name.
pub fn stream(seed: u64, name: &str) -> ChaCha8Rng {
    let half = |number: u8| {
        let mut text = vec![number];
        text.extend(seed.to_le_bytes());
        text.extend(name.as_bytes());
        digest16(&text)
    };
    let mut bytes = [0; 32];
    bytes[..16].copy_from_slice(&half(0));
    bytes[16..].copy_from_slice(&half(1));
    ChaCha8Rng::from_seed(bytes)
}

/// Whether an event of this chance (0 to 1) happens, decided by one drawn word.
pub fn happens(chance: f64, word: u32) -> bool {
    // The product is exact enough: 0 gives never, 1 gives always.
    f64::from(word) < chance * 4_294_967_296.0
}

/// A number from 0 to `most`, made of one drawn word.
///
/// The products' upper half; the unevenness is below `most` in 2^32.
pub fn up_to(most: u16, word: u32) -> u32 {
    let scaled = u64::from(word) * (u64::from(most) + 1);
    // Smaller than `most + 1`, so it fits.
    (scaled >> 32) as u32
}

/// A number from 0 up to but not 1, with 32 random bits.
pub fn share(word: u32) -> f64 {
    f64::from(word) / 4_294_967_296.0
}
