//! Eight interleaved generators, for vector registers.

use std::convert::Infallible;
use std::{error, fmt};

use rand::TryRng;

use super::StreamKey;
use super::xoshiro::{REPLACEMENT, words};

/// Lanes, words in a block.
const LANES: usize = 8;

/// Lanes that are stepped together: what the narrowest vector registers hold.
const TOGETHER: usize = 2;

/// Bytes written by [`Eight::save`].
pub const SAVED_LEN: usize = 32 * LANES + 8 * LANES + 6;

/// Eight xoshiro256++ generators whose outputs interleave into one stream: word k is output k div 8 of lane k mod 8.
///
/// The state is held word by word over the lanes, so that one step of all lanes is a few vector operations; no
/// instruction set is named and the bits are the same with any. Mixing draws of one word, of blocks and of slices
/// reads one and the same stream.
#[derive(Clone)]
pub struct Eight {
    /// State word w of lane l is `state[w][l]`.
    state: [[u64; LANES]; 4],
    block: [u64; LANES],
    /// Words of `block` already drawn; 8 when the block is used up.
    drawn: usize,
    half: Option<u32>,
}

impl Eight {
    /// Name under which records speak of this generator.
    pub const NAME: &'static str = "xoshiro256++ x 8";
    /// Version of the way from a key to words; changes when any word would.
    pub const VERSION: u32 = 1;

    /// The generator of a key (rule 6 of the module's `README.md`).
    #[must_use]
    pub fn from_key(key: &StreamKey) -> Self {
        let mut bytes = [0; 32 * LANES];
        key.seed_bytes(&mut bytes);
        let mut state = [[0; LANES]; 4];
        for (lane, chunk) in bytes.as_chunks::<32>().0.iter().enumerate() {
            let mut words = words(chunk);
            if words == [0; 4] {
                words = REPLACEMENT;
            }
            for (row, word) in state.iter_mut().zip(words) {
                row[lane] = word;
            }
        }
        Self { state, block: [0; LANES], drawn: LANES, half: None }
    }

    /// State words of the eight generators, word w of lane l at `[w][l]`: for kernels that step them in registers of their own. None where
    /// words of a block, or a half word, were drawn and others of it wait.
    #[must_use]
    pub fn lanes(&self) -> Option<[[u64; LANES]; 4]> {
        (self.drawn == LANES && self.half.is_none()).then_some(self.state)
    }

    /// The stream that goes on from these state words: what [`Eight::lanes`] gave, stepped on by equal numbers of steps. A generator whose words
    /// are all zero, which none comes to be, would stay there.
    #[must_use]
    pub const fn from_lanes(state: [[u64; LANES]; 4]) -> Self {
        Self { state, block: [0; LANES], drawn: LANES, half: None }
    }

    /// One step of every lane.
    #[inline]
    fn step(&mut self) -> [u64; LANES] {
        let mut block = [[0; LANES]];
        self.steps::<TOGETHER>(&mut block);
        block[0]
    }

    /// Steps of every lane, a block each. Lane by lane through all blocks would be the same words; as many lanes as a register holds go through
    /// them together and stay in registers meanwhile.
    #[inline(always)]
    fn steps<const WIDTH: usize>(&mut self, blocks: &mut [[u64; LANES]]) {
        for first in (0..LANES).step_by(WIDTH) {
            let mut state: [[u64; WIDTH]; 4] =
                std::array::from_fn(|word| std::array::from_fn(|lane| self.state[word][first + lane]));
            for block in &mut *blocks {
                let [s0, s1, s2, s3] = &mut state;
                for lane in 0..WIDTH {
                    block[first + lane] = s0[lane].wrapping_add(s3[lane]).rotate_left(23).wrapping_add(s0[lane]);
                    let shifted = s1[lane] << 17;
                    s2[lane] ^= s0[lane];
                    s3[lane] ^= s1[lane];
                    s1[lane] ^= s2[lane];
                    s0[lane] ^= s3[lane];
                    s2[lane] ^= shifted;
                    s3[lane] = s3[lane].rotate_left(45);
                }
            }
            for (row, pair) in self.state.iter_mut().zip(state) {
                row[first..first + WIDTH].copy_from_slice(&pair);
            }
        }
    }

    /// The next word.
    #[expect(
        clippy::should_implement_trait,
        reason = "a stream has no end, so that an iterator would only add an Option"
    )]
    #[inline]
    pub fn next(&mut self) -> u64 {
        if self.drawn == LANES {
            self.block = self.step();
            self.drawn = 0;
        }
        let word = self.block[self.drawn];
        self.drawn += 1;
        word
    }

    /// The next eight words; fastest when the words drawn before are a multiple of eight.
    #[inline]
    pub fn next_block(&mut self) -> [u64; LANES] {
        if self.drawn == LANES {
            return self.step();
        }
        let next = self.step();
        let mut output = [0; LANES];
        for (index, word) in output.iter_mut().enumerate() {
            let from = self.drawn + index;
            *word = if from < LANES { self.block[from] } else { next[from - LANES] };
        }
        self.block = next;
        output
    }

    /// Fills a slice with the next words.
    pub fn fill(&mut self, words: &mut [u64]) {
        self.fill_wide::<TOGETHER>(words);
    }

    /// The same words, made by loops over `WIDTH` lanes (1, 2, 4 or 8). It is inlined, so that a caller that is compiled for wide registers gets
    /// them here too.
    #[inline(always)]
    pub fn fill_wide<const WIDTH: usize>(&mut self, words: &mut [u64]) {
        const { assert!(LANES.is_multiple_of(WIDTH), "lanes go together in equal parts") }
        let ahead = words.len().min((LANES - self.drawn) % LANES);
        let (head, rest) = words.split_at_mut(ahead);
        for word in head {
            *word = self.next();
        }
        let (blocks, tail) = rest.as_chunks_mut::<LANES>();
        if self.drawn == LANES {
            self.steps::<WIDTH>(blocks);
        } else {
            // Only where a whole block waits, or the slice has ended.
            blocks.iter_mut().for_each(|block| *block = self.next_block());
        }
        for word in tail {
            *word = self.next();
        }
    }

    /// The next half word: the low half of a word, then its high half.
    #[inline]
    pub fn next_u32(&mut self) -> u32 {
        if let Some(high) = self.half.take() {
            return high;
        }
        let word = self.next();
        self.half = Some((word >> 32) as u32);
        word as u32
    }

    /// Fills a slice with the next half words.
    pub fn fill_u32(&mut self, halves: &mut [u32]) {
        for half in halves {
            *half = self.next_u32();
        }
    }

    /// Appends the exact state, [`SAVED_LEN`] bytes (layout in the module's `README.md`).
    pub fn save(&self, bytes: &mut Vec<u8>) {
        bytes.reserve(SAVED_LEN);
        for lane in 0..LANES {
            for row in &self.state {
                bytes.extend_from_slice(&row[lane].to_le_bytes());
            }
        }
        for (index, word) in self.block.iter().enumerate() {
            let word = if index < self.drawn { 0 } else { *word };
            bytes.extend_from_slice(&word.to_le_bytes());
        }
        bytes.push(self.drawn as u8);
        bytes.push(u8::from(self.half.is_some()));
        bytes.extend_from_slice(&self.half.unwrap_or(0).to_le_bytes());
    }

    /// The generator that wrote these bytes.
    ///
    /// # Errors
    /// The bytes have another length, or could not have been written by [`Eight::save`].
    pub fn restore(bytes: &[u8]) -> Result<Self, RestoreError> {
        let bytes: &[u8; SAVED_LEN] =
            bytes.try_into().map_err(|_| RestoreError::Length { found: bytes.len(), needed: SAVED_LEN })?;
        let (chunks, tail) = bytes.as_chunks::<8>();
        let mut words = chunks.iter().map(|chunk| u64::from_le_bytes(*chunk));
        let mut state = [[0; LANES]; 4];
        for lane in 0..LANES {
            for row in &mut state {
                row[lane] = words.next().unwrap_or(0);
            }
            if state.iter().all(|row| row[lane] == 0) {
                return Err(RestoreError::Content);
            }
        }
        let block = std::array::from_fn(|_| words.next().unwrap_or(0));
        let [drawn, waiting, half @ ..]: &[u8; 6] = tail.try_into().map_err(|_| RestoreError::Content)?;
        let half = u32::from_le_bytes(*half);
        let half = match waiting {
            0 if half == 0 => None,
            1 => Some(half),
            _ => return Err(RestoreError::Content),
        };
        let drawn = usize::from(*drawn);
        if drawn > LANES || block[..drawn].iter().any(|word: &u64| *word != 0) {
            return Err(RestoreError::Content);
        }
        Ok(Self { state, block, drawn, half })
    }
}

/// Equal when the streams go on equally.
impl PartialEq for Eight {
    fn eq(&self, other: &Self) -> bool {
        self.state == other.state
            && self.drawn == other.drawn
            && self.half == other.half
            && self.block[self.drawn..] == other.block[other.drawn..]
    }
}

impl Eq for Eight {}

impl fmt::Debug for Eight {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.debug_struct("Eight").field("state", &self.state).field("drawn", &self.drawn).finish_non_exhaustive()
    }
}

impl TryRng for Eight {
    type Error = Infallible;

    #[inline]
    fn try_next_u32(&mut self) -> Result<u32, Infallible> {
        Ok(self.next_u32())
    }

    #[inline]
    fn try_next_u64(&mut self) -> Result<u64, Infallible> {
        Ok(self.next())
    }

    fn try_fill_bytes(&mut self, bytes: &mut [u8]) -> Result<(), Infallible> {
        for chunk in bytes.chunks_mut(8) {
            chunk.copy_from_slice(&self.next().to_le_bytes()[..chunk.len()]);
        }
        Ok(())
    }
}

/// Why [`Eight::restore`] or [`Halves::restore`](super::Halves::restore) refused.
#[derive(Clone, Debug, PartialEq, Eq)]
#[non_exhaustive]
pub enum RestoreError {
    /// Too few bytes or too many.
    Length {
        /// Bytes given.
        found: usize,
        /// Bytes that a saved state has.
        needed: usize,
    },
    /// Bytes that no generator writes.
    Content,
}

impl fmt::Display for RestoreError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Length { found, needed } => write!(f, "a saved stream has {needed} bytes, not {found}"),
            Self::Content => f.write_str("these bytes are not a saved stream"),
        }
    }
}

impl error::Error for RestoreError {}
