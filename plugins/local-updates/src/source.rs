//! The random numbers of a group, in the order that `README.md` fixes.

use crate::group::LANES_TOGETHER;
use crate::rule::Draw;
use spinledger_numerics::random::{Halves, StreamKey, Xoshiro, below_u32};
use spinledger_sdk::{Error, Result};

/// The streams of a group.
pub(crate) struct Source {
    /// Of the only chain, or of all 64 together.
    pub(crate) words: Halves,
    /// Streams of the 64 chains, for rejected proposals; empty with one chain.
    own: Vec<Xoshiro>,
}

impl Source {
    /// The beginning of all streams.
    pub(crate) fn new(lanes: usize, lane_keys: &[StreamKey], group_key: &StreamKey) -> Self {
        match lane_keys {
            [only] if lanes == 1 => Source { words: Halves::from_key(only), own: Vec::new() },
            _ => Source { words: Halves::from_key(group_key), own: lane_keys.iter().map(Xoshiro::from_key).collect() },
        }
    }

    /// The draws of a visit, one for each chain. `others` is the number of states that may be proposed, 0 for rules that do not propose.
    #[inline]
    pub(crate) fn draw(&mut self, others: u32, draws: &mut [Draw]) {
        if let [draw] = draws {
            draw.proposal = if others > 1 { below_u32(others, || self.words.next()) } else { 0 };
            draw.word = self.words.next();
            return;
        }
        let words = &mut self.words;
        if others > 1 {
            for (draw, own) in draws.iter_mut().zip(&mut self.own) {
                // The first word is the group's; only what is rejected is drawn again, from the chain's own stream, so that the group's
                // stream moves by the same amount whatever happens in a chain.
                let mut first = Some(words.next());
                draw.proposal = below_u32(others, || first.take().unwrap_or_else(|| (own.next() >> 32) as u32));
            }
        } else {
            draws.iter_mut().for_each(|draw| draw.proposal = 0);
        }
        draws.iter_mut().for_each(|draw| draw.word = words.next());
    }

    /// Words of 64 chains, side by side. Only for groups that draw nothing else.
    #[inline]
    pub(crate) fn side_by_side(&mut self) -> Option<&[u32; LANES_TOGETHER]> {
        self.words.take(LANES_TOGETHER).first_chunk()
    }

    /// Appends all streams.
    pub(crate) fn save(&self, out: &mut Vec<u8>) {
        self.words.save(out);
        for word in self.own.iter().flat_map(Xoshiro::state) {
            out.extend_from_slice(&word.to_le_bytes());
        }
    }

    /// Takes back what [`Source::save`] wrote for as many chains.
    ///
    /// # Errors
    /// Where the bytes do not fit.
    pub(crate) fn restore(&mut self, bytes: &[u8]) -> Result<()> {
        let wrong = || Error::new("the saved random streams cannot be read");
        let (words, rest) = bytes.split_at_checked(Halves::SAVED).ok_or_else(wrong)?;
        let (states, left) = rest.as_chunks::<32>();
        if states.len() != self.own.len() || !left.is_empty() {
            return Err(wrong());
        }
        self.words = Halves::restore(words).map_err(|_| wrong())?;
        for (own, bytes) in self.own.iter_mut().zip(states) {
            let mut state = [0; 4];
            state.iter_mut().zip(bytes.as_chunks::<8>().0).for_each(|(word, bytes)| *word = u64::from_le_bytes(*bytes));
            *own = Xoshiro::from_state(state);
        }
        Ok(())
    }
}
