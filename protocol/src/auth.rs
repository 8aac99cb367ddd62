//! Who said it: the keyed tag of a frame, and the hash that names a charter.
//!
//! Contract: a tag is HMAC-SHA-256 truncated to its first 16 bytes; it is
//! compared in constant time. The two hash states that depend on the key alone
//! are computed once and copied for each tag. Whether a frame is fresh is not
//! decided here.
//!
//! Source: H. Krawczyk, M. Bellare, R. Canetti, RFC 2104 (1997); FIPS 198-1
//! (2008); FIPS 180-4 (2015); truncation as in RFC 2104 section 5.

use crate::limits::TAG_BYTES;
use core::fmt;
use hmac::{Hmac, KeyInit, Mac};
use sha2::{Digest, Sha256};

/// Bytes of a SHA-256 block, which a shorter key is padded to with zeros.
const BLOCK_BYTES: usize = 64;

/// The public key of rehearsals and benches without a key file.
///
/// Everybody has it: a frame sealed with it says that it arrived whole, not who
/// sent it. Never use it where a frame can move anything.
pub const REHEARSAL_KEY: [u8; 32] = *b"hedgerow rehearsals, not secret!";

/// A key, ready to tag and verify.
#[derive(Clone)]
pub struct Key(Hmac<Sha256>);

impl Key {
    /// Prepare a key of any length; 32 random bytes are right.
    ///
    /// Cost: two SHA-256 blocks, and the key's own hash beyond 64 bytes.
    ///
    /// ```
    /// use hedgerow_protocol::auth::{Key, REHEARSAL_KEY};
    /// let key = Key::new(&REHEARSAL_KEY);
    /// let tag = key.tag(b"frame");
    /// assert!(key.verify(b"frame", &tag));
    /// assert!(!key.verify(b"other", &tag));
    /// ```
    pub fn new(secret: &[u8]) -> Self {
        // Padded here, so that no fallible constructor is needed (RFC 2104, section 2).
        let mut block = [0; BLOCK_BYTES];
        if secret.len() > BLOCK_BYTES {
            let digest = Sha256::digest(secret);
            for (to, from) in block.iter_mut().zip(digest.iter()) {
                *to = *from;
            }
        } else {
            for (to, from) in block.iter_mut().zip(secret) {
                *to = *from;
            }
        }
        Self(Hmac::new(&block.into()))
    }

    /// The tag of `bytes`.
    ///
    /// Cost: one SHA-256 block per started 64 bytes and one more.
    pub fn tag(&self, bytes: &[u8]) -> [u8; TAG_BYTES] {
        first_16(&self.0.clone().chain_update(bytes).finalize().into_bytes())
    }

    /// Whether `tag` is the tag of `bytes`; takes the same time wherever they differ.
    pub fn verify(&self, bytes: &[u8], tag: &[u8; TAG_BYTES]) -> bool {
        self.0.clone().chain_update(bytes).verify_truncated_left(tag).is_ok()
    }
}

impl fmt::Debug for Key {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("Key(..)")
    }
}

/// First 16 bytes of the SHA-256 of `bytes`: the hash that names a charter.
pub fn digest16(bytes: &[u8]) -> [u8; 16] {
    first_16(&Sha256::digest(bytes))
}

/// The first 16 bytes, or zeros beyond the end of a shorter slice.
fn first_16(bytes: &[u8]) -> [u8; 16] {
    let mut first = [0; 16];
    for (to, from) in first.iter_mut().zip(bytes) {
        *to = *from;
    }
    first
}

#[cfg(test)]
#[allow(clippy::unwrap_used, clippy::expect_used, clippy::indexing_slicing)]
mod tests {
    use super::{Key, REHEARSAL_KEY, digest16};
    use std::{format, string::String, vec, vec::Vec};

    fn hex(bytes: &[u8]) -> String {
        bytes.iter().map(|byte| format!("{byte:02x}")).collect()
    }

    /// Key, data and the first 16 bytes of the tag: RFC 4231, test cases 1 to
    /// 6, from memory, recomputed with an independent implementation.
    fn rfc_4231() -> Vec<(Vec<u8>, Vec<u8>, &'static str)> {
        vec![
            (vec![0x0B; 20], b"Hi There".to_vec(), "b0344c61d8db38535ca8afceaf0bf12b"),
            (
                b"Jefe".to_vec(),
                b"what do ya want for nothing?".to_vec(),
                "5bdcc146bf60754e6a042426089575c7",
            ),
            (vec![0xAA; 20], vec![0xDD; 50], "773ea91e36800e46854db8ebd09181a7"),
            ((1..=25).collect(), vec![0xCD; 50], "82558a389a443c0ea4cc819899f2083a"),
            (vec![0x0C; 20], b"Test With Truncation".to_vec(), "a3b6167473100ee06e0c796c2955552b"),
            (
                vec![0xAA; 131],
                b"Test Using Larger Than Block-Size Key - Hash Key First".to_vec(),
                "60e431591ee0b67f0d8a26aacbf5b77f",
            ),
        ]
    }

    #[test]
    fn tags_match_rfc_4231() {
        for (secret, data, expected) in rfc_4231() {
            assert_eq!(hex(&Key::new(&secret).tag(&data)), expected);
        }
    }

    #[test]
    fn verifies_its_own_tag_and_no_other() {
        let key = Key::new(&REHEARSAL_KEY);
        let tag = key.tag(b"frame");
        assert!(key.verify(b"frame", &tag));
        assert!(!key.verify(b"framf", &tag));
        assert!(!Key::new(b"other").verify(b"frame", &tag));
        for bit in 0..128 {
            let mut forged = tag;
            forged[bit / 8] ^= 1 << (bit % 8);
            assert!(!key.verify(b"frame", &forged), "bit {bit}");
        }
    }

    #[test]
    fn digest_of_abc_is_that_of_fips_180_4() {
        // FIPS 180-4, example "abc", from memory: first half of the digest.
        assert_eq!(hex(&digest16(b"abc")), "ba7816bf8f01cfea414140de5dae2223");
    }

    #[test]
    fn debug_prints_no_key() {
        assert_eq!(format!("{:?}", Key::new(b"secret")), "Key(..)");
    }
}
