//! Names of random streams.

use std::fmt;

/// Context string of [`StreamKey::from_text`]; frozen.
const TEXT_CONTEXT: &str = "spinledger stream v1";
/// Context string of [`StreamKey::lane`]; frozen.
const LANE_CONTEXT: &str = "spinledger stream v1 lane";

/// The name of a random stream: 32 bytes, made by hashing what the stream depends on.
///
/// Keys with different histories are different with overwhelming probability; the derivations are listed in
/// `README.md` of this module.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct StreamKey(pub [u8; 32]);

impl StreamKey {
    /// The key of a text that says what the stream is for.
    #[must_use]
    pub fn from_text(preimage: &str) -> Self {
        Self(blake3::derive_key(TEXT_CONTEXT, preimage.as_bytes()))
    }

    /// The key of a part of this stream's purpose, such as `"start"`.
    #[must_use]
    pub fn derive(&self, label: &str) -> Self {
        Self(*blake3::keyed_hash(&self.0, label.as_bytes()).as_bytes())
    }

    /// The key of one of several equal parts.
    #[must_use]
    pub fn lane(&self, lane: u32) -> Self {
        let mut material = [0; 36];
        material[..32].copy_from_slice(&self.0);
        material[32..].copy_from_slice(&lane.to_le_bytes());
        Self(blake3::derive_key(LANE_CONTEXT, &material))
    }

    /// Fills `bytes` with the beginning of the key's seed bytes.
    pub(super) fn seed_bytes(&self, bytes: &mut [u8]) {
        blake3::Hasher::new().update(&self.0).finalize_xof().fill(bytes);
    }
}

impl fmt::Debug for StreamKey {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("StreamKey(")?;
        for byte in self.0 {
            write!(f, "{byte:02x}")?;
        }
        f.write_str(")")
    }
}
