//! All clusters at once.

use crate::adjacency::{Tie, kinds};
use crate::bonds::line;
use crate::configuration::Configuration;
use crate::links::Links;
use crate::symmetry::Symmetry;
use spinledger_numerics::random::{Halves, below_u32};
use spinledger_sdk::{
    Error, Params, Prepare, Problem, Result, Spins, Tallies, Update, UpdateInstance, UpdateSpec, View,
};
use std::cell::Cell;

/// The update rule `swendsen-wang`.
#[derive(Debug)]
pub(crate) struct SwendsenWang;

impl Update for SwendsenWang {
    const SPEC: UpdateSpec = UpdateSpec {
        name: "swendsen-wang",
        about: "cluster rule: all sites are decomposed into clusters, each of which is flipped or coloured at random; one decomposition a sweep",
        formula: "a bond joins its ends with probability max(0, 1 - exp(-(E(R a, b) - E(a, b))/T)), a and b the states of both ends, R the \
                  symmetry operation; each cluster is flipped by R with probability 1/2, or, of q equal colours, takes each with probability \
                  1/q; clusters with a pinned site stay",
        source: "Swendsen & Wang 1987 Phys. Rev. Lett. 58 86; Edwards & Sokal 1988 Phys. Rev. D 38 2009",
        forms: &["pair"],
        needs: &["inversion|permutation", "inversion|ferromagnetic"],
        ..UpdateSpec::EMPTY
    };
    type Instance<'a> = Chain<'a>;

    fn new(_: &Params) -> Result<Self> {
        Ok(SwendsenWang)
    }

    fn prepare<'a>(&'a self, prepare: Prepare<'a>) -> Result<Self::Instance<'a>> {
        Chain::new(prepare)
    }
}

/// A chain under decompositions of the whole lattice.
pub(crate) struct Chain<'a> {
    base: Configuration<'a>,
    /// Bonds whose ends differ, in the lattice's order: the ends, and the number of the bond.
    bonds: Vec<Bond>,
    /// The kinds of bonds; empty where there are too many of them.
    ties: Vec<Tie>,
    /// Kind of each bond; empty where there is one kind or too many.
    tie: Vec<u16>,
    /// For each operation and kind, by both states: the bond joins where a half word is below.
    limits: Vec<Vec<u64>>,
    links: Links,
    /// What each cluster's lowest site decides: flipped or not, or the colour.
    decided: Vec<u8>,
    /// Clusters, by lowest site, that hold a pinned site.
    stays: Vec<bool>,
    /// Energy of the configuration, once it was asked for.
    energy: Cell<Option<f64>>,
}

#[derive(Clone, Copy)]
struct Bond {
    i: u32,
    j: u32,
    number: u32,
}

impl<'a> Chain<'a> {
    /// Gets ready, with all spins in state 0 until a configuration is imported.
    ///
    /// # Errors
    /// See [`Configuration::new`]; besides, colours with a bond that favours different ones.
    fn new(prepare: Prepare<'a>) -> Result<Self> {
        let base = Configuration::new(prepare)?;
        let (graph, energy) = (&base.problem.graph, &base.problem.energy);
        let q = energy.states;
        let bonds: Vec<Bond> = match energy.pair_tables {
            [] => Vec::new(),
            _ => {
                let numbered = graph.bonds.iter().zip(0..).map(|(bond, number)| Bond { i: bond.i, j: bond.j, number });
                numbered.filter(|bond| bond.i != bond.j).collect()
            }
        };
        let (ties, tie) = kinds(bonds.len(), |at| tie_of(&base.problem, bonds[at]));
        let operations: Vec<Vec<u8>> = match &base.symmetry {
            Symmetry::Involutions(maps) => maps.clone(),
            Symmetry::Exchanges(_) => {
                let favours = |bond: &&Bond| cost(&base.problem, tie_of(&base.problem, **bond), 0, 1, 0) < 0.0;
                if let Some(bond) = bonds.iter().find(favours) {
                    return Err(Error::new(format!(
                        "clusters take colours at random only where neighbours favour equal ones, and bond {} does not; use another rule",
                        bond.number
                    )));
                }
                // Some other colour stands for all: only bonds between equal colours can join.
                vec![(0..q).map(|s| ((s + 1) % q) as u8).collect()]
            }
        };
        let limits = operations
            .iter()
            .map(|map| {
                let mut limits = Vec::with_capacity(ties.len() * q * q);
                for tie in &ties {
                    for (a, b) in (0..q).flat_map(|a| (0..q).map(move |b| (a, b))) {
                        limits.push(limit(&base, *tie, map, a, b));
                    }
                }
                limits
            })
            .collect();
        let total = graph.total;
        Ok(Chain {
            bonds,
            ties,
            tie,
            limits,
            links: Links::new(total),
            decided: vec![0; total],
            stays: vec![false; total],
            energy: Cell::new(None),
            base,
        })
    }

    /// For tests: a fault of two percent in the probability of every bond.
    #[cfg(test)]
    pub(crate) fn spoil(&mut self) {
        self.limits.iter_mut().flatten().for_each(|limit| *limit -= *limit / 50);
    }

    /// For tests: as if there were too many kinds of bonds for tables.
    #[cfg(test)]
    pub(crate) fn forget_tables(&mut self) {
        self.ties.clear();
        self.tie.clear();
    }

    /// One decomposition.
    fn decompose(&mut self) {
        let operation = match &self.base.symmetry {
            Symmetry::Involutions(maps) if maps.len() > 1 => {
                below_u32(maps.len() as u32, || self.base.words.next()) as usize
            }
            _ => 0,
        };
        self.links.part();
        match (self.ties.is_empty(), self.tie.is_empty()) {
            (true, _) => self.join_varied(operation),
            (false, true) => self.join(operation, |_, _| 0),
            (false, false) => self.join(operation, |tie, at| usize::from(tie[at])),
        }
        self.turn(operation);
        self.energy.set(None);
    }

    /// Joins the ends of bonds, a half word each in order of bonds. `kind` gives that of a bond.
    #[inline(always)]
    fn join(&mut self, operation: usize, kind: impl Fn(&[u16], usize) -> usize) {
        let q = self.base.problem.energy.states;
        let (limits, states) = (&self.limits[operation][..], &self.base.states[..]);
        let mut first = 0;
        for bonds in self.bonds.chunks(Halves::FEW) {
            let words = self.base.words.few(bonds.len());
            // Those that join are listed first, without a branch: whether a bond joins is a matter of chance.
            let mut joining = [(0, 0); Halves::FEW];
            let mut count = 0;
            for (place, (bond, &word)) in bonds.iter().zip(words).enumerate() {
                let (a, b) = (states[bond.i as usize] as usize, states[bond.j as usize] as usize);
                let limit = limits[(kind(&self.tie, first + place) * q + a) * q + b];
                joining[count] = (bond.i, bond.j);
                count += usize::from(u64::from(word) < limit);
            }
            joining[..count].iter().for_each(|(i, j)| self.links.join(*i, *j));
            first += bonds.len();
        }
    }

    /// The same with a probability computed for each bond.
    fn join_varied(&mut self, operation: usize) {
        let Some(map) = self.map(operation) else { return };
        for &bond in &self.bonds {
            let word = self.base.words.next();
            let (a, b) = (self.base.states[bond.i as usize] as usize, self.base.states[bond.j as usize] as usize);
            if u64::from(word) < limit(&self.base, tie_of(&self.base.problem, bond), &map, a, b) {
                self.links.join(bond.i, bond.j);
            }
        }
    }

    /// The map of states of an operation; of colours, one that stands for all.
    fn map(&self, operation: usize) -> Option<Vec<u8>> {
        match &self.base.symmetry {
            Symmetry::Involutions(maps) => maps.get(operation).cloned(),
            Symmetry::Exchanges(q) => Some((0..*q).map(|s| ((s + 1) % q) as u8).collect()),
        }
    }

    /// Flips or colours every cluster, one draw each in order of their lowest sites.
    fn turn(&mut self, operation: usize) {
        let sites = self.base.problem.graph.sites;
        let lowest = self.links.settle();
        let (states, words) = (&mut self.base.states[..], &mut self.base.words);
        lowest[sites..].iter().for_each(|low| self.stays[*low as usize] = true);
        let choices = match &self.base.symmetry {
            Symmetry::Involutions(_) => 2,
            Symmetry::Exchanges(q) => *q as u32,
        };
        for site in 0..sites {
            let low = lowest[site] as usize;
            if low == site {
                // Drawn also where the cluster stays, so that the stream does not depend on it.
                self.decided[site] = below_u32(choices, || words.next()) as u8;
            }
            let (decided, stays) = (self.decided[low], self.stays[low]);
            match &self.base.symmetry {
                _ if stays => {}
                Symmetry::Involutions(maps) => {
                    let state = states[site];
                    states[site] = if decided == 1 { maps[operation][state as usize] } else { state };
                }
                Symmetry::Exchanges(_) => states[site] = decided,
            }
        }
        lowest[sites..].iter().for_each(|low| self.stays[*low as usize] = false);
    }
}

/// What is special about a bond.
fn tie_of(problem: &Problem<'_>, bond: Bond) -> Tie {
    let number = bond.number as usize;
    let strength = problem.energy.bond_strengths.get(number).copied().unwrap_or(1.0);
    Tie { table: problem.energy.bond_tables[number], strength }
}

/// What it costs to take one end of a bond from a state to another, the other end being in state `b`.
fn cost(problem: &Problem<'_>, tie: Tie, a: usize, image: usize, b: usize) -> f64 {
    let q = problem.energy.states;
    let pairs = &problem.energy.pair_tables[tie.table as usize * q * q..][..q * q];
    tie.strength * (pairs[image * q + b] - pairs[a * q + b])
}

/// A bond joins its ends where a half word is below this. Of colours only equal ones are joined: `map` stands for any other colour, and what
/// it costs to meet that very colour says nothing.
fn limit(base: &Configuration<'_>, tie: Tie, map: &[u8], a: usize, b: usize) -> u64 {
    if matches!(base.symmetry, Symmetry::Exchanges(_)) && a != b {
        return 0;
    }
    line(base.inverse_temperature, cost(&base.problem, tie, a, usize::from(map[a]), b)).limit
}

impl UpdateInstance for Chain<'_> {
    fn import(&mut self, _lane: usize, view: &View<'_>) -> Result<()> {
        self.energy.set(None);
        self.base.import(view)
    }

    fn export(&self, _lane: usize, spins: &mut Spins<'_>) {
        if let Spins::States(out) = spins {
            out.copy_from_slice(&self.base.states);
        }
    }

    fn sweep(&mut self, count: u64) -> Result<()> {
        for _ in 0..count {
            if self.base.host.cancelled() {
                return Err(Error::cancelled());
            }
            self.decompose();
        }
        Ok(())
    }

    fn view(&mut self, _lane: usize) -> View<'_> {
        View::bytes(&self.base.states)
    }

    fn tallies(&self, _lane: usize) -> Tallies {
        // By definition and not followed: a decomposition changes terms all over the lattice. Kept until the next one.
        let energy = self.energy.get().or_else(|| self.base.energy().ok());
        self.energy.set(energy);
        Tallies { energy, magnetisation: self.base.magnetisation(), acceptance: None }
    }

    fn save(&self, out: &mut Vec<u8>) {
        self.base.save(out);
    }

    fn restore(&mut self, bytes: &[u8]) -> Result<()> {
        let rest = self.base.restore(bytes)?;
        self.energy.set(None);
        if rest.is_empty() { Ok(()) } else { Err(Error::new("the saved state is not one of this rule")) }
    }
}
