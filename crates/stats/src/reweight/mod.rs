//! Curves over temperature from runs at several temperatures: multiple histograms (Ferrenberg & Swendsen 1989 Phys. Rev. Lett. 63 1195).
//!
//! Runs at inverse temperatures b_i with n_i measurements of the total energy E share one density of states. With H(E) the number of
//! measurements at E in all runs, each counted 1/(2 tau_i), and n_i counted likewise,
//!
//! ```text
//! W(E) = H(E)/D(E),   D(E) = sum_j n_j exp(f_j - b_j E),   exp(-f_i) = sum_E W(E) exp(-b_i E),
//! ```
//!
//! and the mean of O at any b is that of the measurements with weights exp(-b E)/D(E). The f_i are the minimum of the convex function
//! sum_E H(E) ln D(E) - sum_i n_i f_i, which is found by Newton's method with descent guaranteed, not by iterating the equations: that takes
//! thousands of rounds when histograms hardly overlap. Everything is in logarithms.
//!
//! Measurements are binned only where energies are equal (up to rounding): a discrete spectrum gives few levels, a continuous one a level for each
//! measurement, and the result is the same.
//!
//! Errors come from the jackknife through all of it: block b of every run is left out together, the f_i are solved for again, and the curves computed
//! again. Runs are independent, so that this is as good as leaving out blocks of one run at a time.

mod solve;

use thiserror::Error;

use spinledger_numerics::elementary::exp;

/// Measurements of runs, binned by energy.
#[derive(Clone, Debug)]
pub struct Histograms {
    quantities: usize,
    blocks: usize,
    runs: Vec<Run>,
    entries: Vec<Entry>,
    /// Sums of the quantities, one row an entry.
    sums: Vec<f64>,
}

#[derive(Clone, Debug)]
struct Run {
    inverse_temperature: f64,
    weight: f64,
    mean_energy: f64,
    /// Measurements in each block.
    counts: Vec<f64>,
}

/// Measurements of one run, block and energy.
#[derive(Clone, Copy, Debug)]
struct Entry {
    energy: f64,
    run: u32,
    block: u32,
    count: u32,
}

/// Curves with what their errors need.
#[derive(Clone, Debug, PartialEq)]
#[non_exhaustive]
pub struct Reweighted {
    /// Means: `[temperature][quantity]`.
    pub means: Vec<Vec<f64>>,
    /// The same without each block: `[block][temperature][quantity]`.
    pub replicates: Vec<Vec<Vec<f64>>>,
    /// Effective number of independent measurements at each temperature: (sum w)^2/sum w^2 over measurements (Kish 1965), of which 2 tau count as one.
    pub coverage: Vec<f64>,
    /// -ln Z of each run up to a constant, in order of addition.
    pub free_energies: Vec<f64>,
    /// Different energies.
    pub levels: usize,
}

/// Why there are no curves.
#[derive(Clone, Debug, PartialEq, Error)]
#[non_exhaustive]
pub enum ReweightError {
    /// No run.
    #[error("there is no run to reweight")]
    NoRuns,
    /// Fewer measurements in a run than blocks, or fewer than two blocks.
    #[error("a run of {rows} measurements cannot be cut into {blocks} blocks")]
    TooShort {
        /// Measurements.
        rows: usize,
        /// Blocks.
        blocks: usize,
    },
    /// An energy, a quantity, a temperature or a weight is not finite, or a weight not positive.
    #[error("energies, quantities, temperatures and weights must be finite, weights positive")]
    NotFinite,
    /// The minimum was not reached.
    #[error("the free energies of the runs did not converge: they are off by {residual} of a run's measurements")]
    NotConverged {
        /// Largest relative difference between the measurements of a run and those expected.
        residual: f64,
    },
}

impl Histograms {
    /// No measurements yet, of this many quantities beside the energy. Each run is cut into this many blocks, which must be long compared with the
    /// autocorrelation time.
    #[must_use]
    pub fn new(quantities: usize, blocks: usize) -> Self {
        Self { quantities, blocks, runs: Vec::new(), entries: Vec::new(), sums: Vec::new() }
    }

    /// Adds the chains of a run, one after the other: total energies in units in which the Boltzmann factor is exp(-b E), and
    /// `quantity(row, out)`, which fills one value for each quantity. `tau` is the integrated autocorrelation time in measurements, 1/2 if
    /// they are independent.
    ///
    /// Cost: n log n for n measurements. Memory grows with the different energies of each block.
    ///
    /// # Errors
    /// Fewer measurements than blocks, or what is not finite.
    pub fn add(
        &mut self,
        inverse_temperature: f64,
        tau: f64,
        energies: &[f64],
        mut quantity: impl FnMut(usize, &mut [f64]),
    ) -> Result<(), ReweightError> {
        let (rows, blocks) = (energies.len(), self.blocks);
        if blocks < 2 || rows < blocks {
            return Err(ReweightError::TooShort { rows, blocks });
        }
        let sound = inverse_temperature.is_finite() && tau.is_finite() && tau > 0.0;
        if !sound || !energies.iter().all(|energy| energy.is_finite()) {
            return Err(ReweightError::NotFinite);
        }
        let tolerance = crate::rhat::rounding(&[energies]);
        let run = self.runs.len() as u32;
        let mut counts = Vec::with_capacity(blocks);
        let mut values = vec![0.0; self.quantities];
        for block in 0..blocks {
            let (start, end) = (block * rows / blocks, (block + 1) * rows / blocks);
            counts.push((end - start) as f64);
            let mut order: Vec<usize> = (start..end).collect();
            order.sort_unstable_by(|a, b| energies[*a].total_cmp(&energies[*b]).then(a.cmp(b)));
            let mut open: Option<Entry> = None;
            for row in order {
                let energy = energies[row];
                match &mut open {
                    Some(entry) if energy - entry.energy <= tolerance => entry.count += 1,
                    _ => {
                        self.entries.extend(open);
                        open = Some(Entry { energy, run, block: block as u32, count: 1 });
                        self.sums.resize(self.sums.len() + self.quantities, 0.0);
                    }
                }
                quantity(row, &mut values);
                if !values.iter().all(|value| value.is_finite()) {
                    return Err(ReweightError::NotFinite);
                }
                let first = self.sums.len() - self.quantities;
                self.sums[first..].iter_mut().zip(&values).for_each(|(sum, value)| *sum += value);
            }
            self.entries.extend(open);
        }
        let mean_energy = spinledger_numerics::sum::mean(energies).unwrap_or(0.0);
        self.runs.push(Run { inverse_temperature, weight: 0.5 / tau, mean_energy, counts });
        Ok(())
    }

    /// Means at these inverse temperatures, and without each block.
    ///
    /// Cost: for L levels, R runs, T temperatures, B blocks and Q quantities about 5 B L R exponentials and B T L Q products.
    ///
    /// # Errors
    /// No runs, temperatures that are not finite, or free energies that did not converge.
    pub fn reweight(&self, inverse_temperatures: &[f64]) -> Result<Reweighted, ReweightError> {
        if self.runs.is_empty() {
            return Err(ReweightError::NoRuns);
        }
        if !inverse_temperatures.iter().all(|b| b.is_finite()) {
            return Err(ReweightError::NotFinite);
        }
        let (levels, level_of) = self.levels();
        let betas: Vec<f64> = self.runs.iter().map(|run| run.inverse_temperature).collect();
        let count = |run: &Run| run.weight * spinledger_numerics::sum::sum(&run.counts);
        let counts: Vec<f64> = self.runs.iter().map(count).collect();
        let (height, sums) = self.binned(&level_of, levels.len(), None);
        let start = self.first_guess();
        let problem = solve::Problem { levels: &levels, height: &height, betas: &betas, counts: &counts };
        let free_energies = problem.solve(&start)?;
        let logs = problem.denominators(&free_energies);

        // exp(-b E)/D(E), scaled to be largest where there are measurements.
        let mut weights = Vec::with_capacity(inverse_temperatures.len());
        for b in inverse_temperatures {
            let log = |level: usize| -b * levels[level] - logs[level];
            let most = (0..levels.len()).map(log).fold(f64::NEG_INFINITY, f64::max);
            weights.push((0..levels.len()).map(|level| exp(log(level) - most)).collect::<Vec<f64>>());
        }
        let q = self.quantities;
        let means = |height: &[f64], sums: &[f64], ratio: Option<&[f64]>| -> Vec<Vec<f64>> {
            let at = |weights: &Vec<f64>| {
                let (mut total, mut means) = (0.0, vec![0.0; q]);
                for (level, weight) in weights.iter().enumerate() {
                    let weight = weight * ratio.map_or(1.0, |ratio| ratio[level]);
                    total += weight * height[level];
                    for (mean, sum) in means.iter_mut().zip(&sums[level * q..(level + 1) * q]) {
                        *mean += weight * sum;
                    }
                }
                means.iter_mut().for_each(|mean| *mean /= total);
                means
            };
            weights.iter().map(at).collect()
        };
        let whole = means(&height, &sums, None);
        let coverage = weights.iter().map(|weights| kish(weights, &height)).collect();

        let mut replicates = Vec::with_capacity(self.blocks);
        let by_block = self.by_block();
        for (block, entries) in by_block.iter().enumerate() {
            let (without, sums_without) = {
                let (own, own_sums) = self.binned(&level_of, levels.len(), Some(entries));
                // Levels that only this block visits are left empty, not with the rounding of a difference.
                let left = |all: &f64, own: &f64| if *own >= *all * (1.0 - 1e-12) { 0.0 } else { all - own };
                let height: Vec<f64> = height.iter().zip(&own).map(|(all, own)| left(all, own)).collect();
                let sums: Vec<f64> = sums
                    .iter()
                    .zip(&own_sums)
                    .enumerate()
                    .map(|(at, (all, own))| if height[at / q.max(1)] == 0.0 { 0.0 } else { all - own })
                    .collect();
                (height, sums)
            };
            let counts: Vec<f64> =
                self.runs.iter().zip(&counts).map(|(run, all)| all - run.weight * run.counts[block]).collect();
            let problem = solve::Problem { levels: &levels, height: &without, betas: &betas, counts: &counts };
            let own = problem.denominators(&problem.solve(&free_energies)?);
            // Relative to the denominators of all measurements, so that exponentials are taken once a level and not once a temperature.
            let shift = own.iter().zip(&logs).map(|(own, all)| own - all).fold(f64::INFINITY, f64::min);
            let ratio: Vec<f64> = own.iter().zip(&logs).map(|(own, all)| exp(all - own + shift)).collect();
            replicates.push(means(&without, &sums_without, Some(&ratio)));
        }
        Ok(Reweighted { means: whole, replicates, coverage, free_energies, levels: levels.len() })
    }

    /// The different energies in increasing order, and the level of each entry.
    fn levels(&self) -> (Vec<f64>, Vec<usize>) {
        let energies: Vec<f64> = self.entries.iter().map(|entry| entry.energy).collect();
        let tolerance = crate::rhat::rounding(&[&energies]);
        let mut order: Vec<usize> = (0..energies.len()).collect();
        order.sort_unstable_by(|a, b| energies[*a].total_cmp(&energies[*b]).then(a.cmp(b)));
        let (mut levels, mut level_of): (Vec<f64>, _) = (Vec::new(), vec![0; energies.len()]);
        for entry in order {
            if levels.last().is_none_or(|last| energies[entry] - last > tolerance) {
                levels.push(energies[entry]);
            }
            level_of[entry] = levels.len() - 1;
        }
        (levels, level_of)
    }

    /// Weighted number of measurements of each level, and weighted sums of the quantities, over all entries or some.
    fn binned(&self, level_of: &[usize], levels: usize, some: Option<&[usize]>) -> (Vec<f64>, Vec<f64>) {
        let q = self.quantities;
        let (mut height, mut sums) = (vec![0.0; levels], vec![0.0; levels * q]);
        let mut add = |entry: usize| {
            let (Entry { run, count, .. }, level) = (self.entries[entry], level_of[entry]);
            let weight = self.runs[run as usize].weight;
            height[level] += weight * f64::from(count);
            for k in 0..q {
                sums[level * q + k] += weight * self.sums[entry * q + k];
            }
        };
        match some {
            Some(entries) => entries.iter().for_each(|entry| add(*entry)),
            None => (0..self.entries.len()).for_each(add),
        }
        (height, sums)
    }

    fn by_block(&self) -> Vec<Vec<usize>> {
        let mut by_block = vec![Vec::new(); self.blocks];
        for (number, entry) in self.entries.iter().enumerate() {
            by_block[entry.block as usize].push(number);
        }
        by_block
    }

    /// -ln Z by integrating mean energies over the inverse temperature, by the trapezoidal rule.
    fn first_guess(&self) -> Vec<f64> {
        let mut order: Vec<usize> = (0..self.runs.len()).collect();
        let beta = |run: usize| self.runs[run].inverse_temperature;
        order.sort_by(|a, b| beta(*a).total_cmp(&beta(*b)));
        let mut guess = vec![0.0; self.runs.len()];
        for two in order.windows(2) {
            let mean = 0.5 * (self.runs[two[0]].mean_energy + self.runs[two[1]].mean_energy);
            guess[two[1]] = guess[two[0]] + (beta(two[1]) - beta(two[0])) * mean;
        }
        guess
    }
}

/// (sum w)^2/sum w^2 over measurements that count `height` together.
fn kish(weights: &[f64], height: &[f64]) -> f64 {
    let (mut first, mut second) = (0.0, 0.0);
    for (weight, height) in weights.iter().zip(height) {
        first += weight * height;
        second += weight * weight * height;
    }
    first * first / second
}
