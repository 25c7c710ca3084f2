//! Bits counted lane by lane.

use crate::simd::Work;
use crate::word::{LANES, Vector, Word};

/// Most digits of a count: numbers of vectors and pairs have 32 bits.
const MOST_DIGITS: usize = 32;
/// Digits of most counts: less to be cleared.
const FEW_DIGITS: usize = 12;

/// How many of some vectors have the bit of each lane: digits across lanes, the least significant first.
#[derive(Clone, Debug)]
pub(crate) struct Counts(Vec<Vector>);

/// Adds up counts over lanes.
pub(crate) struct Sum<'a>(pub(crate) &'a Counts);

impl Work for Sum<'_> {
    type Output = u64;

    /// Whatever the register: compilers see what to do with the loops.
    #[inline(always)]
    fn run<W: Word>(self) -> u64 {
        let ones = |vector: &Vector| vector.iter().map(|word| u64::from(word.count_ones())).sum::<u64>();
        self.0.0.iter().enumerate().map(|(place, vector)| ones(vector) << place).sum()
    }
}

/// Takes counts apart, lane by lane.
pub(crate) struct Lanes<'a>(pub(crate) &'a Counts);

impl Work for Lanes<'_> {
    type Output = Vec<u32>;

    /// As above.
    #[inline(always)]
    fn run<W: Word>(self) -> Vec<u32> {
        let mut counts = vec![0_u32; LANES];
        for (place, vector) in self.0.0.iter().enumerate() {
            let halves = vector.iter().flat_map(|word| [*word as u32, (word >> 32) as u32]);
            for (counts, half) in counts.as_chunks_mut::<32>().0.iter_mut().zip(halves) {
                for (lane, count) in counts.iter_mut().enumerate() {
                    *count |= (half >> lane & 1) << place;
                }
            }
        }
        counts
    }
}

/// Counts the states 1 of some vectors.
pub(crate) struct Ones<'a>(pub(crate) &'a [Vector]);

impl Work for Ones<'_> {
    type Output = Counts;

    #[inline(always)]
    fn run<W: Word>(self) -> Counts {
        count::<W>(self.0.len(), |number, part| W::load(&self.0[number], part))
    }
}

/// Counts the pairs that are not alike.
pub(crate) struct Unlike<'a> {
    pub(crate) vectors: &'a [Vector],
    pub(crate) pairs: &'a [[u32; 2]],
}

impl Work for Unlike<'_> {
    type Output = Counts;

    #[inline(always)]
    fn run<W: Word>(self) -> Counts {
        count::<W>(self.pairs.len(), |number, part| {
            let [a, b] = self.pairs[number].map(|vector| W::load(&self.vectors[vector as usize], part));
            a.xor(b)
        })
    }
}

/// Sum and carry of three.
#[inline(always)]
fn add<W: Word>(a: W, b: W, c: W) -> (W, W) {
    (a.xor3(b, c), a.majority(b, c))
}

/// Counts eight at a time (Harley & Seal; Warren 2012, Hacker's Delight, section 5-1), the eights pairwise, and so on: every full adder takes three of
/// equal weight, so that about one and an eighth of them serve each vector.
#[inline(always)]
fn count<W: Word>(vectors: usize, at: impl Fn(usize, usize) -> W) -> Counts {
    // Digits of the largest count there can be.
    let used = (usize::BITS - vectors.leading_zeros()) as usize;
    if used <= FEW_DIGITS {
        count_in::<W, FEW_DIGITS>(used, vectors, at)
    } else {
        count_in::<W, MOST_DIGITS>(used, vectors, at)
    }
}

#[inline(always)]
fn count_in<W: Word, const DIGITS: usize>(used: usize, vectors: usize, at: impl Fn(usize, usize) -> W) -> Counts {
    let mut counts = vec![[0; 8]; used];
    for part in 0..8 / W::WORDS {
        let mut digits = [W::splat(0); DIGITS];
        // A carry into each digit that waits for a second one.
        let mut waiting = [W::splat(0); DIGITS];
        let blocks = vectors / 8;
        let [mut ones, mut twos, mut fours] = [W::splat(0); 3];
        for block in 0..blocks {
            let next = |k: usize| at(8 * block + k, part);
            let (o, a) = add(ones, next(0), next(1));
            let (o, b) = add(o, next(2), next(3));
            let (t, c) = add(twos, a, b);
            let (o, a) = add(o, next(4), next(5));
            let (o, b) = add(o, next(6), next(7));
            let (t, d) = add(t, a, b);
            let (f, mut carry) = add(fours, c, d);
            (ones, twos, fours) = (o, t, f);
            let (mut place, mut done) = (3, block);
            while done % 2 == 1 {
                (digits[place], carry) = add(digits[place], waiting[place], carry);
                (place, done) = (place + 1, done / 2);
            }
            waiting[place] = carry;
        }
        digits[..3].copy_from_slice(&[ones, twos, fours]);
        let mut add_at = |first: usize, mut carry: W| {
            for digit in &mut digits[first..used.max(first)] {
                let next = digit.and(carry);
                *digit = digit.xor(carry);
                carry = next;
            }
        };
        (3..used).filter(|place| blocks >> (place - 3) & 1 == 1).for_each(|place| add_at(place, waiting[place]));
        (8 * blocks..vectors).for_each(|number| add_at(0, at(number, part)));
        digits[..used].iter().zip(&mut counts).for_each(|(digit, vector)| digit.store(vector, part));
    }
    Counts(counts)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::simd::Level;

    #[test]
    fn counts_are_those_of_the_bits() {
        let mut stream = spinledger_sdk::numerics::random::SplitMix::new(3);
        // Unequal densities, so that some lanes count far and others hardly.
        let vectors: Vec<Vector> = (0..5000)
            .map(|_| std::array::from_fn(|word| (0..word).fold(u64::MAX, |bits, _| bits & stream.next())))
            .collect();
        for count in [0, 1, 7, 8, 9, 16, 17, 24, 127, 128, 1000, 4095, 4096, 5000] {
            let some = &vectors[..count];
            let pairs: Vec<[u32; 2]> = (1..count as u32).map(|v| [v - 1, v]).collect();
            let lane = |vector: &Vector, lane: usize| vector[lane / 64] >> (lane % 64) & 1;
            let ones: Vec<u32> = (0..LANES).map(|l| some.iter().map(|v| lane(v, l)).sum::<u64>() as u32).collect();
            let unlike = |l: usize| some.windows(2).map(|v| lane(&v[0], l) ^ lane(&v[1], l)).sum::<u64>() as u32;
            let unlike: Vec<u32> = (0..LANES).map(unlike).collect();
            for level in Level::ALL.into_iter().filter(|level| level.is_there()) {
                let counted = level.run(Ones(some));
                assert_eq!(level.run(Lanes(&counted)), ones, "{count} {level:?}");
                assert_eq!(level.run(Sum(&counted)), ones.iter().map(|n| u64::from(*n)).sum::<u64>());
                let counted = level.run(Unlike { vectors: some, pairs: &pairs });
                assert_eq!(level.run(Lanes(&counted)), unlike, "{count} {level:?}");
            }
        }
    }
}
