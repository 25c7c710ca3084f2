//! Symmetries of the energy, checked rather than believed.

use spinledger_sdk::{Energy, Error, Result};

/// Energies that differ by less than this part of the largest one count as equal: models compute them with rounding.
const TOLERANCE: f64 = 1e-12;

/// What may be done to all spins of a cluster.
#[derive(Clone, Debug, PartialEq)]
pub(crate) enum Symmetry {
    /// One of these involutions of states.
    Involutions(Vec<Vec<u8>>),
    /// The exchange of two colours of so many.
    Exchanges(usize),
}

impl Symmetry {
    /// That of a Hamiltonian: its involutions, or else the exchanges of two states if all permutations are symmetries.
    ///
    /// # Errors
    /// Where there is none, or tables contradict it.
    pub(crate) fn of(energy: &Energy<'_>) -> Result<Self> {
        let q = energy.states;
        if !energy.involutions.is_empty() {
            for map in &energy.involutions {
                if map.len() != q || (0..q).any(|s| map[s] as usize >= q || map[map[s] as usize] as usize != s) {
                    return Err(Error::new("the model gives an involution that is none"));
                }
                let image = |s: usize| map[s] as usize;
                check(energy, |a, b| (image(a), image(b)), image)?;
            }
            return Ok(Symmetry::Involutions(energy.involutions.iter().map(|map| map.to_vec()).collect()));
        }
        if energy.permutations {
            check(energy, |a, b| if a == b { (0, 0) } else { (0, 1) }, |_| 0)?;
            return Ok(Symmetry::Exchanges(q));
        }
        Err(Error::new("a cluster rule needs an energy that S -> -S, or every permutation of states, leaves unchanged"))
    }
}

/// Compares every pair energy with that of the states' images, and every site energy too.
fn check(
    energy: &Energy<'_>,
    pair: impl Fn(usize, usize) -> (usize, usize),
    site: impl Fn(usize) -> usize,
) -> Result<()> {
    let q = energy.states;
    let near =
        |a: f64, b: f64, all: &[f64]| (a - b).abs() <= TOLERANCE * all.iter().fold(0.0, |m: f64, e| m.max(e.abs()));
    for table in energy.pair_tables.chunks_exact(q * q) {
        for a in 0..q {
            for b in 0..q {
                let (c, d) = pair(a, b);
                if !near(table[a * q + b], table[c * q + d], table) {
                    return Err(Error::new(format!(
                        "the symmetry that the model claims changes the pair energy of states {a} and {b}"
                    )));
                }
            }
        }
    }
    for table in energy.site_tables.chunks_exact(q) {
        if let Some(state) = (0..q).find(|s| !near(table[*s], table[site(*s)], table)) {
            return Err(Error::new(format!(
                "the symmetry that the model claims changes the site energy of state {state}"
            )));
        }
    }
    Ok(())
}
