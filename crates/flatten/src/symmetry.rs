//! Whether the symmetries that a model claims are symmetries of its tables.

use crate::unsound::ensure;
use crate::{EnergyData, Result};

/// Entries of one table that a symmetry maps on each other may differ by this share of the table's largest entry, so that tables
/// computed by formula are not refused for a rounding.
const TOLERANCE: f64 = 1e-12;

/// Refuses an involution, or the claim that all permutations are symmetries, where a table says otherwise.
pub(crate) fn check(energy: &EnergyData) -> Result<()> {
    let q = energy.states;
    if q == 0 {
        return Ok(());
    }
    for (number, map) in energy.involutions.chunks_exact(q).enumerate() {
        if let Some(what) = broken(energy, map) {
            ensure!(false, "involution {number} is not a symmetry: {what}");
        }
    }
    if energy.permutations {
        // Exchanges of states that follow each other generate all permutations.
        for s in 0..q - 1 {
            let mut map: Vec<u8> = (0..q).map(|s| s as u8).collect();
            map.swap(s, s + 1);
            if let Some(what) = broken(energy, &map) {
                ensure!(false, "exchanging states {s} and {} is not a symmetry: {what}", s + 1);
            }
        }
    }
    Ok(())
}

/// Where a map of states changes an energy.
fn broken(energy: &EnergyData, map: &[u8]) -> Option<String> {
    let q = energy.states;
    let factor_tables =
        energy.factor_tables.iter().enumerate().map(|(t, (k, table))| ("factor table", t, *k, &table[..]));
    let pair_tables = energy.pair_tables.chunks_exact(q * q).enumerate().map(|(t, table)| ("pair table", t, 2, table));
    let site_tables = energy.site_tables.chunks_exact(q).enumerate().map(|(t, table)| ("site class", t, 1, table));
    for (what, number, order, table) in pair_tables.chain(site_tables).chain(factor_tables) {
        let largest = table.iter().fold(0.0f64, |most, x| most.max(x.abs()));
        for (k, x) in table.iter().enumerate() {
            let y = table[image(k, order, q, map)];
            if (x - y).abs() > TOLERANCE * largest {
                return Some(format!("in {what} {number} it maps an energy of {x} to {y}"));
            }
        }
    }
    None
}

/// Index in a table over `order` sites after all states are mapped.
fn image(index: usize, order: u32, q: usize, map: &[u8]) -> usize {
    let (mut rest, mut out, mut weight) = (index, 0, 1);
    for _ in 0..order {
        out += usize::from(map[rest % q]) * weight;
        rest /= q;
        weight *= q;
    }
    out
}
