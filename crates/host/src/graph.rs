//! A lattice that many instances share.

use blake3::Hasher;
use spinledger_abi::{SlGraph, SlText};
use spinledger_flatten::GraphData;
use std::ops::Deref;
use std::sync::{Arc, OnceLock};

/// A checked lattice, immutable; fields are those of [`GraphData`].
pub struct Graph {
    data: GraphData,
    raw: SlGraph,
    _texts: Vec<SlText>,
    hash: OnceLock<[u8; 32]>,
}

// SAFETY: the pointers lead into vectors of `data` and `_texts`, which are never changed and freed with `self` only.
unsafe impl Send for Graph {}
// SAFETY: as above.
unsafe impl Sync for Graph {}

impl Graph {
    pub(crate) fn new(data: GraphData) -> Arc<Self> {
        let texts = data.class_texts();
        let raw = data.raw(&texts);
        Arc::new(Graph { data, raw, _texts: texts, hash: OnceLock::new() })
    }

    /// The interface's form; its address is good while the `Arc` lives.
    pub(crate) fn raw(self: &Arc<Self>) -> *const SlGraph {
        &self.raw
    }

    /// A hash of everything that a rule can see of the lattice.
    pub(crate) fn hash(&self) -> &[u8; 32] {
        self.hash.get_or_init(|| {
            let g = &self.data;
            let mut hasher = Hasher::new_derive_key("spinledger graph in a saved state v1");
            feed(&mut hasher, [g.dimension, g.sites, g.total].map(|n| (n as u64).to_le_bytes()));
            feed(
                &mut hasher,
                g.bonds.iter().map(|b| {
                    let mut bytes = [0; 11];
                    bytes[..4].copy_from_slice(&b.i.to_le_bytes());
                    bytes[4..8].copy_from_slice(&b.j.to_le_bytes());
                    bytes[8..10].copy_from_slice(&b.class_index.to_le_bytes());
                    bytes[10] = b.sign as u8;
                    bytes
                }),
            );
            feed(&mut hasher, g.wraps.iter().map(|x| x.to_le_bytes()));
            feed(&mut hasher, g.positions.iter().map(|x| x.to_le_bytes()));
            feed(&mut hasher, g.sublattices.iter().map(|x| x.to_le_bytes()));
            feed(&mut hasher, g.directions.iter().map(|x| x.to_le_bytes()));
            feed(&mut hasher, g.vectors.iter().map(|x| x.to_le_bytes()));
            feed(&mut hasher, g.periods.iter().map(|x| x.to_le_bytes()));
            feed(&mut hasher, g.cells.iter().map(|x| x.to_le_bytes()));
            feed(&mut hasher, g.face_offsets.iter().map(|x| x.to_le_bytes()));
            feed(&mut hasher, g.face_sites.iter().map(|x| x.to_le_bytes()));
            for name in &g.class_names {
                feed(&mut hasher, name.bytes().map(|byte| [byte]));
            }
            *hasher.finalize().as_bytes()
        })
    }
}

impl Deref for Graph {
    type Target = GraphData;
    fn deref(&self) -> &GraphData {
        &self.data
    }
}

impl std::fmt::Debug for Graph {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        self.data.fmt(f)
    }
}

/// Hashes a list and its length in bytes, so that lists that follow each other cannot be divided in two ways.
pub(crate) fn feed<const N: usize>(hasher: &mut Hasher, items: impl IntoIterator<Item = [u8; N]>) {
    let bytes: Vec<u8> = items.into_iter().flatten().collect();
    hasher.update(&(bytes.len() as u64).to_le_bytes());
    hasher.update(&bytes);
}
