//! The splitmix64 generator.

/// splitmix64 (Steele, Lea & Flood 2014 OOPSLA 453): 64 bits of state, used for fixed test data and to define the
/// replacement of an all-zero state. Not for simulations.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct SplitMix(u64);

impl SplitMix {
    /// A generator with this seed.
    #[must_use]
    pub const fn new(seed: u64) -> Self {
        Self(seed)
    }

    /// The next word.
    pub const fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }
}
