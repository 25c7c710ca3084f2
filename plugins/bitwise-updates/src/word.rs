//! Bit vectors in registers.
//!
//! A [`Vector`] of 512 bits is worked on in parts as wide as a register. Parts of a vector have nothing to do with each other (each has
//! generators of its own), so that the bits do not depend on the width.

/// 512 bits: bit l of word w belongs to lane 64 w + l.
pub(crate) type Vector = [u64; 8];

/// Lanes of a vector.
pub(crate) const LANES: usize = 512;

/// A register.
pub(crate) trait Word: Copy {
    /// 64-bit words that it holds: 2, 4 or 8.
    const WORDS: usize;

    /// Reads a part of a vector.
    fn load(vector: &Vector, part: usize) -> Self;
    /// Writes it.
    fn store(self, vector: &mut Vector, part: usize);
    /// The same word everywhere.
    fn splat(word: u64) -> Self;
    fn and(self, other: Self) -> Self;
    fn or(self, other: Self) -> Self;
    fn xor(self, other: Self) -> Self;
    /// `self` where `other` is not.
    fn without(self, other: Self) -> Self;
    /// Sum of 64-bit words.
    fn plus(self, other: Self) -> Self;
    /// 64-bit words shifted up.
    fn shifted<const BITS: u32>(self) -> Self;
    /// 64-bit words rotated up.
    fn rotated<const BITS: u32>(self) -> Self;

    /// Exclusive or of three.
    #[inline(always)]
    fn xor3(self, b: Self, c: Self) -> Self {
        self.xor(b).xor(c)
    }

    /// What at least two of three are.
    #[inline(always)]
    fn majority(self, b: Self, c: Self) -> Self {
        self.xor(self.xor(b).and(self.xor(c)))
    }
}

/// One step of the generators that serve a part: xoshiro256++, the state words of all its lanes side by side.
#[inline(always)]
pub(crate) fn draw<W: Word>(state: &mut [W; 4]) -> W {
    let [s0, s1, s2, s3] = *state;
    let output = s0.plus(s3).rotated::<23>().plus(s0);
    let shifted = s1.shifted::<17>();
    *state = [s0.xor3(s3, s1), s1.xor3(s2, s0), s2.xor3(s0, shifted), s3.xor(s1).rotated::<45>()];
    output
}

/// Two words, for the narrowest vector registers in use; no instruction set is named.
#[derive(Clone, Copy)]
pub(crate) struct Pair([u64; 2]);

impl Pair {
    #[inline(always)]
    fn map2(self, other: Self, f: impl Fn(u64, u64) -> u64) -> Self {
        Pair([f(self.0[0], other.0[0]), f(self.0[1], other.0[1])])
    }
}

impl Word for Pair {
    const WORDS: usize = 2;

    #[inline(always)]
    fn load(vector: &Vector, part: usize) -> Self {
        Pair(vector.as_chunks::<2>().0[part & 3])
    }

    #[inline(always)]
    fn store(self, vector: &mut Vector, part: usize) {
        vector.as_chunks_mut::<2>().0[part & 3] = self.0;
    }

    #[inline(always)]
    fn splat(word: u64) -> Self {
        Pair([word; 2])
    }

    #[inline(always)]
    fn and(self, other: Self) -> Self {
        self.map2(other, |a, b| a & b)
    }

    #[inline(always)]
    fn or(self, other: Self) -> Self {
        self.map2(other, |a, b| a | b)
    }

    #[inline(always)]
    fn xor(self, other: Self) -> Self {
        self.map2(other, |a, b| a ^ b)
    }

    #[inline(always)]
    fn without(self, other: Self) -> Self {
        self.map2(other, |a, b| a & !b)
    }

    #[inline(always)]
    fn plus(self, other: Self) -> Self {
        self.map2(other, u64::wrapping_add)
    }

    #[inline(always)]
    fn shifted<const BITS: u32>(self) -> Self {
        Pair(self.0.map(|word| word << BITS))
    }

    #[inline(always)]
    fn rotated<const BITS: u32>(self) -> Self {
        Pair(self.0.map(|word| word.rotate_left(BITS)))
    }
}
