//! One trait per kind of item.

pub use crate::energy::Problem;
use crate::spec::{LatticeSpec, ModelSpec, ObservableSpec, UpdateSpec};
use crate::{Graph, Host, LatticeBuilder, ModelBuilder, Params, Result, Spins, Tallies, View};
use spinledger_numerics::random::StreamKey;

/// Sites and bonds.
pub trait Lattice: Sized + Send + Sync + 'static {
    /// What the lattice says of itself.
    const SPEC: LatticeSpec;

    /// From its parameters.
    ///
    /// # Errors
    /// A message where they make no lattice.
    fn new(params: &Params) -> Result<Self>;

    /// Writes sites, bonds and what else there is.
    ///
    /// # Errors
    /// A message where that fails.
    fn build(&self, builder: &mut LatticeBuilder) -> Result<()>;
}

/// A Hamiltonian.
pub trait Model: Sized + Send + Sync + 'static {
    /// What the model says of itself.
    const SPEC: ModelSpec;

    /// From its parameters.
    ///
    /// # Errors
    /// A message where they make no model.
    fn new(params: &Params) -> Result<Self>;

    /// Writes the Hamiltonian on a graph.
    ///
    /// # Errors
    /// A message where it cannot stand on this graph.
    fn describe(&self, graph: &Graph<'_>, builder: &mut ModelBuilder) -> Result<()>;

    /// Custom models only: the free sites on whose spins the change of energy at `site` depends, itself aside.
    fn footprint(&self, _graph: &Graph<'_>, _site: usize, _sites: &mut Vec<u32>) {}

    /// Custom models only: the energy that the callbacks add, of a whole configuration.
    ///
    /// # Errors
    /// A message where that fails.
    fn total(&self, _graph: &Graph<'_>, _view: &View<'_>) -> Result<f64> {
        Ok(0.0)
    }

    /// Custom models with discrete spins only: the change of that energy for each proposed state, one at a time.
    ///
    /// # Errors
    /// A message where that fails.
    fn delta(
        &self,
        _graph: &Graph<'_>,
        _view: &View<'_>,
        _sites: &[u32],
        _proposals: &[u8],
        changes: &mut [f64],
    ) -> Result<()> {
        changes.fill(0.0);
        Ok(())
    }

    /// Custom models with vector spins only: the same for proposed vectors, components innermost.
    ///
    /// # Errors
    /// A message where that fails.
    fn delta_vectors(
        &self,
        _graph: &Graph<'_>,
        _view: &View<'_>,
        _sites: &[u32],
        _proposals: &[f64],
        changes: &mut [f64],
    ) -> Result<()> {
        changes.fill(0.0);
        Ok(())
    }
}

/// What an update rule is prepared with.
#[derive(Clone, Debug)]
pub struct Prepare<'a> {
    /// The host.
    pub host: Host<'a>,
    /// Graph and Hamiltonian.
    pub problem: Problem<'a>,
    /// 1/(k_B T) in 1/energy, at least 0.
    pub inverse_temperature: f64,
    /// Stream key of each chain of the group; as many as there are lanes.
    pub lane_keys: Vec<StreamKey>,
    /// Stream key of the group, for rules that draw for all lanes together.
    pub group_key: StreamKey,
}

/// An update rule.
pub trait Update: Sized + Send + Sync + 'static {
    /// What the rule says of itself.
    const SPEC: UpdateSpec;
    /// A group of chains under this rule.
    type Instance<'a>: UpdateInstance;

    /// From its parameters.
    ///
    /// # Errors
    /// A message where they make no rule.
    fn new(params: &Params) -> Result<Self>;

    /// Makes an instance. Configurations are imported before the first sweep.
    ///
    /// # Errors
    /// A message where the rule cannot serve this Hamiltonian.
    fn prepare<'a>(&'a self, prepare: Prepare<'a>) -> Result<Self::Instance<'a>>;
}

/// A group of chains under a rule.
pub trait UpdateInstance: Send {
    /// Takes over the configuration of a chain (free and pinned sites).
    ///
    /// # Errors
    /// A message where it does not fit.
    fn import(&mut self, lane: usize, view: &View<'_>) -> Result<()>;

    /// Writes the configuration of a chain.
    fn export(&self, lane: usize, spins: &mut Spins<'_>);

    /// Does `count` sweeps of all chains.
    ///
    /// # Errors
    /// A message where that fails.
    fn sweep(&mut self, count: u64) -> Result<()>;

    /// Shows a chain.
    fn view(&mut self, lane: usize) -> View<'_>;

    /// Totals of a chain.
    fn tallies(&self, _lane: usize) -> Tallies {
        Tallies::default()
    }

    /// Everything that the future depends on, configurations and streams included.
    fn save(&self, out: &mut Vec<u8>);

    /// Takes back what `save` of the same revision wrote.
    ///
    /// # Errors
    /// A message where the bytes do not fit.
    fn restore(&mut self, bytes: &[u8]) -> Result<()>;

    /// Turns the adapting of step widths on or off.
    fn adapt(&mut self, _on: bool) {}

    /// Which of the rule's code runs here, in a word or two for people (`portable`, `avx512`): shown where speeds are measured. Nothing may
    /// depend on it. Empty where there is nothing to tell.
    fn path(&self) -> &str {
        ""
    }
}

/// A column of an observable.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct ColumnInfo {
    /// Name.
    pub name: String,
    /// `energy` or empty.
    pub unit: String,
    /// Unchanged by the symmetries of the Hamiltonian.
    pub invariant: bool,
    /// Numbers a measurement, 1 for a plain column.
    pub width: usize,
}

/// What is measured.
pub trait Observable: Sized + Send + Sync + 'static {
    /// What the observable says of itself.
    const SPEC: ObservableSpec;
    /// The observable on a graph.
    type Instance<'a>: ObservableInstance;

    /// From its parameters.
    ///
    /// # Errors
    /// A message where they make no observable.
    fn new(params: &Params) -> Result<Self>;

    /// Gets ready for a graph and a Hamiltonian.
    ///
    /// # Errors
    /// A message where it cannot be measured there.
    fn prepare<'a>(&'a self, host: Host<'a>, problem: Problem<'a>) -> Result<Self::Instance<'a>>;
}

/// An observable on a graph.
pub trait ObservableInstance: Send {
    /// Its columns.
    fn columns(&self) -> Vec<ColumnInfo>;

    /// Measures: as many views and tallies as it reads chains; one number a column (or `width` of them) out.
    ///
    /// # Errors
    /// A message where that fails.
    fn measure(&mut self, views: &[View<'_>], tallies: &[Tallies], values: &mut [f64]) -> Result<()>;
}
