//! Totals that are kept up to date while states change.

use spinledger_sdk::{Error, Result};

/// Totals of each chain of a group. The sum of spins is not among them: it is counted when asked for, which costs less than following it.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Tally {
    /// Total energy of each chain.
    pub(crate) energy: Vec<f64>,
    /// Accepted proposals of each chain.
    pub(crate) accepted: Vec<u64>,
    /// Proposals, the same for all.
    pub(crate) proposed: u64,
}

impl Tally {
    /// Zeros.
    pub(crate) fn new(lanes: usize) -> Self {
        Tally { energy: vec![0.0; lanes], accepted: vec![0; lanes], proposed: 0 }
    }

    /// A site was visited. The change of energy is 0 where the state stayed.
    #[inline]
    pub(crate) fn note(&mut self, lane: usize, changed: bool, change: f64) {
        self.energy[lane] += change;
        self.accepted[lane] += u64::from(changed);
    }

    /// Bytes that [`Tally::save`] appends.
    pub(crate) fn saved_len(&self) -> usize {
        8 * (self.energy.len() + self.accepted.len() + 1)
    }

    /// Appends everything: energies, accepted, proposed, eight bytes each.
    pub(crate) fn save(&self, out: &mut Vec<u8>) {
        self.energy.iter().for_each(|e| out.extend_from_slice(&e.to_bits().to_le_bytes()));
        self.accepted.iter().for_each(|a| out.extend_from_slice(&a.to_le_bytes()));
        out.extend_from_slice(&self.proposed.to_le_bytes());
    }

    /// Takes back what [`Tally::save`] wrote for as many chains.
    ///
    /// # Errors
    /// Where the length is another.
    pub(crate) fn restore(&mut self, bytes: &[u8]) -> Result<()> {
        if bytes.len() != self.saved_len() {
            return Err(Error::new("the saved totals cannot be read"));
        }
        let mut words = bytes.as_chunks::<8>().0.iter().map(|c| u64::from_le_bytes(*c));
        let mut next = || words.next().unwrap_or(0);
        self.energy.iter_mut().for_each(|e| *e = f64::from_bits(next()));
        self.accepted.iter_mut().for_each(|a| *a = next());
        self.proposed = next();
        Ok(())
    }
}
