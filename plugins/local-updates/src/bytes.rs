//! 64 bytes at once: the states of 64 sites in a row, or of one site in 64 chains.

use crate::lines::Lines;
use spinledger_numerics::random::Halves;

/// Bytes that are worked on together.
pub(crate) const WIDTH: usize = 64;

/// The next half words: at least one, at most `most`.
#[inline(always)]
pub(crate) fn take<B: Bytes>(halves: &mut Halves, most: usize) -> &[u32] {
    if halves.is_used_up() {
        B::draw_ahead(halves);
    }
    halves.take(most)
}

/// 64 bytes.
pub(crate) trait Bytes: Copy {
    /// A sum over bytes in the making.
    type Total: Copy;

    /// [`Halves::draw_ahead`], by registers of this kind.
    fn draw_ahead(halves: &mut Halves);
    fn load(bytes: &[u8; WIDTH]) -> Self;
    fn store(self, bytes: &mut [u8; WIDTH]);
    /// The same byte everywhere.
    fn splat(byte: u8) -> Self;
    /// Sum, modulo 256.
    fn plus(self, other: Self) -> Self;
    fn xor(self, other: Self) -> Self;
    fn and(self, other: Self) -> Self;
    /// Zero where the mask has no bit.
    fn only(self, mask: u64) -> Self;
    /// These are numbers of lines: 1 where the word is below the line's limit, else 0.
    fn hits(self, lines: &Lines, words: &[u32; WIDTH]) -> Self;
    /// These are numbers of lines: what a column has there.
    fn look_up(self, lines: &Lines, column: &[u8; WIDTH]) -> Self;
    /// Zero where the other, 0 or 1, is 0.
    fn where_one(self, ones: Self) -> Self;
    /// No sum yet.
    fn nothing() -> Self::Total;
    /// Adds all bytes to a sum.
    fn add_to(self, total: Self::Total) -> Self::Total;
    /// The sum.
    fn count(total: Self::Total) -> u64;
}

/// Without naming instructions; compilers make vectors of it.
#[derive(Clone, Copy)]
pub(crate) struct Plain([u8; WIDTH]);

impl Plain {
    #[inline(always)]
    fn with(self, other: Self, f: impl Fn(u8, u8) -> u8) -> Self {
        let mut out = self.0;
        for (byte, other) in out.iter_mut().zip(&other.0) {
            *byte = f(*byte, *other);
        }
        Plain(out)
    }
}

impl Bytes for Plain {
    type Total = u64;

    #[inline(always)]
    fn draw_ahead(halves: &mut Halves) {
        halves.draw_ahead::<2>();
    }

    #[inline(always)]
    fn load(bytes: &[u8; WIDTH]) -> Self {
        Plain(*bytes)
    }

    #[inline(always)]
    fn store(self, bytes: &mut [u8; WIDTH]) {
        *bytes = self.0;
    }

    #[inline(always)]
    fn splat(byte: u8) -> Self {
        Plain([byte; WIDTH])
    }

    #[inline(always)]
    fn plus(self, other: Self) -> Self {
        self.with(other, u8::wrapping_add)
    }

    #[inline(always)]
    fn xor(self, other: Self) -> Self {
        self.with(other, |a, b| a ^ b)
    }

    #[inline(always)]
    fn and(self, other: Self) -> Self {
        self.with(other, |a, b| a & b)
    }

    #[inline(always)]
    fn only(self, mask: u64) -> Self {
        let mut out = self.0;
        for (place, byte) in out.iter_mut().enumerate() {
            *byte &= ((mask >> place & 1) as u8).wrapping_neg();
        }
        Plain(out)
    }

    /// Counts the limits at or below the word, then compares with where the line's limit stands among them: comparisons with constants, which
    /// need no look-up by word.
    #[inline(always)]
    fn hits(self, lines: &Lines, words: &[u32; WIDTH]) -> Self {
        let mut ranks = [0; WIDTH];
        for (ranks, words) in ranks.as_chunks_mut::<16>().0.iter_mut().zip(words.as_chunks::<16>().0) {
            let mut wide = [0_u32; 16];
            for limit in lines.sorted() {
                for (rank, word) in wide.iter_mut().zip(words) {
                    *rank += u32::from(word >= limit);
                }
            }
            for (rank, wide) in ranks.iter_mut().zip(wide) {
                *rank = wide as u8;
            }
        }
        self.look_up(lines, &lines.rank).with(Plain(ranks), |above, rank| u8::from(rank < above))
    }

    /// Looks at each line in turn: for a table as short as these the shortest way without instructions for it.
    #[inline(always)]
    fn look_up(self, lines: &Lines, column: &[u8; WIDTH]) -> Self {
        let mut out = [0; WIDTH];
        for (line, entry) in column[..lines.count].iter().enumerate() {
            for (out, number) in out.iter_mut().zip(&self.0) {
                *out |= u8::from(*number == line as u8).wrapping_neg() & entry;
            }
        }
        Plain(out)
    }

    #[inline(always)]
    fn where_one(self, ones: Self) -> Self {
        self.with(ones, |byte, one| byte & one.wrapping_neg())
    }

    #[inline(always)]
    fn nothing() -> u64 {
        0
    }

    #[inline(always)]
    fn add_to(self, total: u64) -> u64 {
        // 64 bytes add up to less than 2^16.
        total + u64::from(self.0.iter().map(|byte| u16::from(*byte)).sum::<u16>())
    }

    #[inline(always)]
    fn count(total: u64) -> u64 {
        total
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::kind::Kind;
    use crate::rule::{Entry, below};
    use crate::simd::{Level, Work};

    struct Looks<'l>(&'l Lines, [u8; WIDTH], [u32; WIDTH]);

    impl Work for Looks<'_> {
        type Output = [[u8; WIDTH]; 2];

        #[inline(always)]
        fn run<B: Bytes>(self) -> Self::Output {
            let Looks(lines, numbers, words) = self;
            let mut out = [[0; WIDTH]; 2];
            let numbers = B::load(&numbers);
            numbers.hits(lines, &words).store(&mut out[0]);
            numbers.look_up(lines, &lines.small).store(&mut out[1]);
            out
        }
    }

    /// Words at limits and beside them, which random ones hardly ever are; tables of all lengths, with limits that are never or always met.
    #[test]
    fn words_at_limits_are_decided_alike() {
        let limits = [0, 1, 2, 1 << 31, (1 << 31) + 1, (1 << 32) - 1, 1 << 32, 0x1234_5678];
        let words =
            [0, 1, 2, 3, 0x7fff_ffff, 0x8000_0000, 0x8000_0001, 0xffff_fffe, 0xffff_ffff, 0x1234_5677, 0x1234_5678];
        for count in [2, 10, 16, 18, 26, 32] {
            for turn in 0..limits.len() {
                let entry = |line: usize| Entry { limit: limits[(line + turn) % 8], change: line as f64 - 7.0 };
                let table: Vec<Entry> = (0..count).map(entry).collect();
                let kind = Kind { width: count / 2, keys: Vec::new(), plain: true, lines: 2, table };
                let lines = Lines::new(&kind, 1.0).expect("a table that fits");
                for start in 0..count * words.len() {
                    let numbers = std::array::from_fn(|place| ((start + place) % count) as u8);
                    let words: [u32; WIDTH] = std::array::from_fn(|place| words[(start / count + place) % words.len()]);
                    let expected: [[u8; WIDTH]; 2] = [
                        std::array::from_fn(|place| below(words[place], kind.table[numbers[place] as usize].limit)),
                        std::array::from_fn(|place| lines.small[numbers[place] as usize]),
                    ];
                    for level in Level::ALL.into_iter().filter(|level| level.is_there()) {
                        assert_eq!(level.run(Looks(&lines, numbers, words)), expected, "{level:?}, {count} lines");
                    }
                }
            }
        }
    }
}
