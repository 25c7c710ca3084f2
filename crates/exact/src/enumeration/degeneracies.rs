//! Numbers of states by energy and order.

use std::collections::BTreeMap;

use super::averages::Averages;
use super::system::{EnumerationError, Order, PairSystem};
use super::walk::{Key, Walk};

/// Distinct levels kept at most; each takes about 100 bytes.
const MOST_LEVELS: usize = 1 << 22;
/// Keys collected before they are sorted and counted.
const BATCH: usize = 1 << 16;

/// States that share energy and order.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Level {
    /// Energy of the whole system.
    pub energy: f64,
    /// Sums of the spin components over the free sites (unused ones 0); for colours the number of sites in the most
    /// common state, the sum of the squared numbers of sites in each state, and 0.
    pub order: [f64; 3],
    /// Number of such states.
    pub count: u64,
}

/// All levels of a system, by energy and then by order.
#[derive(Clone, Debug, PartialEq)]
pub struct Degeneracies {
    levels: Vec<Level>,
    states: usize,
    sites: usize,
    colours: bool,
}

impl PairSystem {
    /// Counts all states.
    ///
    /// Levels whose energies (or orders) differ by no more than the rounding of the couplings are one level: 3 times 0.1 and
    /// 0.3 are the same. Cost: about 60 ns a state with a few neighbours a site (2^24 states: one second).
    ///
    /// # Errors
    /// Too many states or levels, or data that do not fit together.
    pub fn degeneracies(&self) -> Result<Degeneracies, EnumerationError> {
        self.check()?;
        let count = self.state_count()?;
        let walk = Walk::new(self);
        let (energy, order) = (walk.energy, walk.order);
        let colours = matches!(self.order, Order::Colours);
        let mut counts: BTreeMap<Key, u64> = BTreeMap::new();
        let mut batch: Vec<Key> = Vec::with_capacity(BATCH);
        walk.run(count, |key| {
            batch.push(key);
            if batch.len() == BATCH { flush(&mut batch, &mut counts) } else { Ok(()) }
        })?;
        flush(&mut batch, &mut counts)?;
        let order_tolerance = if colours { 0 } else { order.tolerance };
        let merged = merge(counts.into_iter().collect(), energy.tolerance, order_tolerance);
        let levels = merged.into_iter().map(|((level, orders), count)| Level {
            energy: level as f64 * energy.quantum,
            order: orders.map(|value| if colours { value as f64 } else { value as f64 * order.quantum }),
            count,
        });
        Ok(Degeneracies { levels: levels.collect(), states: self.states, sites: self.free, colours })
    }
}

fn flush(batch: &mut Vec<Key>, counts: &mut BTreeMap<Key, u64>) -> Result<(), EnumerationError> {
    batch.sort_unstable();
    for run in batch.chunk_by(|a, b| a == b) {
        *counts.entry(run[0]).or_insert(0) += run.len() as u64;
    }
    batch.clear();
    if counts.len() > MOST_LEVELS {
        return Err(EnumerationError::TooManyLevels { most: MOST_LEVELS });
    }
    Ok(())
}

/// Replaces numbers that differ by rounding by the least of them, coordinate by coordinate, and adds the counts.
fn merge(levels: Vec<(Key, u64)>, energy: i64, order: i64) -> Vec<(Key, u64)> {
    let mut levels = levels;
    for coordinate in 0..4 {
        let tolerance = if coordinate == 0 { energy } else { order };
        let of = |key: &Key| if coordinate == 0 { key.0 } else { key.1[coordinate - 1] };
        let mut values: Vec<i64> = levels.iter().map(|(key, _)| of(key)).collect();
        values.sort_unstable();
        values.dedup();
        // Chains of near values are cut at the tolerance from their first, so that they cannot grow without bound.
        let mut firsts: Vec<i64> = Vec::new();
        for value in values {
            if firsts.last().is_none_or(|first| value - first > tolerance) {
                firsts.push(value);
            }
        }
        for (key, _) in &mut levels {
            let first = firsts[firsts.partition_point(|first| *first <= of(key)) - 1];
            if coordinate == 0 {
                key.0 = first;
            } else {
                key.1[coordinate - 1] = first;
            }
        }
    }
    let mut merged: BTreeMap<Key, u64> = BTreeMap::new();
    for (key, count) in levels {
        *merged.entry(key).or_insert(0) += count;
    }
    merged.into_iter().collect()
}

impl Degeneracies {
    /// The levels, by energy, then by order.
    #[must_use]
    pub fn levels(&self) -> &[Level] {
        &self.levels
    }

    /// Number of free sites.
    #[must_use]
    pub fn sites(&self) -> usize {
        self.sites
    }

    /// Squared length of the order parameter per site at a level: of the mean spin, or (q sum rho^2 - 1)/(q - 1) for
    /// colours.
    #[must_use]
    pub fn order_squared(&self, level: &Level) -> f64 {
        let sites = self.sites as f64;
        if self.colours {
            let q = self.states as f64;
            // One state leaves nothing to order.
            return if self.states < 2 { 0.0 } else { (q * level.order[1] / (sites * sites) - 1.0) / (q - 1.0) };
        }
        level.order.iter().map(|sum| (sum / sites) * (sum / sites)).sum()
    }

    /// Order per site at a level: the components of the mean spin, or (q max rho - 1)/(q - 1) for colours.
    #[must_use]
    pub fn order(&self, level: &Level) -> [f64; 3] {
        let sites = self.sites as f64;
        if self.colours {
            let q = self.states as f64;
            let order = if self.states < 2 { 0.0 } else { (q * level.order[0] / sites - 1.0) / (q - 1.0) };
            return [order, 0.0, 0.0];
        }
        level.order.map(|sum| sum / sites)
    }

    /// Canonical probability of each level at an inverse temperature, in the order of the levels; they add up to 1.
    #[must_use]
    pub fn probabilities(&self, inverse_temperature: f64) -> Vec<f64> {
        self.weights(inverse_temperature).0
    }

    /// Canonical averages at an inverse temperature, which may be 0 or negative.
    #[must_use]
    pub fn averages(&self, inverse_temperature: f64) -> Averages {
        Averages::of(self, inverse_temperature)
    }

    /// Probabilities and ln Z.
    pub(super) fn weights(&self, inverse_temperature: f64) -> (Vec<f64>, f64) {
        use spinledger_numerics::elementary::{exp, ln};
        use spinledger_numerics::sum::sum;
        let exponents = self.levels.iter().map(|level| -inverse_temperature * level.energy);
        let largest = exponents.clone().fold(f64::NEG_INFINITY, f64::max);
        let mut weights: Vec<f64> = self
            .levels
            .iter()
            .zip(exponents)
            .map(|(level, exponent)| level.count as f64 * exp(exponent - largest))
            .collect();
        let total = sum(&weights);
        weights.iter_mut().for_each(|weight| *weight /= total);
        (weights, largest + ln(total))
    }
}
