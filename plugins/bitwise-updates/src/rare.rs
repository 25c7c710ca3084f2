//! Rare events: what the digits of a probability leave out.
//!
//! Where the digits say no, a spin of class m still flips with the small probability r_m. Events strike lanes at the largest of these, r, and
//! serve class m with probability r_m/r. They are drawn for [`CHUNK`] vectors at a time: how many (binomial), where (distinct places, uniform),
//! and a number that says which classes they serve.

use crate::word::{LANES, Vector};
use spinledger_numerics::random::{StreamKey, Xoshiro, unit_f64};
use spinledger_sdk::{Error, Result};

/// Vectors for which events are drawn at once.
pub(crate) const CHUNK: usize = 64;
/// Lanes of that many vectors, a power of two.
const PLACES: usize = CHUNK * LANES;
/// Bits of a word that name a place.
const PLACE_BITS: u32 = PLACES.trailing_zeros();
/// Bits of a word that are left to choose classes.
const CHOICE_BITS: u32 = u64::BITS - PLACE_BITS;
/// Entries of the guide into the table of the binomial distribution.
const GUIDE: usize = 256;

/// Masks of rare events, chunk after chunk.
#[derive(Clone, Debug)]
pub(crate) struct Rare {
    /// Cumulative binomial distribution; ends in a number above 1. Empty where there are no events.
    cumulative: Vec<f64>,
    /// Where to begin looking, by the first eight bits of the number looked for.
    guide: Vec<u16>,
    /// Events whose choice is below serve the class.
    limits: Vec<u64>,
    stream: Xoshiro,
    /// The stream before the chunk was drawn: the masks are drawn anew from it when a state is restored.
    before: Xoshiro,
    /// Mask of class m for vector v of the chunk at v times the number of classes + m.
    masks: Vec<Vector>,
    /// The class of the largest rate.
    fullest: usize,
    /// Vectors of the chunk that are done with.
    used: usize,
}

impl Rare {
    /// Events for classes with these probabilities.
    pub(crate) fn new(left: &[f64], key: &StreamKey) -> Self {
        let largest = left.iter().copied().fold(0.0, f64::max);
        let cumulative = if largest > 0.0 { binomial(largest) } else { Vec::new() };
        let start = |k: usize| cumulative.partition_point(|c| *c <= k as f64 / GUIDE as f64) as u16;
        let guide = if cumulative.is_empty() { Vec::new() } else { (0..GUIDE).map(start).collect() };
        let unit = (1_u64 << CHOICE_BITS) as f64;
        let limits = left.iter().map(|r| if *r > 0.0 { (r / largest * unit).round() as u64 } else { 0 }).collect();
        let stream = Xoshiro::from_key(key);
        Rare {
            guide,
            limits,
            before: stream.clone(),
            stream,
            masks: vec![[0; 8]; CHUNK * left.len()],
            fullest: left.iter().position(|r| *r == largest).unwrap_or(0),
            cumulative,
            used: CHUNK,
        }
    }

    /// How many of `wanted` vectors the chunk still serves, at least one; the masks of these follow by [`Rare::take`].
    pub(crate) fn ready(&mut self, wanted: usize) -> usize {
        if self.used == CHUNK {
            self.before = self.stream.clone();
            self.draw();
            self.used = 0;
        }
        wanted.min(CHUNK - self.used)
    }

    /// The masks of the next vectors, those of a vector side by side.
    pub(crate) fn take(&mut self, count: usize) -> &[Vector] {
        let masks = &self.masks[self.used * self.limits.len()..(self.used + count) * self.limits.len()];
        self.used += count;
        masks
    }

    /// Draws a chunk.
    fn draw(&mut self) {
        match self.limits.len() {
            1 => self.draw_for::<1>(),
            2 => self.draw_for::<2>(),
            3 => self.draw_for::<3>(),
            4 => self.draw_for::<4>(),
            5 => self.draw_for::<5>(),
            6 => self.draw_for::<6>(),
            _ => {}
        }
    }

    /// No branch depends on a single event, since none could be predicted.
    #[inline(never)]
    fn draw_for<const CLASSES: usize>(&mut self) {
        let (Some(limits), false) = (self.limits.first_chunk::<CLASSES>(), self.cumulative.is_empty()) else { return };
        self.masks.fill([0; 8]);
        let number = unit_f64(self.stream.next());
        let mut events = self.guide[(number * GUIDE as f64) as usize] as usize;
        while self.cumulative[events] <= number {
            events += 1;
        }
        let words = self.masks.as_flattened_mut();
        while events > 0 {
            let word = self.stream.next();
            let (place, choice) = (word as usize % PLACES, word >> PLACE_BITS);
            let places = &mut words[8 * CLASSES * (place / LANES) + place % LANES / 64..][..8 * (CLASSES - 1) + 1];
            let bit = 1 << (place % 64);
            // All events serve the class of the largest rate: its mask tells which places are taken.
            let new = u64::from(places[8 * self.fullest] & bit == 0);
            for (class, limit) in limits.iter().enumerate() {
                places[8 * class] |= (new & u64::from(choice < *limit)) << (place % 64);
            }
            events -= new as usize;
        }
    }

    /// Bytes that [`Rare::save`] appends.
    pub(crate) const SAVED: usize = 40;

    /// Appends the state: the stream before the chunk (where the chunk is used up, after it), four words, and how many of its vectors are used.
    pub(crate) fn save(&self, out: &mut Vec<u8>) {
        let stream = if self.used == CHUNK { &self.stream } else { &self.before };
        stream.state().iter().for_each(|word| out.extend_from_slice(&word.to_le_bytes()));
        out.extend_from_slice(&(self.used as u64).to_le_bytes());
    }

    /// Takes back what [`Rare::save`] wrote.
    ///
    /// # Errors
    /// Where the bytes do not fit.
    pub(crate) fn restore(&mut self, bytes: &[u8]) -> Result<()> {
        let wrong = || Error::new("the saved stream of rare events cannot be read");
        let bytes: &[u8; Self::SAVED] = bytes.try_into().map_err(|_| wrong())?;
        let [s0, s1, s2, s3, used] = [0, 1, 2, 3, 4].map(|k| u64::from_le_bytes(bytes.as_chunks::<8>().0[k]));
        let used = usize::try_from(used).ok().filter(|used| *used <= CHUNK).ok_or_else(wrong)?;
        self.stream = Xoshiro::from_state([s0, s1, s2, s3]);
        self.before = self.stream.clone();
        if used < CHUNK {
            self.draw();
        }
        self.used = used;
        Ok(())
    }
}

/// Cumulative probabilities of 0, 1, 2 ... events at [`PLACES`] places, up to where 53 bits see no more of them; then a number above 1.
fn binomial(rate: f64) -> Vec<f64> {
    let mut term = power(1.0 - rate, PLACES);
    let odds = rate / (1.0 - rate);
    let (mut sum, mut out) = (0.0, Vec::new());
    for k in 0..PLACES {
        sum += term;
        out.push(sum);
        if k as f64 > rate * PLACES as f64 && term < 1e-19 {
            break;
        }
        term *= (PLACES - k) as f64 / (k + 1) as f64 * odds;
    }
    out.push(2.0);
    out
}

/// Products only, so that the bits are the same everywhere.
fn power(mut base: f64, mut exponent: usize) -> f64 {
    let mut product = 1.0;
    while exponent > 0 {
        if exponent % 2 == 1 {
            product *= base;
        }
        base *= base;
        exponent /= 2;
    }
    product
}
