//! The Hamiltonian as the host flattens it.

use crate::{Error, Graph, Result, View};
use spinledger_flatten::{Spins, Terms};

/// A table over k sites.
#[derive(Clone, Copy, Debug)]
pub struct FactorTable<'a> {
    /// Number of sites.
    pub order: usize,
    /// q^order energies, the first site's state counting most.
    pub energies: &'a [f64],
}

/// One many-body term: its table, and where its sites begin in `factor_sites`.
pub type Factor = spinledger_abi::SlFactor;

/// A Hamiltonian on a graph. For discrete spins the energy is
///
/// sum over bonds b of strength(b) E\[table(b)\]\[s_i\]\[s_j\] + sum over free sites of strength(i) E\[class(i)\]\[s_i\] + factors,
///
/// for vector spins the sum over bonds of strength(b) S_i^T M S_j plus strength(i) (S^T A S + f . S) over free sites; [`Custom`] energy is added where there is any.
/// Signs of antiperiodic bonds are folded into the tables. Slices that do not apply are empty.
#[derive(Clone, Debug)]
pub struct Energy<'a> {
    /// States of a discrete spin; 0 for vector spins.
    pub states: usize,
    /// Components of a vector spin; 0 for discrete spins.
    pub components: usize,
    /// Spin value of each state; empty where states have none.
    pub values: &'a [f64],
    /// The state that is minus each state; empty where there is none.
    pub negation: &'a [u8],
    /// State of each pinned site.
    pub pinned_states: &'a [u8],
    /// Vector of each pinned site.
    pub pinned_vectors: &'a [f64],
    /// Number of pair tables or vector couplings.
    pub tables: usize,
    /// `tables` x q x q, by own state (row) and neighbour's state.
    pub pair_tables: &'a [f64],
    /// Table of each entry of `Graph::neighbours`, as seen from the row's site.
    pub neighbour_tables: &'a [u16],
    /// Table of each bond, rows by the state at `i`.
    pub bond_tables: &'a [u16],
    /// Factor on each entry of `Graph::neighbours`; empty where all are 1.
    pub neighbour_strengths: &'a [f64],
    /// Factor on each bond; empty where all are 1.
    pub bond_strengths: &'a [f64],
    /// Number of site classes.
    pub site_classes: usize,
    /// `site_classes` x q; empty without site energies.
    pub site_tables: &'a [f64],
    /// Class of each free site.
    pub site_class: &'a [u16],
    /// Factor on each site's energy; empty where all are 1.
    pub site_strengths: &'a [f64],
    /// Tables of many-body terms.
    pub factor_tables: Vec<FactorTable<'a>>,
    /// Many-body terms.
    pub factors: &'a [Factor],
    /// Sites of all factors.
    pub factor_sites: &'a [u32],
    /// Where the factors of each free site begin; empty without factors.
    pub site_factor_offsets: &'a [u32],
    /// Factors of each site.
    pub site_factors: &'a [u32],
    /// Which of the factor's sites it is.
    pub site_factor_slots: &'a [u32],
    /// `tables` x n x n.
    pub couplings: &'a [f64],
    /// `site_classes` x n x n; empty without.
    pub anisotropies: &'a [f64],
    /// `site_classes` x n; empty without.
    pub fields: &'a [f64],
    /// Callbacks of a custom model.
    pub custom: Option<Custom<'a>>,
    /// Involutions of states under which the energy is unchanged, pinned rims aside; q each.
    pub involutions: Vec<&'a [u8]>,
    /// Every permutation of states is such a symmetry.
    pub permutations: bool,
    /// Where the sites of each colour begin in `colour_sites`; one longer than the number of colours.
    pub colour_offsets: &'a [u32],
    /// Free sites by colour, ascending within each: no two of a colour interact.
    pub colour_sites: &'a [u32],
}

impl<'a> Energy<'a> {
    /// Number of colours.
    pub fn colours(&self) -> usize {
        self.colour_offsets.len().saturating_sub(1)
    }

    /// The free sites of a colour. Panics where there is no such colour.
    pub fn colour(&self, colour: usize) -> &'a [u32] {
        &self.colour_sites[self.colour_offsets[colour] as usize..self.colour_offsets[colour + 1] as usize]
    }
}

/// The callbacks of a custom model.
#[derive(Clone, Copy, Debug)]
pub struct Custom<'a> {
    pub(crate) raw: &'a spinledger_abi::SlCustom,
    pub(crate) graph: &'a spinledger_abi::SlGraph,
    pub(crate) states: usize,
    pub(crate) components: usize,
}

// SAFETY: what the pointers lead to is immutable: the graph is the host's, and a model is, by the rules of the interface, shared
// between threads and never changed. The callbacks may therefore run on any thread, and on several at once.
unsafe impl Send for Custom<'_> {}
// SAFETY: as above.
unsafe impl Sync for Custom<'_> {}

impl Custom<'_> {
    /// The energy that the model adds, of a whole configuration.
    ///
    /// # Errors
    /// What the model says.
    pub fn total(&self, view: &View<'_>) -> Result<f64> {
        crate::view::custom_total(self, view)
    }

    /// The change of that energy for each proposed state, taken one at a time from the configuration shown. The three slices have one length.
    ///
    /// # Errors
    /// What the model says.
    ///
    /// # Panics
    /// Where the lengths differ.
    pub fn delta(&self, view: &View<'_>, sites: &[u32], proposals: &[u8], changes: &mut [f64]) -> Result<()> {
        assert!(sites.len() == proposals.len() && sites.len() == changes.len(), "three slices of one length");
        if let Some(state) = proposals.iter().find(|state| usize::from(**state) >= self.states) {
            return Err(Error::new(format!("state {state} is proposed; there are {}", self.states)));
        }
        // SAFETY: one proposal a site; of vector spins, every state was just refused.
        unsafe { crate::view::custom_delta(self, view, sites, proposals.as_ptr().cast(), changes) }
    }

    /// The same for proposed vectors, components innermost.
    ///
    /// # Errors
    /// What the model says.
    ///
    /// # Panics
    /// Where the lengths do not fit.
    pub fn delta_vectors(&self, view: &View<'_>, sites: &[u32], vectors: &[f64], changes: &mut [f64]) -> Result<()> {
        assert!(
            self.components > 0 && vectors.len() == sites.len() * self.components && sites.len() == changes.len(),
            "a vector of the model's components and a change for each site"
        );
        // SAFETY: one vector of the model's components a site.
        unsafe { crate::view::custom_delta(self, view, sites, vectors.as_ptr().cast(), changes) }
    }

    /// The interface's form of a configuration, if it is one of this model on this lattice.
    pub(crate) fn shown(&self, view: &View<'_>) -> Result<spinledger_abi::SlView> {
        check(self.states, self.components, self.graph.total as usize, view)?;
        view.raw()
    }
}

/// The graph and the Hamiltonian on it.
#[derive(Clone, Debug)]
pub struct Problem<'a> {
    /// The lattice.
    pub graph: Graph<'a>,
    /// The Hamiltonian.
    pub energy: Energy<'a>,
}

impl<'a> Problem<'a> {
    /// Total energy of a configuration by definition: pairs, site energies and many-body terms, or couplings, anisotropies and fields, each by an
    /// ordered sum, then what the callbacks of a custom model add. Cost: one pass over bonds, sites and many-body terms.
    ///
    /// # Errors
    /// Where the configuration is of another kind or number of sites, or the callbacks fail.
    ///
    /// # Panics
    /// Where the configuration holds a state that does not exist.
    pub fn total(&self, view: &View<'_>) -> Result<f64> {
        self.check(view)?;
        let terms = self.terms();
        let mut total = match view {
            // Told apart once and not at every site.
            View::Bytes { data, stride: 1, .. } => terms.total(&Spins::States(data)),
            _ => terms.total(view),
        };
        if let Some(custom) = &self.energy.custom {
            total += custom.total(view)?;
        }
        Ok(total)
    }

    /// Refuses a configuration of another kind or number of sites than the model's and the lattice's.
    ///
    /// # Errors
    /// Then.
    pub fn check(&self, view: &View<'_>) -> Result<()> {
        check(self.energy.states, self.energy.components, self.graph.total, view)
    }

    /// All terms but the callbacks.
    fn terms(&self) -> Terms<'_> {
        let (graph, energy) = (&self.graph, &self.energy);
        Terms {
            sites: graph.sites,
            states: energy.states,
            components: energy.components,
            bonds: graph.bonds,
            bond_tables: energy.bond_tables,
            bond_strengths: energy.bond_strengths,
            pair_tables: energy.pair_tables,
            couplings: energy.couplings,
            site_class: energy.site_class,
            site_tables: energy.site_tables,
            site_strengths: energy.site_strengths,
            anisotropies: energy.anisotropies,
            fields: energy.fields,
            factor_tables: energy.factor_tables.iter().map(|table| (table.order, table.energies)).collect(),
            factors: energy.factors,
            factor_sites: energy.factor_sites,
        }
    }
}

/// Refuses a configuration of another kind or number of sites.
fn check(states: usize, components: usize, total: usize, view: &View<'_>) -> Result<()> {
    let fits = match view {
        View::Bytes { .. } => states > 0,
        View::Bits { .. } => states == 2,
        View::Vectors { components: shown, .. } => components > 0 && *shown == components,
    };
    if !fits {
        return Err(Error::new("the configuration does not hold the model's kind of spin"));
    }
    if view.sites() != total {
        return Err(Error::new(format!("the configuration has {} sites, and the lattice {total}", view.sites())));
    }
    Ok(())
}
