//! Two states from a table, without branches.
//!
//! Within a colour no visit reads what another writes, so that the processor may overlap them; the words come in bulk.

use crate::group::LANES_TOGETHER;
use crate::kind::Kind;
use crate::rule::{Entry, Rule, below, only_if};

/// What some visits changed.
#[derive(Clone, Copy, Debug, Default)]
pub(crate) struct Outcome {
    /// Spins that flipped.
    pub(crate) flips: u64,
    /// Change of energy.
    pub(crate) change: f64,
}

/// Visits the sites of these stars in one chain, a word each.
pub(crate) fn visit<R: Rule>(kind: &Kind, stars: &[u32], words: &[u32], states: &mut [u8]) -> Outcome {
    // The usual coordination numbers get loops of known length.
    match (kind.plain, kind.width - 1) {
        (true, 2) => plain::<R, 3>(&kind.table, stars, words, states),
        (true, 3) => plain::<R, 4>(&kind.table, stars, words, states),
        (true, 4) => plain::<R, 5>(&kind.table, stars, words, states),
        (true, 6) => plain::<R, 7>(&kind.table, stars, words, states),
        (true, 8) => plain::<R, 9>(&kind.table, stars, words, states),
        (true, 12) => plain::<R, 13>(&kind.table, stars, words, states),
        _ => weighted::<R>(kind, stars, words, states),
    }
}

/// Visits the site of one star.
#[inline]
pub(crate) fn visit_one<R: Rule>(kind: &Kind, star: &[u32], word: u32, states: &mut [u8], outcome: &mut Outcome) {
    let around = star[1..].iter().map(|n| states[*n as usize]);
    let code = if kind.plain { around.map(usize::from).sum() } else { kind.code(2, around) };
    step::<R>(&kind.table, code, star[0], word, states, outcome);
}

fn plain<R: Rule, const WIDTH: usize>(table: &[Entry], stars: &[u32], words: &[u32], states: &mut [u8]) -> Outcome {
    let mut outcome = Outcome::default();
    for (star, &word) in stars.as_chunks::<WIDTH>().0.iter().zip(words) {
        let code: usize = star[1..].iter().map(|n| states[*n as usize] as usize).sum();
        step::<R>(table, code, star[0], word, states, &mut outcome);
    }
    outcome
}

fn weighted<R: Rule>(kind: &Kind, stars: &[u32], words: &[u32], states: &mut [u8]) -> Outcome {
    let mut outcome = Outcome::default();
    for (star, &word) in stars.chunks_exact(kind.width).zip(words) {
        let code = kind.code(2, star[1..].iter().map(|n| states[*n as usize]));
        step::<R>(&kind.table, code, star[0], word, states, &mut outcome);
    }
    outcome
}

#[inline(always)]
fn step<R: Rule>(table: &[Entry], code: usize, site: u32, word: u32, states: &mut [u8], outcome: &mut Outcome) {
    let state = &mut states[site as usize];
    let line = &table[2 * code + *state as usize];
    let next = R::toggled(*state, below(word, line.limit));
    let flipped = next ^ *state;
    outcome.flips += u64::from(flipped);
    outcome.change += only_if(flipped, line.change);
    *state = next;
}

/// Visits the site of a star in 64 chains, a word each.
pub(crate) fn visit_together<R: Rule>(
    kind: &Kind,
    star: &[u32],
    words: &[u32; LANES_TOGETHER],
    states: &mut [u8],
    outcomes: &mut [Outcome; LANES_TOGETHER],
) {
    // Codes are below the size of a table, which 16 bits hold.
    let mut codes = [0_u16; LANES_TOGETHER];
    let (rows, _) = states.as_chunks_mut::<LANES_TOGETHER>();
    for (neighbour, key) in star[1..].iter().zip(kind.keys.as_chunks::<2>().0) {
        let weight = key[1] as u16;
        for (code, state) in codes.iter_mut().zip(&rows[*neighbour as usize]) {
            *code += weight * u16::from(*state);
        }
    }
    let row = &mut rows[star[0] as usize];
    for lane in 0..LANES_TOGETHER {
        let state = row[lane];
        let line = &kind.table[2 * codes[lane] as usize + state as usize];
        let next = R::toggled(state, below(words[lane], line.limit));
        let flipped = next ^ state;
        outcomes[lane].flips += u64::from(flipped);
        outcomes[lane].change += only_if(flipped, line.change);
        row[lane] = next;
    }
}
