//! Which instructions the processor has, and registers for them.
//!
//! Everything `unsafe` of this library is here, and of one kind: instructions that not every processor has. Registers of a kind are made and
//! used only within the function of [`Level`] that was compiled for them, and that is entered only where the processor has them.

use crate::bytes::{Bytes, Plain};
use spinledger_sdk::{Result, instructions};

/// Instructions to use. The results are the same with any.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Level {
    /// What every processor has.
    Portable,
    /// 256-bit registers.
    Avx2,
    /// 512-bit registers, with look-ups of bytes (AVX512BW, AVX512VBMI).
    Avx512,
}

/// Something to be done with bytes of a kind that is chosen at run time.
pub(crate) trait Work {
    /// What comes out.
    type Output;
    /// Does it. To be marked `#[inline(always)]`: what is not inlined is not compiled for the instructions.
    fn run<B: Bytes>(self) -> Self::Output;
}

impl Level {
    /// All, the least first.
    pub(crate) const ALL: [Level; 3] = [Level::Portable, Level::Avx2, Level::Avx512];

    /// Whether this processor has it.
    pub(crate) fn is_there(self) -> bool {
        match self {
            Level::Portable => true,
            #[cfg(target_arch = "x86_64")]
            Level::Avx2 => is_x86_feature_detected!("avx2"),
            #[cfg(target_arch = "x86_64")]
            Level::Avx512 => {
                is_x86_feature_detected!("avx512f")
                    && is_x86_feature_detected!("avx512bw")
                    && is_x86_feature_detected!("avx512vbmi")
            }
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

    /// Does some work with this level.
    ///
    /// # Panics
    /// Where the processor does not have it.
    pub(crate) fn run<T: Work>(self, work: T) -> T::Output {
        assert!(self.is_there(), "checked when the level was chosen");
        match self {
            Level::Portable => work.run::<Plain>(),
            #[cfg(target_arch = "x86_64")]
            // SAFETY: the processor has AVX2, as just asserted.
            Level::Avx2 => unsafe { x86::run_avx2(work) },
            #[cfg(target_arch = "x86_64")]
            // SAFETY: the processor has the three parts of AVX-512, as just asserted.
            Level::Avx512 => unsafe { x86::run_avx512(work) },
            #[cfg(not(target_arch = "x86_64"))]
            _ => work.run::<Plain>(),
        }
    }
}

#[cfg(target_arch = "x86_64")]
mod x86 {
    use super::Work;
    use crate::bytes::{Bytes, WIDTH};
    use crate::lines::Lines;
    use spinledger_numerics::random::Halves;
    use std::arch::x86_64::*;

    /// # Safety
    /// The processor has AVX2.
    #[target_feature(enable = "avx2")]
    pub(super) unsafe fn run_avx2<T: Work>(work: T) -> T::Output {
        work.run::<Two>()
    }

    /// # Safety
    /// The processor has AVX512F, AVX512BW and AVX512VBMI.
    #[target_feature(enable = "avx512f,avx512bw,avx512vbmi")]
    pub(super) unsafe fn run_avx512<T: Work>(work: T) -> T::Output {
        work.run::<Register>()
    }

    // Functions of their own: inlined into a kernel, compilers do not find the vectors in them.

    /// # Safety
    /// The processor has AVX2.
    #[target_feature(enable = "avx2")]
    #[inline(never)]
    unsafe fn draw_ahead_avx2(halves: &mut Halves) {
        halves.draw_ahead::<4>();
    }

    /// # Safety
    /// The processor has AVX512F.
    #[target_feature(enable = "avx512f")]
    #[inline(never)]
    unsafe fn draw_ahead_avx512(halves: &mut Halves) {
        halves.draw_ahead::<8>();
    }

    /// An instruction on registers.
    macro_rules! instruction {
        ($call:expr) => {
            // SAFETY: registers of this kind are used within `run_avx2` or `run_avx512` only, whose callers have seen that the processor has the instructions;
            // and the instruction touches registers only, or the memory behind a reference to as many bytes.
            unsafe { $call }
        };
    }

    /// 64 bytes in two registers.
    #[derive(Clone, Copy)]
    pub(super) struct Two(__m256i, __m256i);

    impl Two {
        #[inline(always)]
        fn each(self, other: Self, f: impl Fn(__m256i, __m256i) -> __m256i) -> Self {
            Two(f(self.0, other.0), f(self.1, other.1))
        }
    }

    impl Bytes for Two {
        type Total = Two;

        #[inline(always)]
        fn draw_ahead(halves: &mut Halves) {
            instruction!(draw_ahead_avx2(halves));
        }

        #[inline(always)]
        fn load(bytes: &[u8; WIDTH]) -> Self {
            let [low, high]: &[[u8; 32]; 2] = &[bytes.as_chunks().0[0], bytes.as_chunks().0[1]];
            Two(
                instruction!(_mm256_loadu_si256(low.as_ptr().cast())),
                instruction!(_mm256_loadu_si256(high.as_ptr().cast())),
            )
        }

        #[inline(always)]
        fn store(self, bytes: &mut [u8; WIDTH]) {
            let halves: &mut [[u8; 32]] = bytes.as_chunks_mut().0;
            instruction!(_mm256_storeu_si256(halves[0].as_mut_ptr().cast(), self.0));
            instruction!(_mm256_storeu_si256(halves[1].as_mut_ptr().cast(), self.1));
        }

        #[inline(always)]
        fn splat(byte: u8) -> Self {
            let all = instruction!(_mm256_set1_epi8(byte.cast_signed()));
            Two(all, all)
        }

        #[inline(always)]
        fn plus(self, other: Self) -> Self {
            self.each(other, |a, b| instruction!(_mm256_add_epi8(a, b)))
        }

        #[inline(always)]
        fn xor(self, other: Self) -> Self {
            self.each(other, |a, b| instruction!(_mm256_xor_si256(a, b)))
        }

        #[inline(always)]
        fn and(self, other: Self) -> Self {
            self.each(other, |a, b| instruction!(_mm256_and_si256(a, b)))
        }

        #[inline(always)]
        fn only(self, mask: u64) -> Self {
            let bytes = std::array::from_fn(|place| ((mask >> place & 1) as u8).wrapping_neg());
            self.and(Self::load(&bytes))
        }

        /// By ranks, as the portable way does it: see there.
        #[inline(always)]
        fn hits(self, lines: &Lines, words: &[u32; WIDTH]) -> Self {
            // Comparisons are of signed numbers: the upper bit is turned on both sides.
            let turn = instruction!(_mm256_set1_epi32(i32::MIN));
            let mut turned = [turn; 8];
            for (turned, eight) in turned.iter_mut().zip(words.as_chunks::<8>().0) {
                *turned = instruction!(_mm256_xor_si256(_mm256_loadu_si256(eight.as_ptr().cast()), turn));
            }
            // Minus one where a word is at or above a limit, that is, above its predecessor; limits are not 0.
            let mut ranks = [instruction!(_mm256_setzero_si256()); 8];
            for limit in lines.sorted() {
                let before = instruction!(_mm256_set1_epi32((limit - 1).cast_signed() ^ i32::MIN));
                for (rank, word) in ranks.iter_mut().zip(turned) {
                    *rank = instruction!(_mm256_add_epi32(*rank, _mm256_cmpgt_epi32(word, before)));
                }
            }
            // Packing goes by halves of registers; then groups of four bytes are out of order.
            let order = instruction!(_mm256_setr_epi32(0, 4, 1, 5, 2, 6, 3, 7));
            let packed = |four: &[__m256i]| {
                instruction!(_mm256_permutevar8x32_epi32(
                    _mm256_packs_epi16(_mm256_packs_epi32(four[0], four[1]), _mm256_packs_epi32(four[2], four[3])),
                    order
                ))
            };
            let ranks = Two(packed(&ranks[..4]), packed(&ranks[4..]));
            // A rank is at most 32, and so is where a limit stands among them plus one: signed bytes hold both.
            let above = self.look_up(lines, &lines.rank);
            let hits = above.plus(ranks).each(Self::splat(0), |a, b| instruction!(_mm256_cmpgt_epi8(a, b)));
            hits.and(Self::splat(1))
        }

        #[inline(always)]
        fn look_up(self, _: &Lines, column: &[u8; WIDTH]) -> Self {
            let sixteen: &[[u8; 16]] = column.as_chunks().0;
            let part = |place: usize| {
                instruction!(_mm256_broadcastsi128_si256(_mm_loadu_si128(sixteen[place].as_ptr().cast())))
            };
            let (low, high) = (part(0), part(1));
            let one = |numbers: __m256i| {
                // The fifth bit, brought to where blending looks.
                let upper = instruction!(_mm256_slli_epi16::<3>(numbers));
                instruction!(_mm256_blendv_epi8(
                    _mm256_shuffle_epi8(low, numbers),
                    _mm256_shuffle_epi8(high, numbers),
                    upper
                ))
            };
            Two(one(self.0), one(self.1))
        }

        #[inline(always)]
        fn where_one(self, ones: Self) -> Self {
            let mask = Self::splat(0).each(ones, |zero, one| instruction!(_mm256_sub_epi8(zero, one)));
            self.and(mask)
        }

        #[inline(always)]
        fn nothing() -> Self {
            Self::splat(0)
        }

        #[inline(always)]
        fn add_to(self, total: Self) -> Self {
            let sums = self.each(Self::splat(0), |a, zero| instruction!(_mm256_sad_epu8(a, zero)));
            total.each(sums, |a, b| instruction!(_mm256_add_epi64(a, b)))
        }

        #[inline(always)]
        fn count(total: Self) -> u64 {
            let mut bytes = [0; WIDTH];
            total.store(&mut bytes);
            bytes.as_chunks::<8>().0.iter().map(|word| u64::from_le_bytes(*word)).sum()
        }
    }

    /// 64 bytes in a register.
    #[derive(Clone, Copy)]
    pub(super) struct Register(__m512i);

    impl Bytes for Register {
        type Total = Register;

        #[inline(always)]
        fn draw_ahead(halves: &mut Halves) {
            instruction!(draw_ahead_avx512(halves));
        }

        #[inline(always)]
        fn load(bytes: &[u8; WIDTH]) -> Self {
            Register(instruction!(_mm512_loadu_si512(bytes.as_ptr().cast())))
        }

        #[inline(always)]
        fn store(self, bytes: &mut [u8; WIDTH]) {
            instruction!(_mm512_storeu_si512(bytes.as_mut_ptr().cast(), self.0));
        }

        #[inline(always)]
        fn splat(byte: u8) -> Self {
            Register(instruction!(_mm512_set1_epi8(byte.cast_signed())))
        }

        #[inline(always)]
        fn plus(self, other: Self) -> Self {
            Register(instruction!(_mm512_add_epi8(self.0, other.0)))
        }

        #[inline(always)]
        fn xor(self, other: Self) -> Self {
            Register(instruction!(_mm512_xor_si512(self.0, other.0)))
        }

        #[inline(always)]
        fn and(self, other: Self) -> Self {
            Register(instruction!(_mm512_and_si512(self.0, other.0)))
        }

        #[inline(always)]
        fn only(self, mask: u64) -> Self {
            Register(instruction!(_mm512_maskz_mov_epi8(mask, self.0)))
        }

        #[inline(always)]
        fn hits(self, lines: &Lines, words: &[u32; WIDTH]) -> Self {
            let last = &lines.last;
            let low = instruction!(_mm512_loadu_si512(last.as_ptr().cast()));
            let high: &[u32; 16] = &last.as_chunks().0[1];
            let high = instruction!(_mm512_loadu_si512(high.as_ptr().cast()));
            let mut hits = 0;
            // By way of memory: widening from there is one step, from parts of a register two, on the unit that is the busiest.
            let mut numbers = [0; WIDTH];
            self.store(&mut numbers);
            let parts = words.as_chunks::<16>().0.iter().zip(numbers.as_chunks::<16>().0);
            for (part, (words, numbers)) in parts.enumerate() {
                let keys = instruction!(_mm512_cvtepu8_epi32(_mm_loadu_si128(numbers.as_ptr().cast())));
                let limits = instruction!(_mm512_permutex2var_epi32(low, keys, high));
                let words = instruction!(_mm512_loadu_si512(words.as_ptr().cast()));
                hits |= u64::from(instruction!(_mm512_cmple_epu32_mask(words, limits))) << (16 * part);
            }
            if lines.some_never {
                let possible = self.look_up(lines, &lines.possible);
                hits &= instruction!(_mm512_test_epi8_mask(possible.0, possible.0));
            }
            Register(instruction!(_mm512_maskz_set1_epi8(hits, 1)))
        }

        #[inline(always)]
        fn look_up(self, _: &Lines, column: &[u8; WIDTH]) -> Self {
            Register(instruction!(_mm512_permutexvar_epi8(self.0, Self::load(column).0)))
        }

        #[inline(always)]
        fn where_one(self, ones: Self) -> Self {
            let mask = instruction!(_mm512_test_epi8_mask(ones.0, ones.0));
            self.only(mask)
        }

        #[inline(always)]
        fn add_to(self, total: Self) -> Self {
            let sums = instruction!(_mm512_sad_epu8(self.0, _mm512_setzero_si512()));
            Register(instruction!(_mm512_add_epi64(total.0, sums)))
        }

        #[inline(always)]
        fn nothing() -> Self {
            Self::splat(0)
        }

        #[inline(always)]
        fn count(total: Self) -> u64 {
            instruction!(_mm512_reduce_add_epi64(total.0)).cast_unsigned()
        }
    }
}
