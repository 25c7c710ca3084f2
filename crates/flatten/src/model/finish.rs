//! From what was said to what rules see.

use super::ModelParts;
use crate::colouring::{by_colour, greedy};
use crate::symmetry;
use crate::unsound::ensure;
use crate::{EnergyData, GraphData, Result};
use std::collections::BTreeMap;

impl ModelParts {
    /// The flattened Hamiltonian. `footprints`, of custom models: for each free site the sites on whose spins its change of energy depends.
    ///
    /// Cost: proportional to bonds, sites and factors, with the square of states for each bond class.
    ///
    /// # Errors
    /// No kind of spin; pinned sites or antiperiodic bonds that the model has no states for; too many tables; symmetries that tables do not have.
    ///
    /// # Panics
    /// Where `graph` is not the one that the parts were begun with.
    pub fn finish(self, graph: &GraphData, footprints: Option<&[Vec<u32>]>) -> Result<EnergyData> {
        let ModelParts { sites, total, bonds, mut energy, down, pair, site, coupling, anisotropy, field, .. } = self;
        assert!(
            sites == graph.sites && total == graph.total && bonds == graph.bonds.len(),
            "one graph from begin to end"
        );
        ensure!(energy.states > 0 || energy.components > 0, "the kind of spin is not given");
        pin(&mut energy, down, graph)?;
        if !pair.is_empty() {
            let q = energy.states;
            let negation = energy.negation.clone();
            let fold = |table: &[f64]| match negation.is_empty() {
                true => None,
                false => Some((0..q * q).map(|k| table[k / q * q + usize::from(negation[k % q])]).collect()),
            };
            energy.pair_tables = couple(&mut energy, graph, &pair, q, fold)?;
        }
        if !coupling.is_empty() {
            let n = energy.components;
            // 0 - x instead of -x keeps zeros positive.
            let fold = |matrix: &[f64]| Some(matrix.iter().map(|x| 0.0 - x).collect());
            energy.couplings = couple(&mut energy, graph, &coupling, n, fold)?;
        }
        if !energy.bond_strengths.is_empty() {
            energy.neighbour_strengths =
                graph.neighbour_bonds.iter().map(|&b| energy.bond_strengths[b as usize]).collect();
        }
        settle_sites(&mut energy, graph, [site, anisotropy, field]);
        attach_factors(&mut energy, graph);
        symmetry::check(&energy)?;
        let colours = colours(&energy, graph, footprints)?;
        (energy.colour_offsets, energy.colour_sites) = by_colour(&colours);
        Ok(energy)
    }
}

/// Pinned sites take the model's state or vector.
fn pin(energy: &mut EnergyData, down: Option<u8>, graph: &GraphData) -> Result<()> {
    if graph.directions.is_empty() {
        return Ok(());
    }
    if energy.components > 0 {
        let up = &energy.up_vector;
        energy.pinned_vectors =
            graph.directions.iter().flat_map(|&d| up.iter().map(move |x| f64::from(d) * x + 0.0)).collect();
        return Ok(());
    }
    let (Some(up), Some(down)) = (energy.up, down) else {
        ensure!(false, "the lattice has pinned sites, and the model has no states for them");
        return Ok(());
    };
    energy.pinned_states = graph.directions.iter().map(|&d| if d > 0 { up } else { down }).collect();
    Ok(())
}

/// Gives every bond and every neighbour its table: the class's own, as seen from either end, with the sign of antiperiodic bonds folded in. Equal
/// tables are kept once; a class without table gets zeros.
fn couple(
    energy: &mut EnergyData,
    graph: &GraphData,
    given: &BTreeMap<u16, Vec<f64>>,
    q: usize,
    fold: impl Fn(&[f64]) -> Option<Vec<f64>>,
) -> Result<Vec<f64>> {
    let mut tables: Vec<Vec<f64>> = Vec::new();
    let mut number = |table: Vec<f64>| -> Result<u16> {
        let place = tables.iter().position(|t| *t == table).unwrap_or_else(|| {
            tables.push(table);
            tables.len() - 1
        });
        ensure!(place < usize::from(u16::MAX), "there are too many different pair tables");
        Ok(place as u16)
    };
    let transposed = |table: &[f64]| (0..q * q).map(|k| table[k % q * q + k / q]).collect::<Vec<f64>>();
    // By class: table of parallel bonds from either end, then of antiperiodic ones, made when first needed.
    let mut known: Vec<[Option<[u16; 2]>; 2]> = vec![[None; 2]; graph.class_names.len()];
    let zeros = vec![0.0; q * q];
    let (mut at_i, mut at_j) = (Vec::with_capacity(graph.bonds.len()), Vec::with_capacity(graph.bonds.len()));
    for (b, bond) in graph.bonds.iter().enumerate() {
        let class = usize::from(bond.class_index);
        let ends = match known[class][usize::from(bond.sign < 0)] {
            Some(ends) => ends,
            None => {
                let table = given.get(&bond.class_index);
                let seen = match table {
                    Some(table) if bond.sign < 0 => match fold(table) {
                        Some(folded) => folded,
                        None => {
                            ensure!(false, "bond {b} is antiperiodic, and minus a state is not a state of the model");
                            return Ok(Vec::new());
                        }
                    },
                    Some(table) => table.clone(),
                    None => zeros.clone(),
                };
                let ends = [number(seen.clone())?, number(transposed(&seen))?];
                known[class][usize::from(bond.sign < 0)] = Some(ends);
                ends
            }
        };
        at_i.push(ends[0]);
        at_j.push(ends[1]);
    }
    let mut neighbour_tables = Vec::with_capacity(graph.neighbours.len());
    for s in 0..graph.sites {
        let mut second_end = None;
        for &b in &graph.neighbour_bonds[graph.offsets[s] as usize..graph.offsets[s + 1] as usize] {
            let bond = &graph.bonds[b as usize];
            // A bond of a site with itself stands twice in a row: first from i, then from j.
            let from_i = bond.i as usize == s && second_end != Some(b);
            second_end = (bond.i == bond.j).then_some(b);
            neighbour_tables.push(if from_i { at_i[b as usize] } else { at_j[b as usize] });
        }
    }
    energy.bond_tables = at_i;
    energy.neighbour_tables = neighbour_tables;
    energy.tables = tables.len();
    Ok(tables.concat())
}

/// Site classes and their energies, anisotropies and fields; classes without get zeros.
fn settle_sites(energy: &mut EnergyData, graph: &GraphData, given: [BTreeMap<u16, Vec<f64>>; 3]) {
    if energy.site_class.is_empty() {
        energy.site_class = vec![0; graph.sites];
    }
    let named = given.iter().filter_map(|map| map.keys().max()).max().map_or(0, |&c| usize::from(c) + 1);
    let used = energy.site_class.iter().max().map_or(0, |&c| usize::from(c) + 1);
    let classes = named.max(used);
    energy.site_classes = classes;
    let n = energy.components;
    let widths = [energy.states, n * n, n];
    let [site, anisotropy, field] = given;
    let dense = |map: BTreeMap<u16, Vec<f64>>, width: usize| {
        let mut out = vec![0.0; if map.is_empty() { 0 } else { classes * width }];
        for (class, numbers) in map {
            out[usize::from(class) * width..][..width].copy_from_slice(&numbers);
        }
        out
    };
    energy.site_tables = dense(site, widths[0]);
    energy.anisotropies = dense(anisotropy, widths[1]);
    energy.fields = dense(field, widths[2]);
}

/// Which factors each free site is in, in order of factors.
fn attach_factors(energy: &mut EnergyData, graph: &GraphData) {
    if energy.factors.is_empty() {
        return;
    }
    let mut offsets = vec![0u32; graph.sites + 1];
    for &s in energy.factor_sites.iter().filter(|&&s| (s as usize) < graph.sites) {
        offsets[s as usize + 1] += 1;
    }
    for s in 0..graph.sites {
        offsets[s + 1] += offsets[s];
    }
    let mut next = offsets.clone();
    let entries = offsets[graph.sites] as usize;
    let (mut factors, mut slots) = (vec![0; entries], vec![0; entries]);
    for (f, factor) in energy.factors.iter().enumerate() {
        let order = energy.factor_tables[factor.table as usize].0;
        let sites = &energy.factor_sites[factor.first as usize..][..order as usize];
        for (slot, &s) in sites.iter().enumerate().filter(|&(_, &s)| (s as usize) < graph.sites) {
            let place = next[s as usize] as usize;
            (factors[place], slots[place]) = (f as u32, slot as u32);
            next[s as usize] += 1;
        }
    }
    (energy.site_factor_offsets, energy.site_factors, energy.site_factor_slots) = (offsets, factors, slots);
}

/// The graph's colours where they serve all terms, else greedy ones of the graph of interactions.
fn colours(energy: &EnergyData, graph: &GraphData, footprints: Option<&[Vec<u32>]>) -> Result<Vec<u32>> {
    if energy.factors.is_empty() && footprints.is_none() {
        return Ok(graph.colours.clone());
    }
    let sites = graph.sites;
    let mut adjacent: Vec<Vec<u32>> = vec![Vec::new(); sites];
    for (s, row) in adjacent.iter_mut().enumerate() {
        row.extend_from_slice(&graph.neighbours[graph.offsets[s] as usize..graph.offsets[s + 1] as usize]);
    }
    for factor in &energy.factors {
        let order = energy.factor_tables[factor.table as usize].0 as usize;
        let group = &energy.factor_sites[factor.first as usize..][..order];
        for &s in group.iter().filter(|&&s| (s as usize) < sites) {
            adjacent[s as usize].extend_from_slice(group);
        }
    }
    if let Some(footprints) = footprints {
        ensure!(footprints.len() == sites, "there are {} footprints for {sites} free sites", footprints.len());
        for (s, footprint) in footprints.iter().enumerate() {
            for &t in footprint {
                ensure!((t as usize) < graph.total, "the footprint of site {s} holds site {t} of {}", graph.total);
                adjacent[s].push(t);
                // If s depends on t, then t on s, whether or not the model says so.
                if (t as usize) < sites {
                    adjacent[t as usize].push(s as u32);
                }
            }
        }
    }
    for (s, row) in adjacent.iter_mut().enumerate() {
        row.retain(|&t| (t as usize) < sites && t as usize != s);
        row.sort_unstable();
        row.dedup();
    }
    let proper = |s: usize| adjacent[s].iter().all(|&t| graph.colours[t as usize] != graph.colours[s]);
    if (0..sites).all(proper) {
        return Ok(graph.colours.clone());
    }
    Ok(greedy(sites, |s| adjacent[s].iter().copied()))
}
