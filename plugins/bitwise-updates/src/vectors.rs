//! Memory for vectors, aligned as the widest registers like it.

use crate::word::Vector;

/// Bytes of a line of cache, and of a vector: aligned, none of them lies in two lines.
const LINE: usize = 64;

/// Vectors one after the other, all zero at first.
#[derive(Debug)]
pub(crate) struct Vectors {
    /// Room for one more vector than needed.
    words: Vec<u64>,
    /// Where an aligned vector begins.
    first: usize,
    count: usize,
}

impl Vectors {
    /// `count` vectors of zeros.
    pub(crate) fn new(count: usize) -> Self {
        let words: Vec<u64> = vec![0; 8 * (count + 1)];
        // Where alignment cannot be told, the first word will do: it is a matter of speed only.
        let first = Some(words.as_ptr().align_offset(LINE)).filter(|first| *first < 8).unwrap_or(0);
        Vectors { words, first, count }
    }

    /// All words.
    pub(crate) fn words(&self) -> &[u64] {
        &self.words[self.first..][..8 * self.count]
    }

    /// All words.
    pub(crate) fn words_mut(&mut self) -> &mut [u64] {
        &mut self.words[self.first..][..8 * self.count]
    }

    /// All vectors.
    pub(crate) fn all(&self) -> &[Vector] {
        self.words().as_chunks().0
    }

    /// All vectors.
    pub(crate) fn all_mut(&mut self) -> &mut [Vector] {
        self.words_mut().as_chunks_mut().0
    }
}
