//! Saved states: where a group of chains stands, so that it can go on. A state that cannot be read is as good as none.
//!
//! A file is the magic text, the version of this form (4 bytes), the position (8), the length of what follows the head (8),
//! the BLAKE3 of those three and of the bytes (32), and the bytes; numbers are little-endian.

use crate::error::LedgerError;
use crate::ledger::Ledger;
use spinledger_terms::Key;
use std::fs;
use std::io::ErrorKind;
use std::path::PathBuf;

const MAGIC: &[u8; 16] = b"spinledger state";
const VERSION: u32 = 1;
const HEAD: usize = 16 + 4 + 8 + 8 + 32;

/// What is there of a state.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum SavedState {
    /// None was saved.
    Absent,
    /// The newest one.
    Found {
        /// Where in the chain it was saved, in its maker's count.
        position: u64,
        /// The state.
        bytes: Vec<u8>,
    },
    /// One was saved but cannot be used; the text, a warning, says which file and why.
    Damaged(String),
}

impl SavedState {
    /// Position and bytes, where there is a usable one.
    pub fn found(self) -> Option<(u64, Vec<u8>)> {
        match self {
            SavedState::Found { position, bytes } => Some((position, bytes)),
            _ => None,
        }
    }
}

impl Ledger {
    /// Saves the state of a group of chains in place of the one before, in a single step.
    ///
    /// # Errors
    /// Where it cannot be written; the one before then stays.
    pub fn save_state(&self, chain: &Key, position: u64, bytes: &[u8]) -> Result<(), LedgerError> {
        let mut file = Vec::with_capacity(HEAD + bytes.len());
        file.extend_from_slice(MAGIC);
        file.extend_from_slice(&VERSION.to_le_bytes());
        file.extend_from_slice(&position.to_le_bytes());
        file.extend_from_slice(&(bytes.len() as u64).to_le_bytes());
        let hash = check(&file[16..36], bytes);
        file.extend_from_slice(&hash);
        file.extend_from_slice(bytes);
        Ok(self.writes.write_file_via(&self.state_path(chain), &self.temporary(), &file)?)
    }

    /// The newest saved state of a group of chains. Never stops a run: what cannot be read is a warning.
    pub fn load_state(&self, chain: &Key) -> SavedState {
        let path = self.state_path(chain);
        let damaged = |what: &str| SavedState::Damaged(format!("{}: {what}; it is not used", path.display()));
        let mut file = match fs::read(&path) {
            Ok(file) => file,
            Err(error) if error.kind() == ErrorKind::NotFound => return SavedState::Absent,
            Err(error) => return damaged(&format!("the saved state cannot be read ({error})")),
        };
        if file.len() < HEAD || file[..16] != MAGIC[..] {
            return damaged("this is not a saved state, or only the beginning of one");
        }
        if file[16..20] != VERSION.to_le_bytes() {
            return damaged("the saved state is of another version");
        }
        let number = |at: usize| file[at..at + 8].iter().rev().fold(0u64, |n, byte| n << 8 | u64::from(*byte));
        let (position, length) = (number(20), number(28));
        if length != (file.len() - HEAD) as u64 {
            return damaged("the saved state is cut off");
        }
        if file[36..HEAD] != check(&file[16..36], &file[HEAD..]) {
            return damaged("the saved state is damaged");
        }
        file.drain(..HEAD);
        SavedState::Found { position, bytes: file }
    }

    /// Removes the saved state of a group of chains; none is no error.
    ///
    /// # Errors
    /// Where it cannot be removed.
    pub fn drop_state(&self, chain: &Key) -> Result<(), LedgerError> {
        Ok(self.writes.remove_file(&self.state_path(chain))?)
    }

    fn state_path(&self, chain: &Key) -> PathBuf {
        self.root.join("states").join(format!("{chain}.state"))
    }
}

fn check(head: &[u8], bytes: &[u8]) -> [u8; 32] {
    let mut hasher = blake3::Hasher::new();
    hasher.update(head).update(bytes);
    hasher.finalize().into()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_newest_state_is_kept() {
        let folder = tempfile::tempdir().unwrap();
        let ledger = Ledger::open(folder.path()).unwrap();
        let key = Key([1; 32]);
        assert_eq!(ledger.load_state(&key), SavedState::Absent);
        ledger.save_state(&key, 5, b"old").unwrap();
        ledger.save_state(&key, 1 << 40, b"").unwrap();
        assert_eq!(ledger.load_state(&key).found(), Some((1 << 40, vec![])));
        ledger.drop_state(&key).unwrap();
        ledger.drop_state(&key).unwrap();
        assert_eq!(ledger.load_state(&key), SavedState::Absent);
    }

    /// Every cut and every flipped byte is noticed, and none is an error.
    #[test]
    fn damaged_states_are_not_used() {
        let folder = tempfile::tempdir().unwrap();
        let ledger = Ledger::open(folder.path()).unwrap();
        let key = Key([1; 32]);
        ledger.save_state(&key, 77, b"0123456789").unwrap();
        let path = ledger.state_path(&key);
        let good = fs::read(&path).unwrap();
        for cut in 0..good.len() {
            fs::write(&path, &good[..cut]).unwrap();
            assert!(matches!(ledger.load_state(&key), SavedState::Damaged(_)), "cut at {cut}");
        }
        for place in 0..good.len() {
            let mut bad = good.clone();
            bad[place] ^= 4;
            fs::write(&path, &bad).unwrap();
            assert!(matches!(ledger.load_state(&key), SavedState::Damaged(_)), "flipped at {place}");
        }
        fs::write(&path, [&good[..], b"x"].concat()).unwrap();
        assert!(matches!(ledger.load_state(&key), SavedState::Damaged(_)));
        fs::write(&path, &good).unwrap();
        assert_eq!(ledger.load_state(&key).found(), Some((77, b"0123456789".to_vec())));
    }
}
