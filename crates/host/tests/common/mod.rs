//! What the tests of this crate share.
#![allow(dead_code, unreachable_pub, reason = "each test program uses a part, and another crate takes `plugins` too")]

#[path = "../../../../tests/src/plugins.rs"]
pub mod plugins;

use spinledger_host::{Catalogue, Energy, Graph, Loader, Search, Services};
use spinledger_numerics::random::StreamKey;
use spinledger_terms::{Identity, ItemKind, Value};
use std::path::Path;
use std::sync::Arc;

/// What a pipeline that names these files finds.
pub fn catalogue(files: &[&Path]) -> Catalogue {
    let pipeline = files.iter().map(|file| file.to_path_buf()).collect();
    Catalogue::find(&Search { pipeline, ..Search::default() })
}

/// An item of a catalogue.
pub fn identity(catalogue: &Catalogue, kind: ItemKind, name: &str) -> Identity {
    catalogue.item(kind, name).unwrap_or_else(|| panic!("{kind} {name} is found")).0.clone()
}

/// Libraries, ready to be used.
pub struct Bench {
    pub catalogue: Catalogue,
    pub loader: Loader,
}

impl Bench {
    pub fn new(files: &[&Path]) -> Self {
        Self::with_threads(files, 1)
    }

    pub fn with_threads(files: &[&Path], threads: usize) -> Self {
        let catalogue = catalogue(files);
        assert!(catalogue.refusals().is_empty(), "{:?}", catalogue.refusals());
        let loader = Loader::new(Services { threads, ..Services::default() }).expect("threads");
        Bench { catalogue, loader }
    }

    pub fn forms() -> Self {
        Self::new(&[plugins::forms(), plugins::faulty()])
    }

    pub fn identity(&self, kind: ItemKind, name: &str) -> Identity {
        identity(&self.catalogue, kind, name)
    }

    /// A lattice from JSON parameters.
    pub fn graph(&self, name: &str, parameters: &str) -> Arc<Graph> {
        let lattice =
            self.loader.lattice(&self.identity(ItemKind::Lattice, name), &json(parameters)).expect("a lattice");
        lattice.build().expect("sound")
    }

    /// A model from JSON parameters on a lattice.
    pub fn energy(&self, name: &str, parameters: &str, graph: &Arc<Graph>) -> Arc<Energy> {
        let model = self.loader.model(&self.identity(ItemKind::Model, name), &json(parameters)).expect("a model");
        model.describe(graph).expect("sound")
    }
}

pub fn json(text: &str) -> Value {
    serde_json::from_str(text).expect("JSON")
}

pub fn key(text: &str) -> StreamKey {
    StreamKey::from_text(text)
}

/// All configurations of `count` spins of q states.
pub fn all_states(q: usize, count: usize) -> impl Iterator<Item = Vec<u8>> {
    (0..q.pow(count as u32)).map(move |number| {
        let mut rest = number;
        (0..count)
            .map(|_| {
                let state = rest % q;
                rest /= q;
                state as u8
            })
            .collect()
    })
}
