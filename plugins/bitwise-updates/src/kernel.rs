//! Sweeps.
//!
//! For each vector: count the neighbours in state 1 in bits across lanes, find each lane's class, draw digits, compare, flip. `README.md` has the
//! formulas and the order of draws.

use crate::decision::Decision;
use crate::layout::Layout;
use crate::rare::Rare;
use crate::simd::Work;
use crate::turn::Copy;
use crate::word::{Vector, Word, draw};

/// What is decided alike: vectors with equally many neighbours.
#[derive(Clone, Debug)]
pub(crate) struct Kind {
    pub(crate) decision: Decision,
    pub(crate) rare: Rare,
}

/// Some sweeps of a layout.
pub(crate) struct Sweeps<'a> {
    pub(crate) layout: &'a Layout,
    /// By number of neighbours.
    pub(crate) kinds: &'a mut [Option<Kind>],
    /// Like neighbours break bonds.
    pub(crate) opposed: bool,
    /// Free and pinned vectors, then copies.
    pub(crate) vectors: &'a mut [Vector],
    /// State words of the eight generators.
    pub(crate) stream: &'a mut [Vector; 4],
    pub(crate) count: u64,
}

impl Work for Sweeps<'_> {
    type Output = ();

    #[inline(always)]
    fn run<W: Word>(self) {
        let Sweeps { layout, kinds, opposed, vectors, stream, count } = self;
        for _ in 0..count {
            for colour in &layout.colours {
                for run in &layout.runs[colour.runs.clone()] {
                    let Some(kind) = &mut kinds[run.degree] else { continue };
                    let mut stars = &layout.stars[run.stars.clone()];
                    let width = run.degree + 1;
                    while !stars.is_empty() {
                        let some = kind.rare.ready(stars.len() / width);
                        let (now, later) = stars.split_at(some * width);
                        let masks = kind.rare.take(some);
                        let visit = Visit { decision: &kind.decision, opposed, vectors, stream, stars: now, masks };
                        visit.run::<W>();
                        stars = later;
                    }
                }
                refresh(&layout.copies[colour.copies.clone()], layout.total + colour.copies.start, vectors);
            }
        }
    }
}

/// Makes copies anew, the first of which is vector `first`.
#[inline(always)]
pub(crate) fn refresh(copies: &[Copy], first: usize, vectors: &mut [Vector]) {
    for (number, copy) in (first..).zip(copies) {
        vectors[number] = copy.made(vectors);
    }
}

/// Visits of some vectors.
struct Visit<'a> {
    decision: &'a Decision,
    opposed: bool,
    vectors: &'a mut [Vector],
    stream: &'a mut [Vector; 4],
    /// Vectors with their neighbours.
    stars: &'a [u32],
    /// Rare events, a mask for each class and vector.
    masks: &'a [Vector],
}

impl Visit<'_> {
    #[inline(always)]
    fn run<W: Word>(self) {
        // Width of a star; unions of the first classes, and of the others. There are ceil(z/2) classes.
        match self.decision.degree {
            0 => self.each::<W, 1, 1, 1>(),
            1 => self.each::<W, 2, 2, 1>(),
            2 => self.each::<W, 3, 2, 1>(),
            3 => self.each::<W, 4, 4, 1>(),
            4 => self.each::<W, 5, 4, 1>(),
            5 => self.each::<W, 6, 8, 1>(),
            6 => self.each::<W, 7, 8, 1>(),
            7 => self.each::<W, 8, 4, 4>(),
            8 => self.each::<W, 9, 4, 4>(),
            9 => self.each::<W, 10, 8, 4>(),
            10 => self.each::<W, 11, 8, 4>(),
            11 => self.each::<W, 12, 8, 8>(),
            12 => self.each::<W, 13, 8, 8>(),
            more => unreachable!("{more} neighbours were refused"),
        }
    }

    #[inline(always)]
    fn each<W: Word, const WIDTH: usize, const LOW: usize, const HIGH: usize>(self) {
        if self.decision.soft {
            self.visit::<W, WIDTH, LOW, HIGH, true>();
        } else {
            self.visit::<W, WIDTH, LOW, HIGH, false>();
        }
    }

    #[inline(always)]
    fn visit<W: Word, const WIDTH: usize, const LOW: usize, const HIGH: usize, const SOFT: bool>(self) {
        let classes = (LOW * HIGH).trailing_zeros() as usize;
        let (stars, _) = self.stars.as_chunks::<WIDTH>();
        // Ties look at the last three digits, so that these stand alone.
        let Some((low, top)) = self.decision.digits.split_last_chunk::<3>() else { return };
        let opposed = W::splat(if self.opposed { u64::MAX } else { 0 });
        for part in 0..8 / W::WORDS {
            let mut stream: [W; 4] = std::array::from_fn(|word| W::load(&self.stream[word], part));
            for (number, star) in stars.iter().enumerate() {
                let seen = Surroundings::<W>::new::<WIDTH>(star, self.vectors, part);
                // Digits choose among unions of classes.
                let first = seen.unions::<WIDTH, LOW>(0);
                let others = seen.unions::<WIDTH, HIGH>(LOW.trailing_zeros() as usize);
                let chosen = |digit: &u8| {
                    let digit = *digit as usize;
                    let chosen = first[digit % LOW];
                    if HIGH > 1 { chosen.or(others[digit / LOW % HIGH]) } else { chosen }
                };
                let mut flips = W::splat(0);
                for digit in low {
                    let random = draw(&mut stream);
                    flips = flips.majority(random, chosen(digit));
                }
                let mut random = [W::splat(0); 3];
                for (random, digit) in random.iter_mut().zip(top) {
                    *random = draw(&mut stream);
                    flips = flips.majority(*random, chosen(digit));
                }
                for class in 0..classes {
                    let mask = W::load(&self.masks[number * classes + class], part);
                    flips = flips.or(mask.and(chosen(&(1 << class))));
                }
                let centre = &mut self.vectors[star[0] as usize];
                let spins = W::load(centre, part);
                let mut downhill = seen.most::<WIDTH>().xor3(spins, opposed);
                let mut ties = W::splat(0);
                if WIDTH % 2 == 1 {
                    let tie = seen.is::<WIDTH>((WIDTH - 1) / 2);
                    downhill = downhill.without(tie);
                    let [third, second, first] = random;
                    ties = tie.and(if SOFT { first } else { first.or(second).or(third) });
                }
                let flips = if SOFT { flips.xor(downhill) } else { flips.or(downhill) };
                spins.xor(flips.or(ties)).store(centre, part);
            }
            for (word, state) in stream.into_iter().zip(self.stream.iter_mut()) {
                word.store(state, part);
            }
        }
    }
}

/// The number of neighbours in state 1, in binary across lanes.
struct Surroundings<W>([W; 4]);

impl<W: Word> Surroundings<W> {
    /// Counts the neighbours of a star.
    #[inline(always)]
    fn new<const WIDTH: usize>(star: &[u32; WIDTH], vectors: &[Vector], part: usize) -> Self {
        let at = |place: usize| W::load(&vectors[star[place] as usize], part);
        let mut sum = [W::splat(0); 4];
        let mut place = 1;
        while place < WIDTH {
            // Two at a time: a full adder, whose carry runs up.
            let (a, b) = (at(place), if place + 1 < WIDTH { at(place + 1) } else { W::splat(0) });
            let mut carry = sum[0].majority(a, b);
            sum[0] = sum[0].xor3(a, b);
            for digit in &mut sum[1..] {
                let next = digit.and(carry);
                *digit = digit.xor(carry);
                carry = next;
            }
            place += 2;
        }
        Surroundings(sum)
    }

    /// Lanes in which the number is this one.
    #[inline(always)]
    fn is<const WIDTH: usize>(&self, number: usize) -> W {
        let mut lanes = W::splat(u64::MAX);
        for (place, digit) in self.0.iter().enumerate().take((usize::BITS - (WIDTH - 1).leading_zeros()) as usize) {
            lanes = if number >> place & 1 == 1 { lanes.and(*digit) } else { lanes.without(*digit) };
        }
        lanes
    }

    /// All unions of log2(N) classes m < z/2 from `first` on. Lanes of a class have m of the z neighbours in one state and the others in the other.
    #[inline(always)]
    fn unions<const WIDTH: usize, const N: usize>(&self, first: usize) -> [W; N] {
        let mut unions = [W::splat(0); N];
        for place in 0..N.trailing_zeros() as usize {
            let class = first + place;
            let lanes = self.is::<WIDTH>(class).or(self.is::<WIDTH>(WIDTH - 1 - class));
            for below in 0..1 << place {
                unions[1 << place | below] = unions[below].or(lanes);
            }
        }
        unions
    }

    /// Lanes in which more than half of the neighbours are in state 1: the number is compared with the least such number, digit by digit.
    #[inline(always)]
    fn most<const WIDTH: usize>(&self) -> W {
        let least = (WIDTH - 1) / 2 + 1;
        let mut lanes = W::splat(u64::MAX);
        for (place, digit) in self.0.iter().enumerate() {
            lanes = if least >> place & 1 == 1 { lanes.and(*digit) } else { lanes.or(*digit) };
        }
        lanes
    }
}
