//! Sweeps of one chain of two states, 64 visits at once.
//!
//! Within a colour no visit reads what another writes, so that 64 visits may read before any of them writes. Draws are taken in order of visits.
//! Energies are counted in whole units, which may be added in any order (`lines.rs`).

use crate::bytes::{Bytes, WIDTH, take};
use crate::lines::Lines;
use crate::plan::Plan;
use crate::rule::Rule;
use crate::simd::Work;
use crate::source::Source;
use crate::stretches::{Patch, Piece, Stretch, Stretches, Visits};
use crate::two::{self, Outcome};
use std::marker::PhantomData;

/// One sweep.
pub(crate) struct Sweep<'s, R> {
    pub(crate) plan: &'s Plan,
    pub(crate) stretches: &'s Stretches,
    /// Of each kind that is in a stretch.
    pub(crate) lines: &'s [Option<Lines>],
    pub(crate) unit: f64,
    /// What is added to each change, in units.
    pub(crate) bias: i64,
    pub(crate) states: &'s mut [u8],
    pub(crate) source: &'s mut Source,
    pub(crate) rule: PhantomData<R>,
}

/// What visits in vectors changed.
#[derive(Clone, Copy)]
struct Sums<B: Bytes> {
    flips: B::Total,
    /// In units, with the bias for each flip.
    change: B::Total,
}

impl<B: Bytes> Sums<B> {
    #[inline(always)]
    fn add(&mut self, flips: Flips<B>) {
        self.flips = flips.ones.add_to(self.flips);
        self.change = flips.change.add_to(self.change);
    }
}

impl<R: Rule> Work for Sweep<'_, R> {
    type Output = Outcome;

    #[inline(always)]
    fn run<B: Bytes>(mut self) -> Outcome {
        let mut sums: Sums<B> = Sums { flips: B::nothing(), change: B::nothing() };
        let mut singles = Outcome::default();
        let stretches = self.stretches;
        for piece in &stretches.pieces {
            match piece {
                Piece::Single(visits) => self.single::<B>(*visits, &mut singles),
                Piece::Alike(stretch) => {
                    let Some(lines) = &self.lines[stretch.kind as usize] else { continue };
                    match stretch.starts.len() {
                        2 => self.stretch::<B, 2>(stretch, lines, &mut sums, &mut singles),
                        3 => self.stretch::<B, 3>(stretch, lines, &mut sums, &mut singles),
                        4 => self.stretch::<B, 4>(stretch, lines, &mut sums, &mut singles),
                        6 => self.stretch::<B, 6>(stretch, lines, &mut sums, &mut singles),
                        8 => self.stretch::<B, 8>(stretch, lines, &mut sums, &mut singles),
                        12 => self.stretch::<B, 12>(stretch, lines, &mut sums, &mut singles),
                        _ => {}
                    }
                }
            }
        }
        let flips = B::count(sums.flips);
        let units = B::count(sums.change).cast_signed() - self.bias * flips.cast_signed();
        Outcome { flips: flips + singles.flips, change: units as f64 * self.unit + singles.change }
    }
}

/// Numbers of neighbours for which there are loops.
pub(crate) fn is_usual(neighbours: usize) -> bool {
    [2, 3, 4, 6, 8, 12].contains(&neighbours)
}

impl<R: Rule> Sweep<'_, R> {
    #[inline(always)]
    fn single<B: Bytes>(&mut self, visits: Visits, outcome: &mut Outcome) {
        let kind = &self.plan.kinds[visits.kind as usize];
        let mut rest = &self.plan.stars[visits.stars..][..visits.count * kind.width];
        while !rest.is_empty() {
            let words = take::<B>(&mut self.source.words, rest.len() / kind.width);
            let (part, later) = rest.split_at(words.len() * kind.width);
            add(outcome, two::visit::<R>(kind, part, words, self.states));
            rest = later;
        }
    }

    #[inline(always)]
    fn stretch<B: Bytes, const NEIGHBOURS: usize>(
        &mut self,
        stretch: &Stretch,
        lines: &Lines,
        sums: &mut Sums<B>,
        singles: &mut Outcome,
    ) {
        let starts: &[i64; NEIGHBOURS] = match self.stretches.starts[stretch.starts.clone()].first_chunk() {
            Some(starts) => starts,
            None => return,
        };
        let mut patches = &self.stretches.patches[stretch.patches.clone()];
        let mut done = 0;
        while done < stretch.count {
            let words = take::<B>(&mut self.source.words, stretch.count - done);
            let (mut blocks, tail) = words.as_chunks::<WIDTH>();
            while let [block, later @ ..] = blocks {
                let until = patches.first().map_or(stretch.count, |patch| patch.visit);
                // As many at once as bytes hold the sums of.
                let whole = blocks.len().min((until - done) / WIDTH).min(lines.room);
                if whole > 0 {
                    let (these, later) = blocks.split_at(whole);
                    let mut sum = Flips { ones: B::splat(0), change: B::splat(0) };
                    for block in these {
                        let all = u64::MAX;
                        let flips = visit::<R, B, NEIGHBOURS>(stretch, starts, lines, done, all, block, self.states);
                        sum = Flips { ones: sum.ones.plus(flips.ones), change: sum.change.plus(flips.change) };
                        done += WIDTH;
                    }
                    sums.add(sum);
                    blocks = later;
                    continue;
                }
                blocks = later;
                let here = upto(&mut patches, done + WIDTH);
                let mask = mask(here, done);
                sums.add(visit::<R, B, NEIGHBOURS>(stretch, starts, lines, done, mask, block, self.states));
                if !here.is_empty() {
                    patch::<R>(self.plan, here, done, block, self.states, singles);
                }
                done += WIDTH;
            }
            if !tail.is_empty() {
                let mut block = [0; WIDTH];
                block[..tail.len()].copy_from_slice(tail);
                let here = upto(&mut patches, done + tail.len());
                let mask = mask(here, done) & !(u64::MAX << tail.len());
                sums.add(visit::<R, B, NEIGHBOURS>(stretch, starts, lines, done, mask, &block, self.states));
                patch::<R>(self.plan, here, done, &block, self.states, singles);
                done += tail.len();
            }
        }
    }
}

/// Bits of the visits from `done` on that are not patches.
#[inline(always)]
fn mask(patches: &[Patch], done: usize) -> u64 {
    patches.iter().fold(u64::MAX, |mask, patch| mask & !(1 << (patch.visit - done)))
}

/// Takes the patches before a visit from the front.
#[inline(always)]
fn upto<'p>(patches: &mut &'p [Patch], end: usize) -> &'p [Patch] {
    let count = patches.iter().take_while(|patch| patch.visit < end).count();
    let (here, later) = patches.split_at(count);
    *patches = later;
    here
}

/// Visits of a stretch from `done` on, where the mask has a bit.
#[inline(always)]
fn visit<R: Rule, B: Bytes, const NEIGHBOURS: usize>(
    stretch: &Stretch,
    starts: &[i64; NEIGHBOURS],
    lines: &Lines,
    done: usize,
    mask: u64,
    words: &[u32; WIDTH],
    states: &mut [u8],
) -> Flips<B> {
    let nothing = Flips { ones: B::splat(0), change: B::splat(0) };
    // Without a bit there might be nothing where the neighbours would be.
    if mask == 0 {
        return nothing;
    }
    let mut code = B::splat(0);
    for start in starts {
        let from = (start + done as i64) as usize;
        if let Some(row) = states[from..].first_chunk() {
            code = code.plus(B::load(row));
        }
    }
    let Some(row) = states[stretch.first + done..].first_chunk_mut() else { return nothing };
    let state = B::load(row);
    let flips = flips::<R, B>(lines, code, state, words);
    let flips = if mask == u64::MAX { flips } else { flips.only(mask) };
    state.xor(flips.ones).store(row);
    flips
}

/// Which visits flip.
#[derive(Clone, Copy)]
struct Flips<B> {
    /// 1 or 0.
    ones: B,
    /// Change of energy in units with the bias, 0 where there is none.
    change: B,
}

impl<B: Bytes> Flips<B> {
    #[inline(always)]
    fn only(self, mask: u64) -> Self {
        Flips { ones: self.ones.only(mask), change: self.change.only(mask) }
    }
}

/// Decides 64 visits: number of neighbours in state 1, own state, words.
#[inline(always)]
fn flips<R: Rule, B: Bytes>(lines: &Lines, code: B, state: B, words: &[u32; WIDTH]) -> Flips<B> {
    let (line, ones) = decided::<R, B>(lines, code, state, words);
    Flips { ones, change: line.look_up(lines, &lines.small).where_one(ones) }
}

/// Numbers of lines, and 1 where the state changes, else 0.
#[inline(always)]
pub(crate) fn decided<R: Rule, B: Bytes>(lines: &Lines, code: B, state: B, words: &[u32; WIDTH]) -> (B, B) {
    let line = code.plus(code).plus(state);
    let hits = line.hits(lines, words);
    // The rule as a sum of bits: a, b times the state, and the hit.
    let a = R::toggled(0, 0);
    let b = R::toggled(1, 0) ^ 1 ^ a;
    (line, hits.xor(B::splat(a)).xor(state.and(B::splat(b))))
}

/// Visits of patches, one after the other.
fn patch<R: Rule>(
    plan: &Plan,
    patches: &[Patch],
    done: usize,
    words: &[u32; WIDTH],
    states: &mut [u8],
    outcome: &mut Outcome,
) {
    for Patch { visit, single } in patches {
        let kind = &plan.kinds[single.kind as usize];
        let star = &plan.stars[single.stars..][..kind.width];
        two::visit_one::<R>(kind, star, words[visit - done], states, outcome);
    }
}

fn add(outcome: &mut Outcome, more: Outcome) {
    outcome.flips += more.flips;
    outcome.change += more.change;
}
