//! Energies by definition, term by term: what every rule is compared with.

use crate::{EnergyData, GraphData};
use spinledger_abi::{SlBond, SlFactor};
use spinledger_numerics::sum::{CompensatedSum, sum_by};

/// A configuration of free and pinned sites.
#[derive(Clone, Copy, Debug)]
pub enum Spins<'a> {
    /// One state a site.
    States(&'a [u8]),
    /// One vector a site, components innermost.
    Vectors(&'a [f64]),
}

/// Where spins are read from.
pub trait Shown {
    /// The state of a site of a discrete configuration.
    fn state(&self, site: usize) -> usize;
    /// A component of the vector at a site; `components` is that of the model.
    fn component(&self, site: usize, component: usize, components: usize) -> f64;
}

impl Shown for Spins<'_> {
    #[inline]
    fn state(&self, site: usize) -> usize {
        match self {
            Spins::States(states) => usize::from(states[site]),
            Spins::Vectors(_) => panic!("a vector has no state"),
        }
    }

    #[inline]
    fn component(&self, site: usize, component: usize, components: usize) -> f64 {
        match self {
            Spins::Vectors(vectors) => vectors[site * components + component],
            Spins::States(_) => panic!("a state has no components"),
        }
    }
}

/// The terms of a Hamiltonian, callbacks aside, borrowed from whoever keeps them. Fields are as in [`EnergyData`] and [`GraphData`].
#[derive(Clone, Debug)]
#[expect(missing_docs, reason = "fields are those of `EnergyData`")]
pub struct Terms<'a> {
    pub sites: usize,
    pub states: usize,
    pub components: usize,
    pub bonds: &'a [SlBond],
    pub bond_tables: &'a [u16],
    pub bond_strengths: &'a [f64],
    pub pair_tables: &'a [f64],
    pub couplings: &'a [f64],
    pub site_class: &'a [u16],
    pub site_tables: &'a [f64],
    pub site_strengths: &'a [f64],
    pub anisotropies: &'a [f64],
    pub fields: &'a [f64],
    /// Number of sites and energies of each table.
    pub factor_tables: Vec<(usize, &'a [f64])>,
    pub factors: &'a [SlFactor],
    pub factor_sites: &'a [u32],
}

impl<'a> Terms<'a> {
    /// Those of a flattened Hamiltonian on its lattice.
    pub fn of(graph: &'a GraphData, energy: &'a EnergyData) -> Self {
        Terms {
            sites: graph.sites,
            states: energy.states,
            components: energy.components,
            bonds: &graph.bonds,
            bond_tables: &energy.bond_tables,
            bond_strengths: &energy.bond_strengths,
            pair_tables: &energy.pair_tables,
            couplings: &energy.couplings,
            site_class: &energy.site_class,
            site_tables: &energy.site_tables,
            site_strengths: &energy.site_strengths,
            anisotropies: &energy.anisotropies,
            fields: &energy.fields,
            factor_tables: energy.factor_tables.iter().map(|(order, table)| (*order as usize, &table[..])).collect(),
            factors: &energy.factors,
            factor_sites: &energy.factor_sites,
        }
    }

    /// Total energy: pairs in order of bonds, sites, and factors, each by an ordered sum.
    ///
    /// # Panics
    /// Where the configuration is of another kind, has too few sites, or holds a state that does not exist.
    pub fn total(&self, shown: &impl Shown) -> f64 {
        if self.components > 0 { self.of_vectors(shown) } else { self.of_states(shown) }
    }

    fn of_states(&self, shown: &impl Shown) -> f64 {
        let q = self.states;
        let state = |site: u32| shown.state(site as usize);
        let mut total = 0.0;
        if !self.pair_tables.is_empty() {
            total += sum_by(self.bonds.len(), |b| {
                let bond = &self.bonds[b];
                let table = &self.pair_tables[usize::from(self.bond_tables[b]) * q * q..][..q * q];
                strength(self.bond_strengths, b) * table[state(bond.i) * q + state(bond.j)]
            });
        }
        if !self.site_tables.is_empty() {
            total += sum_by(self.sites, |s| {
                let table = &self.site_tables[usize::from(self.site_class[s]) * q..][..q];
                strength(self.site_strengths, s) * table[shown.state(s)]
            });
        }
        total
            + sum_by(self.factors.len(), |f| {
                let factor = &self.factors[f];
                let (order, table) = self.factor_tables[factor.table as usize];
                let sites = &self.factor_sites[factor.first as usize..][..order];
                table[sites.iter().fold(0, |index, &s| index * q + state(s))]
            })
    }

    fn of_vectors(&self, shown: &impl Shown) -> f64 {
        let n = self.components;
        // u^T M v over the components of two sites.
        let form = |matrix: &[f64], i: usize, j: usize| {
            let row = |a: usize| (0..n).map(|b| matrix[a * n + b] * shown.component(j, b, n)).sum::<f64>();
            (0..n).map(|a| shown.component(i, a, n) * row(a)).sum::<f64>()
        };
        let mut total = 0.0;
        if !self.couplings.is_empty() {
            total += sum_by(self.bonds.len(), |b| {
                let bond = &self.bonds[b];
                let matrix = &self.couplings[usize::from(self.bond_tables[b]) * n * n..][..n * n];
                strength(self.bond_strengths, b) * form(matrix, bond.i as usize, bond.j as usize)
            });
        }
        // Anisotropy and field of one vector.
        let alone = |s: usize| {
            let class = usize::from(self.site_class[s]);
            let mut own = 0.0;
            if !self.anisotropies.is_empty() {
                own += form(&self.anisotropies[class * n * n..][..n * n], s, s);
            }
            if !self.fields.is_empty() {
                own += (0..n).map(|c| self.fields[class * n + c] * shown.component(s, c, n)).sum::<f64>();
            }
            own
        };
        total += sum_by(self.sites, |s| strength(self.site_strengths, s) * alone(s));
        total
    }
}

/// Total energy of a configuration without the callbacks' share. See [`Terms::total`].
///
/// # Panics
/// Where the configuration is of another kind or length than the graph's `total`, or holds a state that does not exist.
pub fn total(graph: &GraphData, energy: &EnergyData, spins: Spins<'_>) -> f64 {
    match spins {
        Spins::States(states) => assert!(energy.states > 0 && states.len() == graph.total, "one state a site"),
        Spins::Vectors(vectors) => {
            let n = energy.components;
            assert!(n > 0 && vectors.len() == graph.total * n, "one vector a site");
        }
    }
    Terms::of(graph, energy).total(&spins)
}

/// A strength; without a list all are 1.
fn strength(strengths: &[f64], index: usize) -> f64 {
    strengths.get(index).copied().unwrap_or(1.0)
}

/// Sum of the largest magnitude that each term can have (for vectors: of the sum of magnitudes of its matrix): what a tolerance for totals
/// is a multiple of. Callbacks are not covered.
pub fn scale(graph: &GraphData, energy: &EnergyData) -> f64 {
    let largest = |table: &[f64]| table.iter().fold(0.0f64, |most, x| most.max(x.abs()));
    let all = |matrix: &[f64]| matrix.iter().map(|x| x.abs()).sum::<f64>();
    let (q, n) = (energy.states, energy.components);
    let pairs: Vec<f64> = match n {
        0 => energy.pair_tables.chunks_exact((q * q).max(1)).map(largest).collect(),
        _ => energy.couplings.chunks_exact(n * n).map(all).collect(),
    };
    let mut sum = CompensatedSum::new();
    for (b, &table) in energy.bond_tables.iter().enumerate().take(graph.bonds.len()) {
        sum.add(strength(&energy.bond_strengths, b).abs() * pairs[usize::from(table)]);
    }
    let class = |class: usize, width: usize, numbers: &[f64], size: &dyn Fn(&[f64]) -> f64| match numbers {
        [] => 0.0,
        numbers => size(&numbers[class * width..][..width]),
    };
    for (s, &c) in energy.site_class.iter().enumerate() {
        let c = usize::from(c);
        let own = class(c, q, &energy.site_tables, &largest)
            + class(c, n * n, &energy.anisotropies, &all)
            + class(c, n, &energy.fields, &all);
        sum.add(strength(&energy.site_strengths, s).abs() * own);
    }
    let tables: Vec<f64> = energy.factor_tables.iter().map(|(_, table)| largest(table)).collect();
    for factor in &energy.factors {
        sum.add(tables[factor.table as usize]);
    }
    sum.value()
}
