//! A Hamiltonian as a plugin says it, call by call.

use crate::unsound::ensure;
use crate::{EnergyData, GraphData, Result};
use std::collections::BTreeMap;

mod finish;

/// Most sites of a factor.
const MOST_SITES: u32 = 8;
/// Most energies of a factor table: 128 megabytes.
const MOST_ENERGIES: u64 = 1 << 24;

/// Collects a Hamiltonian for a graph; `spins` or `vectors` comes first.
#[derive(Debug)]
pub struct ModelParts {
    /// Of the graph: free sites, all sites, pinned sites, bonds, classes.
    sites: usize,
    total: usize,
    bonds: usize,
    classes: usize,
    energy: EnergyData,
    down: Option<u8>,
    pair: BTreeMap<u16, Vec<f64>>,
    site: BTreeMap<u16, Vec<f64>>,
    coupling: BTreeMap<u16, Vec<f64>>,
    anisotropy: BTreeMap<u16, Vec<f64>>,
    field: BTreeMap<u16, Vec<f64>>,
}

impl ModelParts {
    /// Nothing said yet, for a graph.
    pub fn new(graph: &GraphData) -> Self {
        ModelParts {
            sites: graph.sites,
            total: graph.total,
            bonds: graph.bonds.len(),
            classes: graph.class_names.len(),
            energy: EnergyData::default(),
            down: None,
            pair: BTreeMap::new(),
            site: BTreeMap::new(),
            coupling: BTreeMap::new(),
            anisotropy: BTreeMap::new(),
            field: BTreeMap::new(),
        }
    }

    /// States of a discrete spin; 0 for vector spins and before anything is said.
    pub fn states(&self) -> usize {
        self.energy.states
    }

    /// Components of a vector spin; 0 for discrete spins and before anything is said.
    pub fn components(&self) -> usize {
        self.energy.components
    }

    /// Number of sites of a factor table, if there is one of that number.
    pub fn factor_order(&self, table: u32) -> Option<u32> {
        self.energy.factor_tables.get(table as usize).map(|(order, _)| *order)
    }

    /// Whether the model's callbacks add energy.
    pub fn has_custom(&self) -> bool {
        self.energy.custom
    }

    /// A number of states that a discrete spin may have.
    ///
    /// # Errors
    /// Other than 2 to 256.
    pub fn checked_states(states: u32) -> Result<usize> {
        ensure!((2..=256).contains(&states), "a discrete spin has 2 to 256 states, not {states}");
        Ok(states as usize)
    }

    /// A number of components that a vector spin may have.
    ///
    /// # Errors
    /// Other than 2 or 3.
    pub fn checked_components(components: u32) -> Result<usize> {
        ensure!(matches!(components, 2 | 3), "a vector spin has 2 or 3 components, not {components}");
        Ok(components as usize)
    }

    /// Discrete spins. `up` and `down` are the states of pinned sites, equal to `states` where there are none.
    ///
    /// # Errors
    /// Called twice; other than 2 to 256 states; values, negation or pinned states that do not fit them.
    pub fn spins(
        &mut self,
        states: u32,
        values: Option<&[f64]>,
        negation: Option<&[u8]>,
        up: u32,
        down: u32,
    ) -> Result<()> {
        self.ensure_first()?;
        let q = Self::checked_states(states)?;
        if let Some(values) = values {
            ensure!(values.len() == q, "there are {} spin values for {q} states", values.len());
            ensure!(values.iter().all(|x| x.is_finite()), "a spin value is not finite");
            self.energy.values = values.to_vec();
        }
        if let Some(negation) = negation {
            ensure!(negation.len() == q, "the negation maps {} of {q} states", negation.len());
            ensure!(involutive(negation), "the negation is not its own inverse");
            if let Some(values) = values {
                let wrong = (0..q).find(|&s| values[usize::from(negation[s])] != -values[s]);
                ensure!(
                    wrong.is_none(),
                    "the negation does not change the sign of the value of state {}",
                    wrong.unwrap_or(0)
                );
            }
            self.energy.negation = negation.to_vec();
        }
        ensure!(up <= states && down <= states, "the states of pinned sites, {up} and {down}, are not among {states}");
        let state = |s: u32| (s < states).then_some(s as u8);
        (self.energy.states, self.energy.up, self.down) = (q, state(up), state(down));
        Ok(())
    }

    /// Vector spins of unit length, and the vector of sites pinned up.
    ///
    /// # Errors
    /// Called twice; other than 2 or 3 components; a vector that is not of unit length within 1e-12.
    pub fn vectors(&mut self, up: &[f64]) -> Result<()> {
        self.ensure_first()?;
        Self::checked_components(up.len() as u32)?;
        let square: f64 = up.iter().map(|x| x * x).sum();
        ensure!((square - 1.0).abs() <= 2e-12, "the vector of sites pinned up is not of unit length");
        self.energy.components = up.len();
        self.energy.up_vector = up.to_vec();
        Ok(())
    }

    fn ensure_first(&self) -> Result<()> {
        ensure!(self.energy.states == 0 && self.energy.components == 0, "the kind of spin is given twice");
        Ok(())
    }

    fn ensure_discrete(&self, what: &str) -> Result<usize> {
        ensure!(self.energy.states > 0, "{what} given without discrete spins");
        Ok(self.energy.states)
    }

    fn ensure_vector(&self, what: &str) -> Result<usize> {
        ensure!(self.energy.components > 0, "{what} given without vector spins");
        Ok(self.energy.components)
    }

    fn ensure_class(&self, class: u32) -> Result<u16> {
        ensure!((class as usize) < self.classes, "bond class {class} does not exist; there are {}", self.classes);
        Ok(class as u16)
    }

    /// Energies of a bond class, q x q.
    ///
    /// # Errors
    /// Vector spins, a class that does not exist or is given twice, energies of another number or not finite. The same holds below.
    pub fn pair(&mut self, class: u32, energies: &[f64]) -> Result<()> {
        let q = self.ensure_discrete("pair energies are")?;
        let class = self.ensure_class(class)?;
        insert(&mut self.pair, class, energies, q * q, "the pair energies of bond class")
    }

    /// Coupling matrix of a bond class, n x n.
    ///
    /// # Errors
    /// As for [`ModelParts::pair`], with discrete spins in place of vectors.
    pub fn coupling(&mut self, class: u32, matrix: &[f64]) -> Result<()> {
        let n = self.ensure_vector("a coupling is")?;
        let class = self.ensure_class(class)?;
        insert(&mut self.coupling, class, matrix, n * n, "the coupling of bond class")
    }

    /// Energies of the states of a site class.
    ///
    /// # Errors
    /// As for [`ModelParts::pair`].
    pub fn site(&mut self, class: u32, energies: &[f64]) -> Result<()> {
        let q = self.ensure_discrete("site energies are")?;
        insert(&mut self.site, site_class(class)?, energies, q, "the energies of site class")
    }

    /// Anisotropy of a site class, n x n.
    ///
    /// # Errors
    /// As for [`ModelParts::coupling`].
    pub fn anisotropy(&mut self, class: u32, matrix: &[f64]) -> Result<()> {
        let n = self.ensure_vector("an anisotropy is")?;
        insert(&mut self.anisotropy, site_class(class)?, matrix, n * n, "the anisotropy of site class")
    }

    /// Field of a site class, n.
    ///
    /// # Errors
    /// As for [`ModelParts::coupling`].
    pub fn field(&mut self, class: u32, field: &[f64]) -> Result<()> {
        let n = self.ensure_vector("a field is")?;
        insert(&mut self.field, site_class(class)?, field, n, "the field of site class")
    }

    /// Class of each free site.
    ///
    /// # Errors
    /// Another number of classes than of free sites.
    pub fn site_classes(&mut self, classes: &[u16]) -> Result<()> {
        ensure!(classes.len() == self.sites, "there are {} site classes for {} free sites", classes.len(), self.sites);
        self.energy.site_class = classes.to_vec();
        Ok(())
    }

    /// A factor on the energy of each bond.
    ///
    /// # Errors
    /// Another number of strengths than of bonds, or one that is not finite.
    pub fn bond_strengths(&mut self, strengths: &[f64]) -> Result<()> {
        ensure!(strengths.len() == self.bonds, "there are {} strengths for {} bonds", strengths.len(), self.bonds);
        ensure!(strengths.iter().all(|x| x.is_finite()), "a bond's strength is not finite");
        self.energy.bond_strengths = strengths.to_vec();
        Ok(())
    }

    /// A factor on the site energy of each free site.
    ///
    /// # Errors
    /// Another number of strengths than of free sites, or one that is not finite.
    pub fn site_strengths(&mut self, strengths: &[f64]) -> Result<()> {
        ensure!(strengths.len() == self.sites, "there are {} strengths for {} sites", strengths.len(), self.sites);
        ensure!(strengths.iter().all(|x| x.is_finite()), "a site's strength is not finite");
        self.energy.site_strengths = strengths.to_vec();
        Ok(())
    }

    /// Number of energies of a table over `order` sites.
    ///
    /// # Errors
    /// Vector spins, an order outside 1 to 8, or more than 2^24 energies.
    pub fn factor_energies(&self, order: u32) -> Result<usize> {
        let q = self.ensure_discrete("a factor table is")? as u64;
        ensure!((1..=MOST_SITES).contains(&order), "a factor joins 1 to {MOST_SITES} sites, not {order}");
        let count = q.pow(order);
        ensure!(count <= MOST_ENERGIES, "a factor table of {count} energies is too large");
        Ok(count as usize)
    }

    /// The next factor table.
    ///
    /// # Errors
    /// As for [`ModelParts::factor_energies`], and another number of energies, or one that is not finite.
    pub fn factor_table(&mut self, order: u32, energies: &[f64]) -> Result<()> {
        let count = self.factor_energies(order)?;
        let number = self.energy.factor_tables.len();
        ensure!(energies.len() == count, "factor table {number} has {} energies, not {count}", energies.len());
        ensure!(energies.iter().all(|x| x.is_finite()), "an energy of factor table {number} is not finite");
        self.energy.factor_tables.push((order, energies.to_vec()));
        Ok(())
    }

    /// Factors over a table: as many times its order of sites as there are factors.
    ///
    /// # Errors
    /// A table or site that does not exist, a number of sites that does not fit, a factor with a repeated or no free site.
    pub fn factors(&mut self, table: u32, sites: &[u32]) -> Result<()> {
        let Some(order) = self.factor_order(table) else {
            ensure!(false, "factor table {table} does not exist");
            return Ok(());
        };
        let order = order as usize;
        ensure!(sites.len().is_multiple_of(order), "factors over {order} sites have {} sites in all", sites.len());
        ensure!(self.energy.factor_sites.len() + sites.len() <= u32::MAX as usize, "there are too many factors");
        for (k, group) in sites.chunks_exact(order).enumerate() {
            let number = self.energy.factors.len() + k;
            for (slot, &site) in group.iter().enumerate() {
                ensure!((site as usize) < self.total, "factor {number} has site {site} of {}", self.total);
                ensure!(!group[..slot].contains(&site), "factor {number} has site {site} twice");
            }
            ensure!(group.iter().any(|&s| (s as usize) < self.sites), "factor {number} has no free site");
        }
        let first = self.energy.factor_sites.len();
        let starts = (0..sites.len() / order).map(|k| (first + k * order) as u32);
        self.energy.factors.extend(starts.map(|first| spinledger_abi::SlFactor { table, first }));
        self.energy.factor_sites.extend_from_slice(sites);
        Ok(())
    }

    /// The model's callbacks add energy.
    pub fn custom(&mut self) {
        self.energy.custom = true;
    }

    /// An involution of states that leaves the energy unchanged; whether it does is checked at the end.
    ///
    /// # Errors
    /// Vector spins, a map of another number of states, the identity, or a map that is not its own inverse.
    pub fn involution(&mut self, map: &[u8]) -> Result<()> {
        let q = self.ensure_discrete("an involution is")?;
        ensure!(map.len() == q, "an involution maps {} of {q} states", map.len());
        ensure!(involutive(map), "an involution is not its own inverse");
        ensure!((0..q).any(|s| usize::from(map[s]) != s), "an involution moves no state");
        self.energy.involutions.extend_from_slice(map);
        Ok(())
    }

    /// Every permutation of states leaves the energy unchanged; whether it does is checked at the end.
    ///
    /// # Errors
    /// Vector spins.
    pub fn permutations(&mut self) -> Result<()> {
        self.ensure_discrete("permutations are")?;
        self.energy.permutations = true;
        Ok(())
    }
}

fn site_class(class: u32) -> Result<u16> {
    ensure!(class < u32::from(u16::MAX), "site class {class} is too large");
    Ok(class as u16)
}

fn insert(map: &mut BTreeMap<u16, Vec<f64>>, class: u16, given: &[f64], count: usize, what: &str) -> Result<()> {
    ensure!(given.len() == count, "{what} {class} are {} numbers, not {count}", given.len());
    ensure!(given.iter().all(|x| x.is_finite()), "{what} {class} are not all finite");
    // Adding 0 turns -0 into 0, so that tables which are equal have equal bits.
    let old = map.insert(class, given.iter().map(|x| x + 0.0).collect());
    ensure!(old.is_none(), "{what} {class} are given twice");
    Ok(())
}

/// Whether a map of states is its own inverse.
fn involutive(map: &[u8]) -> bool {
    map.iter().enumerate().all(|(s, &t)| map.get(usize::from(t)).is_some_and(|&back| usize::from(back) == s))
}
