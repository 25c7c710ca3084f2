//! Neighbours that count: for rules that change one spin at a time, or sets of them.

use crate::{Graph, Problem};
use std::borrow::Cow;
use std::ops::Range;

/// Neighbours of the free sites with what lies between, bonds of a site with itself left out. Nothing is left where a Hamiltonian has no
/// pair energies. Borrowed from the host where nothing had to be left out.
#[derive(Clone, Debug)]
pub struct Neighbours<'a> {
    /// Where the neighbours of each free site begin, one longer than there are sites.
    pub offsets: Cow<'a, [u32]>,
    /// The neighbours, in order of bonds.
    pub sites: Cow<'a, [u32]>,
    /// Pair table of each, rows by the state of the site whose neighbour it is.
    pub tables: Cow<'a, [u16]>,
    /// Factor on the energy of each; empty where all are 1.
    pub strengths: Cow<'a, [f64]>,
    /// Energies of each free site's bonds with itself, `states` each; empty where there are none.
    pub selves: Vec<f64>,
}

impl<'a> Neighbours<'a> {
    /// Those of a Hamiltonian of discrete spins on its lattice. Cost: one pass over bonds and adjacency.
    pub fn new(problem: &Problem<'a>) -> Self {
        let (graph, energy) = (&problem.graph, &problem.energy);
        if energy.pair_tables.is_empty() {
            // Not coupled pairwise at all: the adjacency says nothing about the energy.
            return Neighbours {
                offsets: Cow::Owned(vec![0; graph.sites + 1]),
                sites: Cow::Borrowed(&[]),
                tables: Cow::Borrowed(&[]),
                strengths: Cow::Borrowed(&[]),
                selves: Vec::new(),
            };
        }
        if graph.bonds.iter().any(|bond| bond.i == bond.j) {
            return Self::without_selves(problem);
        }
        Neighbours {
            offsets: Cow::Borrowed(graph.offsets),
            sites: Cow::Borrowed(graph.neighbours),
            tables: Cow::Borrowed(energy.neighbour_tables),
            strengths: Cow::Borrowed(energy.neighbour_strengths),
            selves: Vec::new(),
        }
    }

    fn without_selves(problem: &Problem<'a>) -> Self {
        let (graph, energy): (&Graph<'_>, _) = (&problem.graph, &problem.energy);
        let q = energy.states;
        let mut selves = vec![0.0; graph.sites * q];
        for (number, bond) in graph.bonds.iter().enumerate().filter(|(_, bond)| bond.i == bond.j) {
            let table = &energy.pair_tables[energy.bond_tables[number] as usize * q * q..][..q * q];
            let strength = energy.bond_strengths.get(number).copied().unwrap_or(1.0);
            for (state, own) in selves[bond.i as usize * q..][..q].iter_mut().enumerate() {
                *own += strength * table[state * q + state];
            }
        }
        let mut offsets = vec![0];
        let (mut sites, mut tables, mut strengths) = (Vec::new(), Vec::new(), Vec::new());
        for site in 0..graph.sites {
            for entry in graph.range(site).filter(|entry| graph.neighbours[*entry] as usize != site) {
                sites.push(graph.neighbours[entry]);
                tables.push(energy.neighbour_tables[entry]);
                strengths.extend(energy.neighbour_strengths.get(entry));
            }
            offsets.push(sites.len() as u32);
        }
        Neighbours {
            offsets: Cow::Owned(offsets),
            sites: Cow::Owned(sites),
            tables: Cow::Owned(tables),
            strengths: Cow::Owned(strengths),
            selves,
        }
    }

    /// Where the neighbours of a free site stand.
    ///
    /// # Panics
    /// Where there is no such site.
    #[inline]
    pub fn range(&self, site: usize) -> Range<usize> {
        self.offsets[site] as usize..self.offsets[site + 1] as usize
    }

    /// Pair table and strength of an entry.
    ///
    /// # Panics
    /// Where there is no such entry.
    #[inline]
    pub fn tie(&self, entry: usize) -> (u16, f64) {
        (self.tables[entry], self.strengths.get(entry).copied().unwrap_or(1.0))
    }
}
