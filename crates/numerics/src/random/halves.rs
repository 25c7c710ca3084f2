//! Half words of a stream, drawn ahead in blocks.

use super::{Eight, RestoreError, SAVED_LEN, StreamKey};

/// Half words drawn ahead. A multiple of 64, so that groups of 64 chains find their draws side by side.
const AHEAD: usize = 1024;

/// The half words of an [`Eight`], in their order: drawing ahead cannot be seen in them.
///
/// Kernels that look at several half words a visit take them as slices, so that the place in the block is kept in a register and not
/// written back after each.
#[derive(Clone)]
pub struct Halves {
    stream: Eight,
    ready: Box<[u32; AHEAD]>,
    used: usize,
    /// Half words of [`Halves::few`] that lie in two blocks.
    joined: [u32; Halves::FEW],
}

impl Halves {
    /// Most half words that [`Halves::few`] gives at once.
    pub const FEW: usize = 64;

    /// Bytes written by [`Halves::save`].
    pub const SAVED: usize = SAVED_LEN + 4 + 4 * AHEAD;

    /// The stream of a key, from its beginning.
    #[must_use]
    pub fn from_key(key: &StreamKey) -> Self {
        Self { stream: Eight::from_key(key), ready: Box::new([0; AHEAD]), used: AHEAD, joined: [0; Self::FEW] }
    }

    /// The next half word.
    #[expect(
        clippy::should_implement_trait,
        reason = "a stream has no end, so that an iterator would only add an Option"
    )]
    #[inline]
    pub fn next(&mut self) -> u32 {
        if self.used == AHEAD {
            self.refill();
        }
        let half = self.ready[self.used];
        self.used += 1;
        half
    }

    /// The next half words: at least one, at most `most` of them (no more than are drawn ahead).
    #[inline]
    pub fn take(&mut self, most: usize) -> &[u32] {
        if self.used == AHEAD {
            self.refill();
        }
        let first = self.used;
        self.used += most.min(AHEAD - first);
        &self.ready[first..self.used]
    }

    /// Draws ahead if nothing is left of what was, as [`Halves::take`] would; for a caller that is compiled for wide registers, see
    /// [`Eight::fill_wide`].
    #[inline(always)]
    pub fn draw_ahead<const WIDTH: usize>(&mut self) {
        if self.used == AHEAD {
            self.refill_wide::<WIDTH>();
        }
    }

    /// Whether nothing is left of what was drawn ahead.
    #[must_use]
    #[inline]
    pub fn is_used_up(&self) -> bool {
        self.used == AHEAD
    }

    /// The next `count` half words.
    ///
    /// # Panics
    /// If `count` is above [`Halves::FEW`].
    #[inline]
    pub fn few(&mut self, count: usize) -> &[u32] {
        let end = self.used + count;
        if end <= AHEAD {
            let first = self.used;
            self.used = end;
            return &self.ready[first..end];
        }
        self.join(count)
    }

    #[cold]
    fn join(&mut self, count: usize) -> &[u32] {
        assert!(count <= Self::FEW, "at most {} half words at once", Self::FEW);
        for place in 0..count {
            self.joined[place] = self.next();
        }
        &self.joined[..count]
    }

    #[cold]
    fn refill(&mut self) {
        self.refill_wide::<2>();
    }

    #[inline(always)]
    fn refill_wide<const WIDTH: usize>(&mut self) {
        // Whole words in bulk, then their halves: the same as one half word after the other, and faster. A part at a time stays in the
        // nearest cache.
        for halves in self.ready.as_chunks_mut::<128>().0 {
            let mut words = [0; 64];
            self.stream.fill_wide::<WIDTH>(&mut words);
            for (halves, word) in halves.as_chunks_mut::<2>().0.iter_mut().zip(words) {
                *halves = [word as u32, (word >> 32) as u32];
            }
        }
        self.used = 0;
    }

    /// Appends the exact state, [`Halves::SAVED`] bytes: the stream, the number of half words used of the block, and the block with those
    /// used already written as zero.
    pub fn save(&self, bytes: &mut Vec<u8>) {
        self.stream.save(bytes);
        bytes.extend_from_slice(&(self.used as u32).to_le_bytes());
        for (place, half) in self.ready.iter().enumerate() {
            bytes.extend_from_slice(&if place < self.used { 0 } else { *half }.to_le_bytes());
        }
    }

    /// The half words that wrote these bytes.
    ///
    /// # Errors
    /// The bytes have another length, or could not have been written by [`Halves::save`].
    pub fn restore(bytes: &[u8]) -> Result<Self, RestoreError> {
        if bytes.len() != Self::SAVED {
            return Err(RestoreError::Length { found: bytes.len(), needed: Self::SAVED });
        }
        let (stream, rest) = bytes.split_at(SAVED_LEN);
        let stream = Eight::restore(stream)?;
        let mut numbers = rest.as_chunks::<4>().0.iter().map(|c| u32::from_le_bytes(*c));
        let used = numbers.next().map_or(AHEAD, |used| used as usize);
        let mut ready = Box::new([0; AHEAD]);
        ready.iter_mut().zip(numbers).for_each(|(slot, half)| *slot = half);
        if used > AHEAD || ready[..used].iter().any(|half| *half != 0) {
            return Err(RestoreError::Content);
        }
        Ok(Self { stream, ready, used, joined: [0; Self::FEW] })
    }
}

impl std::fmt::Debug for Halves {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Halves").field("stream", &self.stream).field("used", &self.used).finish_non_exhaustive()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn drawing_ahead_does_not_show() {
        let key = StreamKey::from_text("halves");
        let (mut halves, mut stream) = (Halves::from_key(&key), Eight::from_key(&key));
        for round in 0..200 {
            assert_eq!(halves.next(), stream.next_u32());
            let most = 1 + 37 * round % 300;
            let taken = halves.take(most).to_vec();
            assert!(!taken.is_empty() && taken.len() <= most);
            if halves.is_used_up() {
                halves.draw_ahead::<8>();
            }
            let wide = halves.take(most).to_vec();
            let few = halves.few(round % (Halves::FEW + 1)).to_vec();
            assert_eq!(few.len(), round % (Halves::FEW + 1));
            taken.iter().chain(&wide).chain(&few).for_each(|half| assert_eq!(*half, stream.next_u32()));
        }
    }

    #[test]
    fn what_was_saved_goes_on() {
        let mut halves = Halves::from_key(&StreamKey::from_text("halves"));
        for used in [0, 1, 5, 1024, 1500] {
            (0..used).for_each(|_| _ = halves.next());
            let mut saved = Vec::new();
            halves.save(&mut saved);
            assert_eq!(saved.len(), Halves::SAVED);
            let mut again = Halves::restore(&saved).expect("restored");
            (0..1100).for_each(|_| assert_eq!(again.next(), halves.next()));
            assert!(Halves::restore(&saved[1..]).is_err());
        }
    }

    #[test]
    fn what_was_never_saved_is_refused() {
        let mut halves = Halves::from_key(&StreamKey::from_text("halves"));
        halves.next();
        let mut saved = Vec::new();
        halves.save(&mut saved);
        saved[SAVED_LEN + 4] = 1;
        assert_eq!(Halves::restore(&saved).err(), Some(RestoreError::Content), "a used half word is zero");
        saved[SAVED_LEN + 4] = 0;
        saved[SAVED_LEN + 2] = 1;
        assert_eq!(Halves::restore(&saved).err(), Some(RestoreError::Content), "more used than there are");
    }
}
