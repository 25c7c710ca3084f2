//! Visits in 64 chains at once: the states of a site side by side are a vector already.
//!
//! Energies of a run are counted in whole units: their sum is exact, and so the same as that of additions one after the other.

use crate::bytes::{Bytes, WIDTH};
use crate::lines::Lines;
use crate::rule::Rule;
use crate::simd::Work;
use crate::source::Source;
use crate::two::Outcome;
use crate::vector::decided;
use std::marker::PhantomData;

/// Visits of one kind, in all chains.
pub(crate) struct Together<'s, R> {
    pub(crate) lines: &'s Lines,
    pub(crate) unit: f64,
    /// Sites of a star.
    pub(crate) width: usize,
    pub(crate) stars: &'s [u32],
    pub(crate) states: &'s mut [u8],
    pub(crate) source: &'s mut Source,
    pub(crate) rule: PhantomData<R>,
}

impl<R: Rule> Work for Together<'_, R> {
    type Output = [Outcome; WIDTH];

    #[inline(always)]
    fn run<B: Bytes>(self) -> [Outcome; WIDTH] {
        let Together { lines, unit, width, stars, states, source, .. } = self;
        let (rows, _) = states.as_chunks_mut::<WIDTH>();
        let (mut flips, mut change) = ([0_u64; WIDTH], [0_u64; WIDTH]);
        for stars in stars.chunks(lines.room * width) {
            // As many visits as bytes hold the sums of.
            let (mut ones, mut units) = (B::splat(0), B::splat(0));
            for star in stars.chunks_exact(width) {
                if source.words.is_used_up() {
                    B::draw_ahead(&mut source.words);
                }
                // Draws come in multiples of 64 for two states, so that a row never crosses the end of the words drawn ahead.
                let Some(words) = source.side_by_side() else { continue };
                let mut code = B::splat(0);
                for neighbour in &star[1..] {
                    code = code.plus(B::load(&rows[*neighbour as usize]));
                }
                let row = &mut rows[star[0] as usize];
                let state = B::load(row);
                let (line, flipped) = decided::<R, B>(lines, code, state, words);
                state.xor(flipped).store(row);
                ones = ones.plus(flipped);
                units = units.plus(line.look_up(lines, &lines.small).where_one(flipped));
            }
            add(ones, &mut flips);
            add(units, &mut change);
        }
        std::array::from_fn(|lane| {
            let biased = change[lane].cast_signed() - lines.small_bias * flips[lane].cast_signed();
            Outcome { flips: flips[lane], change: biased as f64 * unit }
        })
    }
}

#[inline(always)]
fn add<B: Bytes>(bytes: B, sums: &mut [u64; WIDTH]) {
    let mut row = [0; WIDTH];
    bytes.store(&mut row);
    sums.iter_mut().zip(row).for_each(|(sum, byte)| *sum += u64::from(byte));
}
