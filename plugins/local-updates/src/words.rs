//! Half words of a stream, drawn ahead in blocks.

use spinledger_numerics::random::{Eight, SAVED_LEN, StreamKey};
use spinledger_sdk::{Error, Result};

/// Half words drawn ahead. A multiple of 64, so that groups of 64 chains find their draws side by side.
const AHEAD: usize = 1024;

/// The half words of an [`Eight`], in their order; drawing ahead does not show.
pub(crate) struct Words {
    stream: Eight,
    ready: Box<[u32; AHEAD]>,
    used: usize,
}

impl Words {
    /// The stream of a key, from its beginning.
    pub(crate) fn new(key: &StreamKey) -> Self {
        Words { stream: Eight::from_key(key), ready: Box::new([0; AHEAD]), used: AHEAD }
    }

    /// The next half word.
    #[inline]
    pub(crate) fn next(&mut self) -> u32 {
        if self.used == AHEAD {
            self.refill();
        }
        let word = self.ready[self.used];
        self.used += 1;
        word
    }

    /// The next half words: at least one, at most `most` of them (not 0).
    #[inline]
    pub(crate) fn take(&mut self, most: usize) -> &[u32] {
        if self.used == AHEAD {
            self.refill();
        }
        let first = self.used;
        self.used += most.min(AHEAD - first);
        &self.ready[first..self.used]
    }

    fn refill(&mut self) {
        // Whole words in bulk, then their halves: the same as one half word after the other, and faster.
        let mut words = [0; AHEAD / 2];
        self.stream.fill(&mut words);
        for (halves, word) in self.ready.as_chunks_mut::<2>().0.iter_mut().zip(words) {
            *halves = [word as u32, (word >> 32) as u32];
        }
        self.used = 0;
    }

    /// Appends the stream and the half words that wait: [`Words::SAVED`] bytes, those used already written as zero.
    pub(crate) fn save(&self, out: &mut Vec<u8>) {
        self.stream.save(out);
        out.extend_from_slice(&(self.used as u32).to_le_bytes());
        for (place, word) in self.ready.iter().enumerate() {
            out.extend_from_slice(&if place < self.used { 0 } else { *word }.to_le_bytes());
        }
    }

    /// Bytes of a saved state.
    pub(crate) const SAVED: usize = SAVED_LEN + 4 + 4 * AHEAD;

    /// The state that wrote these bytes.
    ///
    /// # Errors
    /// Where none did.
    pub(crate) fn restore(bytes: &[u8]) -> Result<Self> {
        let wrong = || Error::new("the saved random stream cannot be read");
        if bytes.len() != Words::SAVED {
            return Err(wrong());
        }
        let (stream, rest) = bytes.split_at(SAVED_LEN);
        let stream = Eight::restore(stream).map_err(|e| Error::new(format!("the saved random stream: {e}")))?;
        let mut numbers = rest.as_chunks::<4>().0.iter().map(|c| u32::from_le_bytes(*c));
        let used = numbers.next().map_or(AHEAD + 1, |n| n as usize);
        if used > AHEAD {
            return Err(wrong());
        }
        let mut ready = Box::new([0; AHEAD]);
        ready.iter_mut().zip(numbers).for_each(|(slot, word)| *slot = word);
        Ok(Words { stream, ready, used })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn drawing_ahead_does_not_show() {
        let key = StreamKey::from_text("words");
        let (mut words, mut stream) = (Words::new(&key), Eight::from_key(&key));
        for round in 0..50 {
            assert_eq!(words.next(), stream.next_u32());
            let most = 1 + 37 * round % 300;
            let taken = words.take(most).to_vec();
            assert!(!taken.is_empty() && taken.len() <= most);
            taken.iter().for_each(|word| assert_eq!(*word, stream.next_u32()));
        }
    }
}
