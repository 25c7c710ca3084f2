//! Which instructions the processor has, and registers for them.
//!
//! Everything `unsafe` of this library is here, and of one kind: instructions that not every processor has. Registers of a kind are made and
//! used only within the function of [`Level`] that was compiled for them, and that is entered only where the processor has them.

use crate::word::{Pair, Vector, Word};
use spinledger_sdk::{Result, instructions};

/// Instructions to use. The results are the same with any.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Level {
    /// What every processor has.
    Portable,
    /// 256-bit registers.
    Avx2,
    /// 512-bit registers.
    Avx512,
}

/// Something to be done with registers of a kind that is chosen at run time.
pub(crate) trait Work {
    /// What comes out.
    type Output;
    /// Does it. To be marked `#[inline(always)]`: what is not inlined is not compiled for the instructions.
    fn run<W: Word>(self) -> Self::Output;
}

impl Level {
    /// All, the least first.
    pub(crate) const ALL: [Level; 3] = [Level::Portable, Level::Avx2, Level::Avx512];

    /// Whether this processor has it.
    pub(crate) fn is_there(self) -> bool {
        match self {
            Level::Portable => true,
            #[cfg(target_arch = "x86_64")]
            Level::Avx2 => is_x86_feature_detected!("avx2") && is_x86_feature_detected!("popcnt"),
            #[cfg(target_arch = "x86_64")]
            Level::Avx512 => is_x86_feature_detected!("avx512f") && is_x86_feature_detected!("popcnt"),
            #[cfg(not(target_arch = "x86_64"))]
            _ => false,
        }
    }

    /// The best that this processor has, or what `SPINLEDGER_SIMD` asks for: `portable`, `avx2` or `avx512`.
    ///
    /// # Errors
    /// Where that is none of the words, or not there.
    pub(crate) fn chosen() -> Result<Level> {
        instructions(&Level::ALL.map(|level| (level.name(), level, level.is_there())))
    }

    /// Its name.
    pub(crate) fn name(self) -> &'static str {
        match self {
            Level::Portable => "portable",
            Level::Avx2 => "avx2",
            Level::Avx512 => "avx512",
        }
    }

    /// Does some work with registers of this level.
    ///
    /// # Panics
    /// Where the processor has no such registers.
    pub(crate) fn run<T: Work>(self, work: T) -> T::Output {
        assert!(self.is_there(), "checked when the level was chosen");
        match self {
            Level::Portable => work.run::<Pair>(),
            #[cfg(target_arch = "x86_64")]
            // SAFETY: the processor has AVX2 and counts bits, as just asserted.
            Level::Avx2 => unsafe { x86::run_avx2(work) },
            #[cfg(target_arch = "x86_64")]
            // SAFETY: the processor has AVX-512F and counts bits, as just asserted.
            Level::Avx512 => unsafe { x86::run_avx512(work) },
            #[cfg(not(target_arch = "x86_64"))]
            _ => work.run::<Pair>(),
        }
    }
}

#[cfg(target_arch = "x86_64")]
mod x86 {
    use super::{Vector, Word, Work};
    use std::arch::x86_64::*;

    /// # Safety
    /// The processor has AVX2 and counts bits.
    #[target_feature(enable = "avx2,popcnt")]
    pub(super) unsafe fn run_avx2<T: Work>(work: T) -> T::Output {
        work.run::<Four>()
    }

    /// # Safety
    /// The processor has AVX-512F and counts bits.
    #[target_feature(enable = "avx512f,popcnt")]
    pub(super) unsafe fn run_avx512<T: Work>(work: T) -> T::Output {
        work.run::<Eight>()
    }

    /// An instruction on registers.
    macro_rules! instruction {
        ($call:expr) => {
            // SAFETY: registers of this kind are used within `run_avx2` or `run_avx512` only, whose callers have seen that the processor has the
            // instructions; and the instruction touches registers only, or the memory behind a reference to as many bytes.
            unsafe { $call }
        };
    }

    /// Four words, for AVX2.
    #[derive(Clone, Copy)]
    pub(super) struct Four(__m256i);

    impl Word for Four {
        const WORDS: usize = 4;

        #[inline(always)]
        fn load(vector: &Vector, part: usize) -> Self {
            let words: &[u64; 4] = &vector.as_chunks().0[part & 1];
            Four(instruction!(_mm256_loadu_si256(words.as_ptr().cast())))
        }

        #[inline(always)]
        fn store(self, vector: &mut Vector, part: usize) {
            let words: &mut [u64; 4] = &mut vector.as_chunks_mut().0[part & 1];
            instruction!(_mm256_storeu_si256(words.as_mut_ptr().cast(), self.0));
        }

        #[inline(always)]
        fn splat(word: u64) -> Self {
            Four(instruction!(_mm256_set1_epi64x(word.cast_signed())))
        }

        #[inline(always)]
        fn and(self, other: Self) -> Self {
            Four(instruction!(_mm256_and_si256(self.0, other.0)))
        }

        #[inline(always)]
        fn or(self, other: Self) -> Self {
            Four(instruction!(_mm256_or_si256(self.0, other.0)))
        }

        #[inline(always)]
        fn xor(self, other: Self) -> Self {
            Four(instruction!(_mm256_xor_si256(self.0, other.0)))
        }

        #[inline(always)]
        fn without(self, other: Self) -> Self {
            Four(instruction!(_mm256_andnot_si256(other.0, self.0)))
        }

        #[inline(always)]
        fn plus(self, other: Self) -> Self {
            Four(instruction!(_mm256_add_epi64(self.0, other.0)))
        }

        #[inline(always)]
        fn shifted<const BITS: u32>(self) -> Self {
            let count = instruction!(_mm_cvtsi32_si128(BITS.cast_signed()));
            Four(instruction!(_mm256_sll_epi64(self.0, count)))
        }

        #[inline(always)]
        fn rotated<const BITS: u32>(self) -> Self {
            let down = instruction!(_mm_cvtsi32_si128((64 - BITS).cast_signed()));
            let wrapped = Four(instruction!(_mm256_srl_epi64(self.0, down)));
            self.shifted::<BITS>().or(wrapped)
        }
    }

    /// Eight words, for AVX-512.
    #[derive(Clone, Copy)]
    pub(super) struct Eight(__m512i);

    impl Word for Eight {
        const WORDS: usize = 8;

        #[inline(always)]
        fn load(vector: &Vector, _: usize) -> Self {
            Eight(instruction!(_mm512_loadu_si512(vector.as_ptr().cast())))
        }

        #[inline(always)]
        fn store(self, vector: &mut Vector, _: usize) {
            instruction!(_mm512_storeu_si512(vector.as_mut_ptr().cast(), self.0));
        }

        #[inline(always)]
        fn splat(word: u64) -> Self {
            Eight(instruction!(_mm512_set1_epi64(word.cast_signed())))
        }

        #[inline(always)]
        fn and(self, other: Self) -> Self {
            Eight(instruction!(_mm512_and_si512(self.0, other.0)))
        }

        #[inline(always)]
        fn or(self, other: Self) -> Self {
            Eight(instruction!(_mm512_or_si512(self.0, other.0)))
        }

        #[inline(always)]
        fn xor(self, other: Self) -> Self {
            Eight(instruction!(_mm512_xor_si512(self.0, other.0)))
        }

        #[inline(always)]
        fn without(self, other: Self) -> Self {
            Eight(instruction!(_mm512_andnot_si512(other.0, self.0)))
        }

        #[inline(always)]
        fn plus(self, other: Self) -> Self {
            Eight(instruction!(_mm512_add_epi64(self.0, other.0)))
        }

        #[inline(always)]
        fn shifted<const BITS: u32>(self) -> Self {
            Eight(instruction!(_mm512_slli_epi64::<BITS>(self.0)))
        }

        #[inline(always)]
        fn rotated<const BITS: u32>(self) -> Self {
            // A count that is the same everywhere; compilers make the immediate form of it.
            let count = instruction!(_mm512_set1_epi64(i64::from(BITS)));
            Eight(instruction!(_mm512_rolv_epi64(self.0, count)))
        }

        // Truth tables: bit 4 a + 2 b + c of the number is the outcome for inputs a, b, c.

        #[inline(always)]
        fn xor3(self, b: Self, c: Self) -> Self {
            Eight(instruction!(_mm512_ternarylogic_epi64::<0x96>(self.0, b.0, c.0)))
        }

        #[inline(always)]
        fn majority(self, b: Self, c: Self) -> Self {
            Eight(instruction!(_mm512_ternarylogic_epi64::<0xe8>(self.0, b.0, c.0)))
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn words_name_levels() {
        let named = |word| spinledger_sdk::instructions_named(&Level::ALL.map(|l| (l.name(), l, l.is_there())), word);
        assert_eq!(named("portable"), Ok(Level::Portable));
        assert!(named("sse").unwrap_err().0.contains("portable, avx2 or avx512"));
    }

    /// Every operation on registers against the words it is about.
    struct Operations(Vector, Vector, Vector);

    impl Work for Operations {
        type Output = Vec<Vector>;

        #[inline(always)]
        fn run<W: Word>(self) -> Vec<Vector> {
            let mut out = vec![[0; 8]; 11];
            for part in 0..8 / W::WORDS {
                let [a, b, c] = [&self.0, &self.1, &self.2].map(|v| W::load(v, part));
                let done = [
                    a.and(b),
                    a.or(b),
                    a.xor(b),
                    a.without(b),
                    a.plus(b),
                    a.shifted::<17>(),
                    a.rotated::<23>(),
                    a.rotated::<45>(),
                    a.xor3(b, c),
                    a.majority(b, c),
                    W::splat(0x1234_5678_9abc_def0),
                ];
                done.into_iter().zip(&mut out).for_each(|(word, vector)| word.store(vector, part));
            }
            out
        }
    }

    #[test]
    fn registers_of_all_widths_do_the_same() {
        let mut stream = spinledger_sdk::numerics::random::SplitMix::new(5);
        let [a, b, c]: [Vector; 3] = std::array::from_fn(|_| std::array::from_fn(|_| stream.next()));
        let each = |f: &dyn Fn(usize) -> u64| -> Vector { std::array::from_fn(f) };
        let expected = vec![
            each(&|i| a[i] & b[i]),
            each(&|i| a[i] | b[i]),
            each(&|i| a[i] ^ b[i]),
            each(&|i| a[i] & !b[i]),
            each(&|i| a[i].wrapping_add(b[i])),
            each(&|i| a[i] << 17),
            each(&|i| a[i].rotate_left(23)),
            each(&|i| a[i].rotate_left(45)),
            each(&|i| a[i] ^ b[i] ^ c[i]),
            each(&|i| a[i] & b[i] | b[i] & c[i] | c[i] & a[i]),
            [0x1234_5678_9abc_def0; 8],
        ];
        for level in Level::ALL.into_iter().filter(|level| level.is_there()) {
            assert_eq!(level.run(Operations(a, b, c)), expected, "{level:?}");
        }
    }
}
