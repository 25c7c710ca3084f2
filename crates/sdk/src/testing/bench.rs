//! A lattice and a model for unit tests.

use super::json::params;
use crate::border::{self, Models};
use crate::{
    Energy, Error, Graph, Host, Lattice, LatticeBuilder, Model, ModelBuilder, Parameter, Params, Prepare, Problem,
    Result, View,
};
use spinledger_abi as abi;
use spinledger_flatten::{EnergyData, GraphData, ModelParts, Spins, Unsound, total};
use spinledger_numerics::random::StreamKey;
use std::any::Any;
use std::rc::Rc;
use std::sync::Arc;

/// Graph and energy of a lattice and a model, as rules and observables get them.
pub struct Bench {
    graph: GraphData,
    energy: EnergyData,
    raw_graph: Rc<abi::SlGraph>,
    raw_energy: abi::SlEnergy,
    /// What the raw structs point at beside `graph` and `energy`.
    _texts: Vec<abi::SlText>,
    _tables: Vec<abi::SlFactorTable>,
    // Not boxed: a box that moves is taken to be the only way to what it holds.
    _custom: Rc<abi::SlCustom>,
    _model: Arc<dyn Any + Send + Sync>,
}

impl Bench {
    /// A bench. Parameters that are left out take the default of the item's specification, as in a pipeline (at the top level; inside
    /// trees of parameters nothing is filled in).
    ///
    /// # Panics
    /// Where the lattice or the model refuses or what it says is not sound; with the message.
    pub fn new<L: Lattice, M: Model>(lattice: &Params, model: &Params) -> Self {
        Self::try_new::<L, M>(lattice, model).unwrap_or_else(|error| panic!("{error}"))
    }

    /// A bench, or what the lattice, the model or the checks of the host say against it.
    ///
    /// # Errors
    /// As said.
    pub fn try_new<L: Lattice, M: Model>(lattice: &Params, model: &Params) -> Result<Self> {
        let unsound = |error: Unsound| Error::new(error.to_string());
        let mut builder = LatticeBuilder::new();
        L::new(&complete(lattice, L::SPEC.parameters))?.build(&mut builder)?;
        let graph = border::replay_lattice(&builder).and_then(|parts| parts.finish()).map_err(unsound)?;
        let texts = graph.class_texts();
        let raw_graph = Rc::new(graph.raw(&texts));

        let model = Arc::new(M::new(&complete(model, M::SPEC.parameters))?);
        // SAFETY: `raw_graph` was made from `graph` and `texts`, which are kept beside it and never changed.
        let face = unsafe { border::graph(&*raw_graph) }?;
        let mut builder = ModelBuilder::new();
        model.describe(&face, &mut builder)?;
        let mut parts = ModelParts::new(&graph);
        border::replay_model(&builder, &mut parts).map_err(unsound)?;
        let footprints: Option<Vec<Vec<u32>>> = parts.has_custom().then(|| {
            let footprint = |site| {
                let mut sites = Vec::new();
                model.footprint(&face, site, &mut sites);
                sites
            };
            (0..graph.sites).map(footprint).collect()
        });
        let energy = parts.finish(&graph, footprints.as_deref()).map_err(unsound)?;
        let custom = Rc::new(abi::SlCustom {
            size: size_of::<abi::SlCustom>(),
            model: Arc::as_ptr(&model).cast(),
            total: Models::<M>::TOTAL,
            delta: Models::<M>::DELTA,
        });
        let tables = energy.factor_table_list();
        let raw_energy = energy.raw(&tables, Rc::as_ptr(&custom));
        Ok(Bench {
            graph,
            energy,
            raw_graph,
            raw_energy,
            _texts: texts,
            _tables: tables,
            _custom: custom,
            _model: model,
        })
    }

    /// The lattice.
    pub fn graph(&self) -> Graph<'_> {
        // SAFETY: what `raw_graph` points at belongs to `self`, lives as long and does not change.
        unsafe { border::graph(&*self.raw_graph) }.expect("made by this crate")
    }

    /// The Hamiltonian.
    pub fn energy(&self) -> Energy<'_> {
        // SAFETY: what both point at belongs to `self`, lives as long and does not change; the energy was made for this graph.
        unsafe { border::energy(&*self.raw_graph, &self.raw_energy) }.expect("made by this crate")
    }

    /// Both.
    pub fn problem(&self) -> Problem<'_> {
        Problem { graph: self.graph(), energy: self.energy() }
    }

    /// What a rule is prepared with: 1/T, the number of chains, and streams that depend on `seed` and the chain. The host is [`Host::NONE`].
    pub fn prepare(&self, inverse_temperature: f64, lanes: usize, seed: u64) -> Prepare<'_> {
        let group_key = StreamKey::from_text(&format!("bench {seed}"));
        Prepare {
            host: Host::NONE,
            problem: self.problem(),
            inverse_temperature,
            lane_keys: (0..lanes).map(|lane| group_key.lane(lane as u32)).collect(),
            group_key,
        }
    }

    /// A random start configuration of discrete spins; pinned sites as the model has them.
    ///
    /// # Panics
    /// Where spins are vectors.
    pub fn random_states(&self, seed: u64) -> Vec<u8> {
        use spinledger_numerics::random::{Xoshiro, below};
        let mut stream = Xoshiro::from_key(&StreamKey::from_text(&format!("bench start {seed}")));
        let q = self.energy.states as u64;
        let mut states: Vec<u8> = (0..self.graph.sites).map(|_| below(q, || stream.next()) as u8).collect();
        states.extend_from_slice(&self.energy.pinned_states);
        states
    }

    /// Total energy of a configuration of discrete spins (free and pinned sites), by definition.
    ///
    /// # Panics
    /// Where it does not fit, or the model's callback fails.
    pub fn total(&self, states: &[u8]) -> f64 {
        self.by_definition(Spins::States(states), &View::bytes(states))
    }

    /// The same for vector spins.
    ///
    /// # Panics
    /// As above.
    pub fn total_vectors(&self, vectors: &[f64]) -> f64 {
        self.by_definition(Spins::Vectors(vectors), &View::vectors(vectors, self.energy.components))
    }

    fn by_definition(&self, spins: Spins<'_>, view: &View<'_>) -> f64 {
        let custom = self.energy().custom;
        let added = custom.map_or(0.0, |custom| custom.total(view).unwrap_or_else(|error| panic!("{error}")));
        total(&self.graph, &self.energy, spins) + added
    }
}

impl std::fmt::Debug for Bench {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Bench").field("graph", &self.graph).field("energy", &self.energy).finish_non_exhaustive()
    }
}

/// Fills in defaults.
fn complete(given: &Params, parameters: &[Parameter]) -> Params {
    let mut map = match given {
        Params::Map(map) => map.clone(),
        _ => panic!("parameters are a mapping"),
    };
    for parameter in parameters.iter().filter(|p| !p.default.is_empty()) {
        if given.get(parameter.name).is_none() {
            map.push((parameter.name.to_owned(), params(parameter.default)));
        }
    }
    map.sort_by(|a, b| a.0.cmp(&b.0));
    Params::Map(map)
}
