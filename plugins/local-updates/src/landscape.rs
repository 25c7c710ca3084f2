//! The energy as a function of the state of one site, all others held.

use spinledger_sdk::{Error, FactorTable, Neighbours, Problem, Result, View};

/// States of one chain of a group: site s is byte `s * lanes + lane`.
#[derive(Clone, Copy)]
pub(crate) struct States<'a> {
    /// All chains.
    pub(crate) data: &'a [u8],
    /// Number of chains.
    pub(crate) lanes: usize,
    /// Which of them.
    pub(crate) lane: usize,
}

impl<'a> States<'a> {
    /// The state of a site, free or pinned.
    #[inline]
    pub(crate) fn at(&self, site: usize) -> u8 {
        self.data[site * self.lanes + self.lane]
    }

    /// As the interface shows it.
    pub(crate) fn view(&self) -> View<'a> {
        View::Bytes { sites: self.data.len() / self.lanes, data: &self.data[self.lane..], stride: self.lanes }
    }
}

/// A Hamiltonian of discrete spins, arranged by site.
///
/// Bonds of a site with itself (period one) are taken out of the adjacency and counted with the site's own energy, so that no sum over
/// neighbours reads the site that it is about.
pub(crate) struct Landscape<'a> {
    /// Graph and Hamiltonian.
    pub(crate) problem: Problem<'a>,
    around: Neighbours<'a>,
}

impl<'a> Landscape<'a> {
    /// Arranges a Hamiltonian. Cost: one pass over the adjacency.
    ///
    /// # Errors
    /// Where spins are not discrete.
    pub(crate) fn new(problem: Problem<'a>) -> Result<Self> {
        if problem.energy.states == 0 {
            return Err(Error::new("this rule serves discrete spins, not vectors"));
        }
        Ok(Landscape { around: Neighbours::new(&problem), problem })
    }

    /// Number of states of a spin.
    pub(crate) fn states(&self) -> usize {
        self.problem.energy.states
    }

    /// Neighbours of a free site, itself aside.
    pub(crate) fn neighbours(&self, site: usize) -> &[u32] {
        &self.around.sites[self.around.range(site)]
    }

    /// Pair table and strength of each of these neighbours.
    pub(crate) fn ties(&self, site: usize) -> impl Iterator<Item = (u16, f64)> {
        self.around.range(site).map(|entry| self.around.tie(entry))
    }

    /// Energies of a pair table, rows by own state.
    pub(crate) fn table(&self, table: u16) -> &'a [f64] {
        let q = self.states();
        &self.problem.energy.pair_tables[table as usize * q * q..][..q * q]
    }

    /// Energy that a free site has by itself in a state.
    #[inline]
    pub(crate) fn own(&self, site: usize, state: usize) -> f64 {
        let energy = &self.problem.energy;
        let mut own = 0.0;
        if !energy.site_tables.is_empty() {
            let strength = energy.site_strengths.get(site).copied().unwrap_or(1.0);
            own = strength * energy.site_tables[energy.site_class[site] as usize * energy.states + state];
        }
        if !self.around.selves.is_empty() {
            own += self.around.selves[site * energy.states + state];
        }
        own
    }

    /// Whether the energy at a free site is that of itself and its neighbours, and nothing else.
    pub(crate) fn is_pairwise(&self, site: usize) -> bool {
        let energy = &self.problem.energy;
        let factors = energy.site_factor_offsets;
        energy.custom.is_none() && (factors.is_empty() || factors[site] == factors[site + 1])
    }

    /// Change of energy, that of custom callbacks aside, when a free site goes from one state to another.
    ///
    /// Exchanging `from` and `to` gives exactly the opposite: each term is a difference of two energies, and terms are added in one order.
    pub(crate) fn change(&self, site: usize, from: u8, to: u8, states: States<'_>) -> f64 {
        let q = self.states();
        let (from, to) = (from as usize, to as usize);
        let mut change = self.own(site, to) - self.own(site, from);
        for entry in self.around.range(site) {
            let other = states.at(self.around.sites[entry] as usize) as usize;
            let (table, strength) = self.around.tie(entry);
            let table = self.table(table);
            change += strength * (table[to * q + other] - table[from * q + other]);
        }
        self.visit_factors(site, |table, sites, slot| {
            let (rest, unit) = rest_of(q, sites, slot, states);
            change += table.energies[rest + to * unit] - table.energies[rest + from * unit];
        });
        change
    }

    /// Shows the many-body terms of a free site: table, sites, and which of them it is.
    fn visit_factors(&self, site: usize, mut visit: impl FnMut(FactorTable<'a>, &'a [u32], usize)) {
        let energy = &self.problem.energy;
        let [first, last] = energy.site_factor_offsets.get(site..site + 2).map_or([0, 0], |o| [o[0], o[1]]);
        for place in first as usize..last as usize {
            let factor = energy.factors[energy.site_factors[place] as usize];
            let table = energy.factor_tables[factor.table as usize];
            let sites = &energy.factor_sites[factor.first as usize..][..table.order];
            visit(table, sites, energy.site_factor_slots[place] as usize);
        }
    }

    /// A number that |change| at a free site never exceeds, whatever its own and the others' states: the sum over terms of the largest
    /// spread of the term over the site's states. Infinite with custom callbacks.
    pub(crate) fn bound(&self, site: usize) -> f64 {
        let q = self.states();
        if self.problem.energy.custom.is_some() {
            return f64::INFINITY;
        }
        let mut bound = spread((0..q).map(|s| self.own(site, s)));
        for (table, strength) in self.ties(site) {
            let table = self.table(table);
            let widest = (0..q).map(|other| spread((0..q).map(|s| table[s * q + other]))).fold(0.0, f64::max);
            bound += strength.abs() * widest;
        }
        self.visit_factors(site, |table, _, slot| {
            let unit = q.pow((table.order - 1 - slot) as u32);
            let rests = (0..table.energies.len()).filter(|index| (index / unit).is_multiple_of(q));
            bound += rests.map(|rest| spread((0..q).map(|s| table.energies[rest + s * unit]))).fold(0.0, f64::max);
        });
        bound
    }

    /// Total energy of a configuration.
    ///
    /// # Errors
    /// What the callbacks say.
    pub(crate) fn total(&self, states: States<'_>) -> Result<f64> {
        self.problem.total(&states.view())
    }
}

/// Index into a factor's table with state 0 at a slot, and what one step of the slot's state adds.
fn rest_of(q: usize, sites: &[u32], slot: usize, states: States<'_>) -> (usize, usize) {
    let (mut rest, mut unit) = (0, 1);
    for (place, site) in sites.iter().enumerate() {
        rest = rest * q + if place == slot { 0 } else { states.at(*site as usize) as usize };
        if place > slot {
            unit *= q;
        }
    }
    (rest, unit)
}

/// Largest minus smallest.
fn spread(values: impl Iterator<Item = f64>) -> f64 {
    let (low, high) = values.fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), v| (l.min(v), h.max(v)));
    high - low
}
