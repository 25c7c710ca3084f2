//! Energies by definition, term by term: slow, plain, and what every rule is compared with.

use crate::{EnergyData, GraphData};
use spinledger_numerics::sum::CompensatedSum;

/// A configuration of free and pinned sites.
#[derive(Clone, Copy, Debug)]
pub enum Spins<'a> {
    /// One state a site.
    States(&'a [u8]),
    /// One vector a site, components innermost.
    Vectors(&'a [f64]),
}

/// Total energy of a configuration without the callbacks' share: pairs in order of bonds, then sites, then factors, in one compensated sum.
///
/// # Panics
/// Where the configuration is of another kind or length than the graph's `total`, or holds a state that does not exist.
pub fn total(graph: &GraphData, energy: &EnergyData, spins: Spins<'_>) -> f64 {
    let mut sum = CompensatedSum::new();
    match spins {
        Spins::States(states) => states_total(graph, energy, states, &mut sum),
        Spins::Vectors(vectors) => vectors_total(graph, energy, vectors, &mut sum),
    }
    sum.value()
}

fn strength(strengths: &[f64], index: usize) -> f64 {
    strengths.get(index).copied().unwrap_or(1.0)
}

fn states_total(graph: &GraphData, energy: &EnergyData, states: &[u8], sum: &mut CompensatedSum) {
    assert!(energy.states > 0 && states.len() == graph.total, "one state a site");
    let q = energy.states;
    let state = |site: u32| usize::from(states[site as usize]);
    for (b, &table) in energy.bond_tables.iter().enumerate() {
        let bond = &graph.bonds[b];
        let e = energy.pair_tables[usize::from(table) * q * q..][..q * q][state(bond.i) * q + state(bond.j)];
        sum.add(strength(&energy.bond_strengths, b) * e);
    }
    if !energy.site_tables.is_empty() {
        for (s, &class) in energy.site_class.iter().enumerate() {
            let e = energy.site_tables[usize::from(class) * q..][..q][usize::from(states[s])];
            sum.add(strength(&energy.site_strengths, s) * e);
        }
    }
    for factor in &energy.factors {
        let (order, table) = &energy.factor_tables[factor.table as usize];
        let sites = &energy.factor_sites[factor.first as usize..][..*order as usize];
        sum.add(table[sites.iter().fold(0, |index, &s| index * q + state(s))]);
    }
}

fn vectors_total(graph: &GraphData, energy: &EnergyData, vectors: &[f64], sum: &mut CompensatedSum) {
    let n = energy.components;
    assert!(n > 0 && vectors.len() == graph.total * n, "one vector a site");
    let vector = |site: usize| &vectors[site * n..(site + 1) * n];
    let dot = |a: &[f64], b: &[f64]| a.iter().zip(b).map(|(x, y)| x * y).sum::<f64>();
    let between = |a: &[f64], m: &[f64], b: &[f64]| (0..n).map(|r| a[r] * dot(&m[r * n..(r + 1) * n], b)).sum::<f64>();
    for (b, &table) in energy.bond_tables.iter().enumerate() {
        let bond = &graph.bonds[b];
        let matrix = &energy.couplings[usize::from(table) * n * n..][..n * n];
        let e = between(vector(bond.i as usize), matrix, vector(bond.j as usize));
        sum.add(strength(&energy.bond_strengths, b) * e);
    }
    for (s, &class) in energy.site_class.iter().enumerate() {
        let (spin, class, factor) = (vector(s), usize::from(class), strength(&energy.site_strengths, s));
        if !energy.anisotropies.is_empty() {
            sum.add(factor * between(spin, &energy.anisotropies[class * n * n..][..n * n], spin));
        }
        if !energy.fields.is_empty() {
            sum.add(factor * dot(&energy.fields[class * n..][..n], spin));
        }
    }
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
