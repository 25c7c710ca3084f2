//! A Hamiltonian as this library needs it: two states, one strength of coupling, nothing else.

use spinledger_sdk::{Error, Neighbours, Problem, Result};
use std::collections::BTreeMap;

/// What to say where it is something else.
const OTHERS: &str = "`metropolis` and `heat-bath` serve any energy of discrete spins";

/// Pair energies e(same), e(different) = e(same) + d, with |d| the same on all bonds that are coupled at all.
///
/// A bond is broken where its energy is the higher of the two; the energy is [`Coupling::base`] + [`Coupling::step`] times the number of broken
/// bonds, and a spin with n of z bonds broken changes it by step (z - 2 n) when it flips.
#[derive(Debug)]
pub(crate) struct Coupling {
    /// |d|; 0 where nothing is coupled.
    pub(crate) step: f64,
    /// Energy with no bond broken.
    pub(crate) base: f64,
    /// Like states break a bond, unlike ones do not: the rule for all bonds, but for those turned around.
    pub(crate) opposed: bool,
    /// Where the neighbours of each free site begin.
    pub(crate) offsets: Vec<u32>,
    /// The neighbours that are coupled, the site itself aside.
    pub(crate) neighbours: Vec<Neighbour>,
    /// Coupled bonds between two sites.
    pub(crate) bonds: Vec<Tie>,
}

/// A neighbour.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub(crate) struct Neighbour {
    pub(crate) site: u32,
    /// The bond is turned around: it is broken where others are not. Across an antiperiodic seam, for instance.
    pub(crate) turned: bool,
}

/// A bond.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Tie {
    /// Its number in the lattice.
    pub(crate) number: usize,
    pub(crate) from: u32,
    pub(crate) to: Neighbour,
}

impl Coupling {
    /// Reads a Hamiltonian. Cost: one pass over bonds and adjacency.
    ///
    /// # Errors
    /// Where it is not of this kind, with the rules that serve it.
    pub(crate) fn new(problem: &Problem<'_>) -> Result<Self> {
        let (graph, energy) = (&problem.graph, &problem.energy);
        let refuse = |what: &str| Err(Error::new(format!("`multi-spin` serves {what}; {OTHERS}")));
        if energy.states != 2 {
            return refuse("spins of two states only");
        }
        if energy.custom.is_some() || !energy.factors.is_empty() {
            return refuse("pair energies only");
        }
        if energy.site_tables.as_chunks::<2>().0.iter().any(|[first, second]| first != second) {
            return refuse("no field");
        }
        let tables = energy.pair_tables.as_chunks::<4>().0;
        if tables.iter().any(|[uu, ud, du, dd]| uu != dd || ud != du) {
            return refuse("pair energies that depend only on whether two states are alike");
        }
        let difference = |table: u16, strength: f64| {
            let [alike, unlike, ..] = tables[table as usize];
            strength * (unlike - alike)
        };
        let around = Neighbours::new(problem);
        let ties: Vec<f64> = (0..around.sites.len())
            .map(|entry| {
                let (table, strength) = around.tie(entry);
                difference(table, strength)
            })
            .collect();
        let step = ties.iter().map(|d| d.abs()).find(|d| *d != 0.0).unwrap_or(0.0);
        if ties.iter().any(|d| *d != 0.0 && d.abs() != step) {
            return refuse("couplings of one strength only");
        }
        let negative = ties.iter().filter(|d| **d < 0.0).count();
        let opposed = 2 * negative > ties.iter().filter(|d| **d != 0.0).count();
        let neighbour = |site: u32, d: f64| Neighbour { site, turned: (d < 0.0) != opposed };
        let mut offsets = vec![0];
        let mut neighbours = Vec::new();
        for site in 0..graph.sites {
            let coupled = around.range(site).filter(|entry| ties[*entry] != 0.0);
            neighbours.extend(coupled.map(|entry| neighbour(around.sites[entry], ties[entry])));
            offsets.push(neighbours.len() as u32);
        }
        // Energies of bonds that are not broken, counted by value: sums do not depend on the order of bonds, and are exact where one product is.
        let mut unbroken: BTreeMap<u64, (f64, u64)> = BTreeMap::new();
        let mut bonds = Vec::new();
        for (number, bond) in graph.bonds.iter().enumerate().filter(|_| !tables.is_empty()) {
            let table = energy.bond_tables[number];
            let strength = energy.bond_strengths.get(number).copied().unwrap_or(1.0);
            let [alike, ..] = tables[table as usize];
            let d = difference(table, strength);
            let own = bond.i == bond.j;
            let lowest = strength * alike + if own { 0.0 } else { d.min(0.0) };
            unbroken.entry(lowest.to_bits()).or_insert((lowest, 0)).1 += 1;
            if !own && d != 0.0 {
                bonds.push(Tie { number, from: bond.i, to: neighbour(bond.j, d) });
            }
        }
        // Energies of sites, the same in both states.
        for site in (0..graph.sites).filter(|_| !energy.site_tables.is_empty()) {
            let strength = energy.site_strengths.get(site).copied().unwrap_or(1.0);
            let own = strength * energy.site_tables[2 * energy.site_class[site] as usize];
            unbroken.entry(own.to_bits()).or_insert((own, 0)).1 += 1;
        }
        let base = unbroken.values().map(|(energy, count)| energy * *count as f64).sum();
        Ok(Coupling { step, base, opposed, offsets, neighbours, bonds })
    }

    /// The neighbours of a free site.
    pub(crate) fn neighbours_of(&self, site: usize) -> &[Neighbour] {
        &self.neighbours[self.offsets[site] as usize..self.offsets[site + 1] as usize]
    }
}
