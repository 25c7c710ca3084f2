//! Update rules and groups of chains under them.

use crate::answer::ask;
use crate::error::{HostError, Result};
use crate::item::Handle;
use crate::services::HostTable;
use crate::shown::{Placed, Shown};
use crate::{Configuration, Energy, Graph, Label, saved};
use spinledger_abi::{
    SL_FAILED, SL_OK, SL_TALLY_ACCEPTANCE, SL_TALLY_ENERGY, SL_TALLY_MAGNETISATION, SL_VIEW_BYTES, SlByteSink, SlKey,
    SlMessage, SlPrepare, SlSpins, SlTallies, SlText, SlUpdate, SlView,
};
use spinledger_numerics::random::StreamKey;
use std::ffi::c_void;
use std::ptr::{null, null_mut};
use std::sync::Arc;

/// An update rule made from parameters.
#[derive(Clone)]
pub struct UpdateItem {
    pub(crate) table: &'static SlUpdate,
    pub(crate) handle: Arc<Handle>,
    pub(crate) host: &'static HostTable,
    pub(crate) identity: String,
}

impl UpdateItem {
    /// A group of chains, one a stream key, at 1/(k_B T) in 1/energy. Configurations are imported before the first sweep.
    ///
    /// # Errors
    /// The rule refuses, the Hamiltonian stands on another lattice, there is no chain, or the inverse temperature is negative or not finite.
    pub fn prepare(
        &self,
        graph: &Arc<Graph>,
        energy: &Arc<Energy>,
        inverse_temperature: f64,
        lane_keys: &[StreamKey],
        group_key: StreamKey,
    ) -> Result<Sampler> {
        if !Arc::ptr_eq(graph, energy.graph()) {
            return Err(self.handle.unsuited("the Hamiltonian stands on another lattice"));
        }
        if lane_keys.is_empty() {
            return Err(self.handle.unsuited("there is no chain"));
        }
        if !(inverse_temperature.is_finite() && inverse_temperature >= 0.0) {
            return Err(self.handle.unsuited(format_args!("an inverse temperature of {inverse_temperature}")));
        }
        let keys: Vec<SlKey> = lane_keys.iter().map(|key| SlKey { bytes: key.0 }).collect();
        let prepare = SlPrepare {
            size: size_of::<SlPrepare>(),
            host: self.host.raw(),
            graph: graph.raw(),
            energy: energy.raw(),
            inverse_temperature,
            lanes: keys.len(),
            lane_keys: keys.as_ptr(),
            group_key: SlKey { bytes: group_key.0 },
        };
        let mut instance = null_mut();
        ask(&self.handle.label, "prepare chains", |message| match self.table.prepare {
            // SAFETY: the table was checked; keys live for the call, and rule, graph and energy as long as the sampler.
            Some(prepare_) => unsafe { prepare_(self.handle.pointer(), &prepare, &mut instance, message) },
            None => SL_FAILED,
        })?;
        if instance.is_null() {
            return Err(self.handle.wrong("it prepares nothing"));
        }
        let mut hasher = blake3::Hasher::new_derive_key("spinledger saved state v1");
        hasher.update(energy.hash());
        hasher.update(&inverse_temperature.to_le_bytes());
        hasher.update(&(keys.len() as u64).to_le_bytes());
        hasher.update(self.handle.canonical.as_bytes());
        Ok(Sampler {
            table: self.table,
            instance,
            lanes: keys.len(),
            broken: false,
            placed: None,
            fingerprint: *hasher.finalize().as_bytes(),
            identity: self.identity.clone(),
            rule: self.handle.clone(),
            energy: energy.clone(),
        })
    }

    /// The rule.
    pub fn label(&self) -> &Label {
        &self.handle.label
    }
}

impl std::fmt::Debug for UpdateItem {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        self.handle.fmt(f)
    }
}

/// What a rule is doing when it sweeps, in messages.
const SWEEP: &str = "sweep";

/// A group of chains under a rule. After a panic, or a sweep that did not come to its end, every call fails.
pub struct Sampler {
    table: &'static SlUpdate,
    instance: *mut c_void,
    lanes: usize,
    broken: bool,
    placed: Option<Placed>,
    fingerprint: [u8; 32],
    identity: String,
    // Dropped after the instance is released (`Drop` runs first): it refers to them.
    rule: Arc<Handle>,
    energy: Arc<Energy>,
}

// SAFETY: by the rules of the interface an instance may move between threads, as long as one at a time uses it, which `&mut` ensures; calls that
// take `&self` here do not exist beside such as do not enter the plugin.
unsafe impl Send for Sampler {}

/// Totals that a rule keeps; None where it does not.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Tallies {
    /// Total energy.
    pub energy: Option<f64>,
    /// Sum of spin values over free sites (first component), or of vectors.
    pub magnetisation: Option<[f64; 3]>,
    /// Proposals and, of these, accepted ones, since the chains were prepared.
    pub acceptance: Option<(u64, u64)>,
}

impl Sampler {
    /// Number of chains.
    pub fn lanes(&self) -> usize {
        self.lanes
    }

    /// The Hamiltonian.
    pub fn energy(&self) -> &Arc<Energy> {
        &self.energy
    }

    /// The rule.
    pub fn label(&self) -> &Label {
        &self.rule.label
    }

    /// Gives a chain its configuration.
    ///
    /// # Errors
    /// The configuration does not fit, there is no such chain, or the rule fails.
    pub fn import(&mut self, lane: usize, configuration: &Configuration) -> Result<()> {
        configuration.check(self.energy.graph(), &self.energy)?;
        self.check_lane(lane)?;
        let view = configuration.view(&self.energy);
        let (import, instance) = (self.table.import, self.instance);
        self.ask("take over a configuration", |message| match import {
            // SAFETY: the instance is alive and used by nobody else (`&mut self`); the view is valid for the call. The same holds below.
            Some(import) => unsafe { import(instance, lane, &view, message) },
            None => SL_FAILED,
        })
    }

    /// The configuration of a chain, checked.
    ///
    /// # Errors
    /// There is no such chain, the rule fails, or what it writes is no configuration.
    pub fn export(&mut self, lane: usize) -> Result<Configuration> {
        self.check_lane(lane)?;
        let sites = self.energy.graph().total;
        let n = self.energy.components;
        // Filled with what cannot be, so that sites left out are noticed (where there is room for an impossible state).
        let (mut states, mut vectors) = match n {
            0 => (vec![u8::MAX; sites], Vec::new()),
            n => (Vec::new(), vec![f64::NAN; sites * n]),
        };
        let spins = SlSpins {
            size: size_of::<SlSpins>(),
            sites,
            states: if n == 0 { states.as_mut_ptr() } else { null_mut() },
            vectors: if n == 0 { null_mut() } else { vectors.as_mut_ptr() },
        };
        let (export, instance) = (self.table.export, self.instance);
        self.ask("write a configuration", |message| match export {
            // SAFETY: room for all sites.
            Some(export) => unsafe { export(instance, lane, &spins, message) },
            None => SL_FAILED,
        })?;
        let configuration = if n == 0 { Configuration::States(states) } else { Configuration::Vectors(vectors) };
        match configuration.check(self.energy.graph(), &self.energy) {
            Err(HostError::Configuration { what }) => Err(self.rule.wrong(format_args!("in what it writes, {what}"))),
            other => other.map(|()| configuration),
        }
    }

    /// Does `count` sweeps of all chains.
    ///
    /// # Errors
    /// The rule fails, panics or is stopped.
    pub fn sweep(&mut self, count: u64) -> Result<()> {
        let (sweep, instance) = (self.table.sweep, self.instance);
        self.ask(SWEEP, |message| match sweep {
            // SAFETY: as in `import`.
            Some(sweep) => unsafe { sweep(instance, count, message) },
            None => SL_FAILED,
        })
    }

    /// Totals of a chain.
    ///
    /// # Errors
    /// There is no such chain, or the rule fails.
    pub fn tallies(&mut self, lane: usize) -> Result<Tallies> {
        let raw = self.raw_tallies(lane)?;
        let valid = |flag: u32| raw.valid & flag != 0;
        Ok(Tallies {
            energy: valid(SL_TALLY_ENERGY).then_some(raw.energy),
            magnetisation: valid(SL_TALLY_MAGNETISATION).then_some(raw.magnetisation),
            acceptance: valid(SL_TALLY_ACCEPTANCE).then_some((raw.proposed, raw.accepted)),
        })
    }

    pub(crate) fn raw_tallies(&mut self, lane: usize) -> Result<SlTallies> {
        self.check_lane(lane)?;
        let mut tallies = SlTallies {
            size: size_of::<SlTallies>(),
            valid: 0,
            reserved: 0,
            energy: 0.0,
            magnetisation: [0.0; 3],
            proposed: 0,
            accepted: 0,
            spare: [0.0; 8],
        };
        let (function, instance) = (self.table.tallies, self.instance);
        self.ask("tell its totals", |_| match function {
            // SAFETY: as in `import`.
            Some(function) => unsafe { function(instance, lane, &mut tallies) },
            None => SL_OK,
        })?;
        Ok(tallies)
    }

    /// What a chain looks like now; valid until the next call.
    pub(crate) fn shown(&mut self, lane: usize) -> Result<Shown> {
        self.check_lane(lane)?;
        let mut view = SlView {
            size: size_of::<SlView>(),
            kind: SL_VIEW_BYTES,
            components: 0,
            sites: 0,
            stride: 1,
            component_stride: 0,
            offset: 0,
            positions: null(),
            data: null(),
            length: 0,
        };
        let (function, instance) = (self.table.view, self.instance);
        self.ask("show a chain", |message| match function {
            // SAFETY: as in `import`.
            Some(function) => unsafe { function(instance, lane, &mut view, message) },
            None => SL_FAILED,
        })?;
        Shown::new(view, &self.energy, &self.rule, &mut self.placed)
    }

    /// Everything that the future of the chains depends on, in a wrapping that names what it belongs to.
    ///
    /// # Errors
    /// The rule fails.
    pub fn save(&mut self) -> Result<Vec<u8>> {
        let mut state: Vec<u8> = Vec::new();
        let sink = SlByteSink { size: size_of::<SlByteSink>(), context: (&raw mut state).cast(), write: Some(append) };
        let (save, instance) = (self.table.save, self.instance);
        self.ask("save its state", |message| match save {
            // SAFETY: as in `import`; the sink writes to `state`, which nobody else uses meanwhile.
            Some(save) => unsafe { save(instance, &sink, message) },
            None => SL_FAILED,
        })?;
        Ok(saved::wrap(&self.identity, &self.fingerprint, &state))
    }

    /// Takes back what [`Sampler::save`] gave, for the same rule, parameters, lattice, Hamiltonian, temperature and number of chains.
    ///
    /// # Errors
    /// [`HostError::Saved`] where it belongs to something else, is damaged, or the rule refuses it.
    pub fn restore(&mut self, state: &[u8]) -> Result<()> {
        let label = self.rule.label.clone();
        let not = |what: String| HostError::Saved { label: label.clone(), what };
        let state = saved::unwrap(&self.identity, &self.fingerprint, state).map_err(not)?;
        let (restore, instance) = (self.table.restore, self.instance);
        let taken = self.ask("take back its state", |message| match restore {
            // SAFETY: as in `import`; the state lives for the call.
            Some(restore) => unsafe { restore(instance, state.as_ptr(), state.len(), message) },
            None => SL_FAILED,
        });
        match taken {
            Err(HostError::Failed { message, .. }) => Err(not(message)),
            other => other,
        }
    }

    /// Turns the adapting of step widths on or off; nothing happens in rules that have none.
    ///
    /// # Errors
    /// The rule fails.
    pub fn adapt(&mut self, on: bool) -> Result<()> {
        let (adapt, instance) = (self.table.adapt, self.instance);
        self.ask("adapt its step widths", |_| match adapt {
            // SAFETY: as in `import`.
            Some(adapt) => unsafe { adapt(instance, i32::from(on)) },
            None => SL_OK,
        })
    }

    /// Which of the rule's code runs, in a word or two for people; empty where the rule does not tell, or not in words.
    ///
    /// # Errors
    /// The rule fails.
    pub fn path(&mut self) -> Result<String> {
        /// Bytes that are taken: what is longer is not a word or two.
        const LONGEST: usize = 200;
        let mut text = SlText { data: null(), length: 0 };
        let (path, instance) = (self.table.path, self.instance);
        self.ask("tell which code runs", |_| match path {
            // SAFETY: as in `import`.
            Some(path) => unsafe { path(instance, &mut text) },
            None => SL_OK,
        })?;
        if text.data.is_null() || text.length > LONGEST {
            return Ok(String::new());
        }
        // SAFETY: not null, and the plugin says that it is so long and that it lives until the next call.
        let bytes = unsafe { std::slice::from_raw_parts(text.data, text.length) };
        let text = String::from_utf8_lossy(bytes);
        Ok(text.chars().map(|letter| if letter.is_control() { ' ' } else { letter }).collect())
    }

    fn check_lane(&self, lane: usize) -> Result<()> {
        if lane < self.lanes {
            return Ok(());
        }
        Err(self.rule.unsuited(format_args!("there is no chain {lane} among {}", self.lanes)))
    }

    fn ask(&mut self, doing: &'static str, call: impl FnOnce(*mut SlMessage) -> i32) -> Result<()> {
        if self.broken {
            return Err(HostError::Broken { label: self.rule.label.clone() });
        }
        let answer = ask(&self.rule.label, doing, call);
        // A sweep that ended early leaves the chains where nobody knows: to save or measure them would look like a result.
        let unknown = doing == SWEEP && answer.is_err();
        self.broken = unknown || matches!(answer, Err(HostError::Panicked { .. } | HostError::Cancelled { .. }));
        answer
    }
}

impl Drop for Sampler {
    fn drop(&mut self) {
        if let Some(release) = self.table.release {
            // SAFETY: prepared by the same rule, and not used afterwards.
            unsafe { release(self.instance) };
        }
    }
}

impl std::fmt::Debug for Sampler {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Sampler").field("rule", &self.rule).field("lanes", &self.lanes).finish_non_exhaustive()
    }
}

unsafe extern "C" fn append(context: *mut c_void, data: *const u8, count: usize) -> i32 {
    // SAFETY: the plugin hands back the sink's context, which is a vector that nobody else uses meanwhile.
    let Some(state) = (unsafe { context.cast::<Vec<u8>>().as_mut() }) else { return SL_FAILED };
    if count == 0 {
        return SL_OK;
    }
    if data.is_null() || state.try_reserve(count).is_err() {
        return SL_FAILED;
    }
    // SAFETY: not null, and the plugin says that it is so long.
    state.extend_from_slice(unsafe { std::slice::from_raw_parts(data, count) });
    SL_OK
}
