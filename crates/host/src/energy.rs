//! A Hamiltonian on a lattice that many instances share, and energies of configurations.

use crate::answer::ask;
use crate::configuration::Configuration;
use crate::error::{HostError, Result};
use crate::graph::feed;
use crate::item::Handle;
use crate::{Graph, Label};
use blake3::Hasher;
use spinledger_abi::{SlCustom, SlDelta, SlEnergy, SlFactorTable, SlTotal};
use spinledger_flatten::{EnergyData, scale, total};
use std::ops::Deref;
use std::sync::{Arc, OnceLock};

/// A flattened Hamiltonian, immutable; fields are those of [`EnergyData`]. Keeps its model and its lattice alive.
pub struct Energy {
    data: EnergyData,
    raw: SlEnergy,
    _tables: Vec<SlFactorTable>,
    /// One. Not a box: one that moves is taken to be the only way to what it holds, and `raw` points there too.
    custom: Vec<SlCustom>,
    model: Arc<Handle>,
    graph: Arc<Graph>,
    hash: OnceLock<[u8; 32]>,
}

// SAFETY: the pointers lead into `data`, `_tables` and `custom`, which are never changed and freed with `self` only, and to the model, which
// `model` keeps alive and which is immutable and shared between threads by the rules of the interface.
unsafe impl Send for Energy {}
// SAFETY: as above.
unsafe impl Sync for Energy {}

impl Energy {
    pub(crate) fn new(
        data: EnergyData,
        model: Arc<Handle>,
        graph: Arc<Graph>,
        callbacks: (SlTotal, SlDelta),
    ) -> Arc<Self> {
        let custom = vec![SlCustom {
            size: size_of::<SlCustom>(),
            model: model.pointer(),
            total: callbacks.0,
            delta: callbacks.1,
        }];
        let tables = data.factor_table_list();
        let raw = data.raw(&tables, custom.as_ptr());
        Arc::new(Energy { data, raw, _tables: tables, custom, model, graph, hash: OnceLock::new() })
    }

    /// The interface's form; its address is good while the `Arc` lives.
    pub(crate) fn raw(self: &Arc<Self>) -> *const SlEnergy {
        &self.raw
    }

    /// The lattice that the Hamiltonian stands on.
    pub fn graph(&self) -> &Arc<Graph> {
        &self.graph
    }

    /// The model.
    pub fn label(&self) -> &Label {
        &self.model.label
    }

    /// A hash of everything that a rule can see of lattice and Hamiltonian; of callbacks, the model and its parameters.
    pub(crate) fn hash(&self) -> &[u8; 32] {
        self.hash.get_or_init(|| {
            let e = &self.data;
            let mut hasher = Hasher::new_derive_key("spinledger energy in a saved state v1");
            hasher.update(self.graph.hash());
            feed(&mut hasher, [e.states, e.components, e.tables, e.site_classes].map(|n| (n as u64).to_le_bytes()));
            feed(&mut hasher, [&e.negation, &e.pinned_states, &e.involutions].map(|b| *blake3::hash(b).as_bytes()));
            let doubles = [
                &e.values,
                &e.pinned_vectors,
                &e.pair_tables,
                &e.bond_strengths,
                &e.site_tables,
                &e.site_strengths,
                &e.couplings,
                &e.anisotropies,
                &e.fields,
            ];
            for list in doubles.into_iter().chain(e.factor_tables.iter().map(|(_, energies)| energies)) {
                feed(&mut hasher, list.iter().map(|x| x.to_le_bytes()));
            }
            for list in [&e.neighbour_tables, &e.bond_tables, &e.site_class] {
                feed(&mut hasher, list.iter().map(|x| x.to_le_bytes()));
            }
            feed(&mut hasher, e.factor_tables.iter().map(|(order, _)| order.to_le_bytes()));
            feed(&mut hasher, e.factors.iter().flat_map(|f| [f.table.to_le_bytes(), f.first.to_le_bytes()]));
            for list in [&e.factor_sites, &e.colour_offsets, &e.colour_sites] {
                feed(&mut hasher, list.iter().map(|x| x.to_le_bytes()));
            }
            hasher.update(&[u8::from(e.permutations), u8::from(e.custom)]);
            if e.custom {
                hasher.update(self.model.canonical.as_bytes());
            }
            *hasher.finalize().as_bytes()
        })
    }

    /// The change of the energy that a model's callbacks add, for each proposal taken one at a time; `proposals` holds states or, for vector
    /// spins, vectors with components innermost. For examining models: rules call the callbacks by themselves.
    ///
    /// # Errors
    /// The model has no callbacks or fails, or something does not fit.
    pub fn custom_changes(&self, from: &Configuration, sites: &[u32], proposals: &Configuration) -> Result<Vec<f64>> {
        from.check(&self.graph, self)?;
        let misfit = |what: &str| HostError::Configuration { what: what.to_owned() };
        if let Some(site) = sites.iter().find(|&&site| site as usize >= self.graph.sites) {
            return Err(misfit(&format!("site {site} is not among {} free sites", self.graph.sites)));
        }
        let data = match proposals {
            Configuration::States(s) if self.states > 0 && s.len() == sites.len() => s.as_ptr().cast(),
            Configuration::Vectors(v) if self.states == 0 && v.len() == sites.len() * self.components => {
                v.as_ptr().cast()
            }
            _ => return Err(misfit("there is not one proposal a site")),
        };
        let Some(delta) = self.custom[0].delta.filter(|_| self.data.custom) else {
            return Err(self.model.unsuited("it has no callbacks"));
        };
        let (view, mut changes) = (from.view(self), vec![0.0; sites.len()]);
        ask(&self.model.label, "say how the energy changes", |message| {
            // SAFETY: model and graph are alive; lengths were checked; all slices live for the call.
            unsafe {
                let (sites, count) = (sites.as_ptr(), sites.len());
                delta(self.custom[0].model, self.graph.raw(), &view, count, sites, data, changes.as_mut_ptr(), message)
            }
        })?;
        Ok(changes)
    }
}

impl Deref for Energy {
    type Target = EnergyData;
    fn deref(&self) -> &EnergyData {
        &self.data
    }
}

impl std::fmt::Debug for Energy {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        self.data.fmt(f)
    }
}

/// Total energy of a configuration by definition: pairs in order of bonds, sites, factors, then the model's callbacks.
///
/// Cost: proportional to bonds, sites and factors.
///
/// # Errors
/// The configuration does not fit, or a callback fails or gives a number that is not finite.
pub fn energy_total(graph: &Graph, energy: &Energy, configuration: &Configuration) -> Result<f64> {
    configuration.check(graph, energy)?;
    let told = total(graph, energy, configuration.spins());
    let Some(callback) = energy.custom[0].total.filter(|_| energy.data.custom) else { return Ok(told) };
    let (view, mut added) = (configuration.view(energy), 0.0);
    ask(&energy.model.label, "say its energy", |message| {
        // SAFETY: model and graph are alive; the view shows a configuration that was checked, for the call.
        unsafe { callback(energy.custom[0].model, energy.graph.raw(), &view, &mut added, message) }
    })?;
    if !added.is_finite() {
        return Err(energy.model.wrong(format_args!("its callback gives an energy of {added}")));
    }
    Ok(told + added)
}

/// Sum of the largest magnitude of each term, without callbacks: a tolerance for energies is a multiple of it.
pub fn energy_scale(energy: &Energy, graph: &Graph) -> f64 {
    scale(graph, energy)
}
