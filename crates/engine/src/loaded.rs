//! Plugins at work: what a worker has loaded, and the lattice and Hamiltonian of the last parcels, which the next one often shares.

use crate::failure::Failure;
use crate::job::Report;
use crate::line::Line;
use spinledger_host::{Energy, Graph, Loader, Observer, Sampler, Services};
use spinledger_numerics::random::StreamKey;
use spinledger_plan::dynamics::{Dynamics, ItemRef};
use spinledger_terms::ColumnSpec;
use std::sync::Arc;

/// Lattices with Hamiltonians that are kept.
const KEPT: usize = 2;

/// What a worker has loaded.
pub(crate) struct Loaded {
    loader: Loader,
    threads: usize,
    problems: Vec<(ItemRef, ItemRef, Problem)>,
}

/// A lattice and a Hamiltonian on it.
#[derive(Clone)]
pub(crate) struct Problem {
    /// The lattice.
    pub graph: Arc<Graph>,
    /// The Hamiltonian.
    pub energy: Arc<Energy>,
}

impl Loaded {
    /// Nothing loaded yet; parallel loops of plugins get `threads` threads.
    ///
    /// # Errors
    /// Where the threads cannot be started.
    pub(crate) fn new(threads: usize, line: Line) -> Result<Self, spinledger_host::HostError> {
        let log = Box::new(move |_, text: &str| line.send(&Report::Log { text: text.to_owned() }));
        let loader = Loader::new(Services { threads, log })?;
        Ok(Loaded { loader, threads, problems: Vec::new() })
    }

    /// Threads lent to parallel loops.
    pub(crate) fn threads(&self) -> usize {
        self.threads
    }

    /// The lattice and Hamiltonian of a point.
    ///
    /// # Errors
    /// In words, where a plugin cannot be loaded or refuses.
    pub(crate) fn problem(&mut self, dynamics: &Dynamics) -> Result<Problem, Failure> {
        self.problem_of(&dynamics.lattice, &dynamics.model)
    }

    /// A lattice and a Hamiltonian on it.
    ///
    /// # Errors
    /// As of [`Loaded::problem`].
    pub(crate) fn problem_of(&mut self, lattice: &ItemRef, model: &ItemRef) -> Result<Problem, Failure> {
        if let Some((_, _, problem)) = self.problems.iter().find(|(l, m, _)| l == lattice && m == model) {
            return Ok(problem.clone());
        }
        let graph = match self.problems.iter().find(|(l, _, _)| l == lattice) {
            Some((_, _, known)) => known.graph.clone(),
            None => self.loader.lattice(&lattice.identity, &lattice.parameters)?.build()?,
        };
        let energy = self.loader.model(&model.identity, &model.parameters)?.describe(&graph)?;
        let problem = Problem { graph, energy };
        self.problems.truncate(KEPT - 1);
        self.problems.insert(0, (lattice.clone(), model.clone(), problem.clone()));
        Ok(problem)
    }

    /// The rules of a sweep, prepared for a group of chains, each with streams of its own.
    ///
    /// # Errors
    /// In words, where a plugin cannot be loaded or refuses.
    pub(crate) fn rules(
        &mut self,
        dynamics: &Dynamics,
        problem: &Problem,
        stream: &StreamKey,
    ) -> Result<Vec<(Sampler, u64)>, Failure> {
        let mut rules = Vec::new();
        for (number, (rule, times)) in dynamics.update.iter().enumerate() {
            let group_key = stream.derive(&format!("update {number}"));
            let lane_keys: Vec<StreamKey> = (0..dynamics.lanes).map(|lane| group_key.lane(lane)).collect();
            let item = self.loader.update(&rule.identity, &rule.parameters)?;
            let sampler =
                item.prepare(&problem.graph, &problem.energy, dynamics.inverse_temperature, &lane_keys, group_key)?;
            rules.push((sampler, *times));
        }
        Ok(rules)
    }

    /// The observables, ready to measure, and their columns.
    ///
    /// # Errors
    /// In words, where a plugin cannot be loaded or refuses, or two columns have one name.
    pub(crate) fn observers(
        &mut self,
        dynamics: &Dynamics,
        problem: &Problem,
    ) -> Result<(Vec<Observer>, Vec<ColumnSpec>), Failure> {
        let mut observers = Vec::new();
        let mut columns: Vec<ColumnSpec> = Vec::new();
        for observable in &dynamics.observe {
            let item = self.loader.observable(&observable.identity, &observable.parameters)?;
            let observer = item.prepare(&problem.graph, &problem.energy)?;
            for column in observer.columns() {
                if columns.iter().any(|c| c.name == column.name) {
                    return Err(format!("two observables have the column `{}`", column.name).into());
                }
                columns.push(column.clone());
            }
            observers.push(observer);
        }
        Ok((observers, columns))
    }
}
