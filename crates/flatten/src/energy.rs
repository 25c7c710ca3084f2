//! The flattened Hamiltonian.

use crate::graph::pointer;
use spinledger_abi::{SlCustom, SlEnergy, SlFactor, SlFactorTable};
use std::ptr;

/// A Hamiltonian on a graph. Fields are as in [`SlEnergy`]; vectors that do not apply are empty.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct EnergyData {
    /// States of a discrete spin; 0 for vector spins.
    pub states: usize,
    /// Components of a vector spin; 0 for discrete spins.
    pub components: usize,
    /// Spin value of each state.
    pub values: Vec<f64>,
    /// The state that is minus each state.
    pub negation: Vec<u8>,
    /// The state of sites pinned up, where the model knows directions.
    pub up: Option<u8>,
    /// The vector of sites pinned up; empty for discrete spins.
    pub up_vector: Vec<f64>,
    /// State of each pinned site.
    pub pinned_states: Vec<u8>,
    /// Vector of each pinned site.
    pub pinned_vectors: Vec<f64>,
    /// Number of pair tables or vector couplings.
    pub tables: usize,
    /// Energies by own state (row) and neighbour's state.
    pub pair_tables: Vec<f64>,
    /// Table of each entry of the graph's `neighbours`, as seen from the row's site.
    pub neighbour_tables: Vec<u16>,
    /// Table of each bond, rows by the state at `i`.
    pub bond_tables: Vec<u16>,
    /// Factor on each entry of `neighbours`.
    pub neighbour_strengths: Vec<f64>,
    /// Factor on each bond.
    pub bond_strengths: Vec<f64>,
    /// Number of site classes.
    pub site_classes: usize,
    /// Energies by site class and state.
    pub site_tables: Vec<f64>,
    /// Class of each free site.
    pub site_class: Vec<u16>,
    /// Factor on each site's energy.
    pub site_strengths: Vec<f64>,
    /// Number of sites and energies of each factor table.
    pub factor_tables: Vec<(u32, Vec<f64>)>,
    /// Many-body terms.
    pub factors: Vec<SlFactor>,
    /// Sites of all factors.
    pub factor_sites: Vec<u32>,
    /// Where the factors of each free site begin.
    pub site_factor_offsets: Vec<u32>,
    /// Factors of each site.
    pub site_factors: Vec<u32>,
    /// Which of the factor's sites it is.
    pub site_factor_slots: Vec<u32>,
    /// Coupling matrices, own components as rows.
    pub couplings: Vec<f64>,
    /// Anisotropies by site class.
    pub anisotropies: Vec<f64>,
    /// Fields by site class.
    pub fields: Vec<f64>,
    /// The model's callbacks add energy.
    pub custom: bool,
    /// Involutions of states, one after the other.
    pub involutions: Vec<u8>,
    /// Every permutation of states is a symmetry.
    pub permutations: bool,
    /// Where the sites of each colour begin.
    pub colour_offsets: Vec<u32>,
    /// Free sites by colour, ascending within each.
    pub colour_sites: Vec<u32>,
}

impl EnergyData {
    /// The factor tables in the interface's form; valid while the energies of `self` live and are not changed.
    pub fn factor_table_list(&self) -> Vec<SlFactorTable> {
        let raw = |(order, energies): &(u32, Vec<f64>)| SlFactorTable {
            order: *order,
            reserved: 0,
            energies: energies.as_ptr(),
        };
        self.factor_tables.iter().map(raw).collect()
    }

    /// The interface's form. The pointers are valid while the vectors of `self` and `factor_tables` (from
    /// [`EnergyData::factor_table_list`]) live and are not changed; moving `self` as a whole is harmless, since the vectors' memory stays.
    pub fn raw(&self, factor_tables: &[SlFactorTable], custom: *const SlCustom) -> SlEnergy {
        SlEnergy {
            size: size_of::<SlEnergy>(),
            states: self.states as u32,
            components: self.components as u32,
            values: pointer(&self.values),
            negation: pointer(&self.negation),
            pinned_states: pointer(&self.pinned_states),
            pinned_vectors: pointer(&self.pinned_vectors),
            tables: self.tables as u32,
            site_classes: self.site_classes as u32,
            pair_tables: pointer(&self.pair_tables),
            neighbour_tables: pointer(&self.neighbour_tables),
            bond_tables: pointer(&self.bond_tables),
            neighbour_strengths: pointer(&self.neighbour_strengths),
            bond_strengths: pointer(&self.bond_strengths),
            site_tables: pointer(&self.site_tables),
            site_class: pointer(&self.site_class),
            site_strengths: pointer(&self.site_strengths),
            factor_tables: factor_tables.len(),
            factor_table_list: pointer(factor_tables),
            factors: self.factors.len(),
            factor_list: pointer(&self.factors),
            factor_sites: pointer(&self.factor_sites),
            site_factor_offsets: pointer(&self.site_factor_offsets),
            site_factors: pointer(&self.site_factors),
            site_factor_slots: pointer(&self.site_factor_slots),
            couplings: pointer(&self.couplings),
            anisotropies: pointer(&self.anisotropies),
            fields: pointer(&self.fields),
            custom: if self.custom { custom } else { ptr::null() },
            involutions: self.involutions.len() / self.states.max(1),
            involution_list: pointer(&self.involutions),
            permutations: u32::from(self.permutations),
            colours: self.colour_offsets.len().saturating_sub(1) as u32,
            colour_offsets: self.colour_offsets.as_ptr(),
            colour_sites: self.colour_sites.as_ptr(),
        }
    }
}
