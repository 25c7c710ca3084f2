//! The generator of a single stream.

use std::convert::Infallible;

use rand::{SeedableRng, TryRng};

use super::StreamKey;

/// First four outputs of splitmix64 seeded with 0: stands in for the all-zero state, which is a fixed point.
pub(super) const REPLACEMENT: [u64; 4] =
    [0xe220_a839_7b1d_cdaf, 0x6e78_9e6a_a1b9_65f4, 0x06c4_5d18_8009_454f, 0xf88b_b8a8_724c_81ec];

/// xoshiro256++ (Blackman & Vigna 2021 ACM Trans. Math. Softw. 47 36): 256 bits of state, period 2^256 - 1.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Xoshiro {
    state: [u64; 4],
}

impl Xoshiro {
    /// Name under which records speak of this generator.
    pub const NAME: &'static str = "xoshiro256++";
    /// Version of the way from a key to words; changes when any word would.
    pub const VERSION: u32 = 1;

    /// The generator of a key (rule 5 of the module's `README.md`).
    #[must_use]
    pub fn from_key(key: &StreamKey) -> Self {
        let mut bytes = [0; 32];
        key.seed_bytes(&mut bytes);
        Self::from_seed(bytes)
    }

    /// A generator in this state; four zeros are replaced by a constant.
    #[must_use]
    pub const fn from_state(state: [u64; 4]) -> Self {
        if state[0] | state[1] | state[2] | state[3] == 0 {
            return Self { state: REPLACEMENT };
        }
        Self { state }
    }

    /// The state words, from which [`Xoshiro::from_state`] goes on.
    #[must_use]
    pub const fn state(&self) -> [u64; 4] {
        self.state
    }

    /// The next word.
    #[inline]
    pub const fn next(&mut self) -> u64 {
        let [s0, s1, s2, s3] = self.state;
        let output = s0.wrapping_add(s3).rotate_left(23).wrapping_add(s0);
        let s2 = s2 ^ s0;
        let s3 = s3 ^ s1;
        self.state = [s0 ^ s3, s1 ^ s2, s2 ^ (s1 << 17), s3.rotate_left(45)];
        output
    }

    /// Fills a slice with the next words.
    #[inline]
    pub fn fill(&mut self, words: &mut [u64]) {
        for word in words {
            *word = self.next();
        }
    }
}

impl TryRng for Xoshiro {
    type Error = Infallible;

    /// The high half of the next word, whose bits are the better ones.
    #[inline]
    fn try_next_u32(&mut self) -> Result<u32, Infallible> {
        Ok((self.next() >> 32) as u32)
    }

    #[inline]
    fn try_next_u64(&mut self) -> Result<u64, Infallible> {
        Ok(self.next())
    }

    fn try_fill_bytes(&mut self, bytes: &mut [u8]) -> Result<(), Infallible> {
        for chunk in bytes.chunks_mut(8) {
            chunk.copy_from_slice(&self.next().to_le_bytes()[..chunk.len()]);
        }
        Ok(())
    }
}

impl SeedableRng for Xoshiro {
    type Seed = [u8; 32];

    /// The state words from little-endian bytes; zeros are replaced as in [`Xoshiro::from_state`].
    fn from_seed(seed: [u8; 32]) -> Self {
        Self::from_state(words(&seed))
    }
}

/// Four little-endian words.
pub(super) fn words(bytes: &[u8; 32]) -> [u64; 4] {
    let mut state = [0; 4];
    for (word, chunk) in state.iter_mut().zip(bytes.as_chunks::<8>().0) {
        *word = u64::from_le_bytes(*chunk);
    }
    state
}
