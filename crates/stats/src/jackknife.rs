//! Functions of means from blocks, by leaving out one block at a time.
//!
//! Blocks must be long compared with the autocorrelation time. Their lengths may differ: estimate and variance
//! are those of Busing, Meijer & van der Leeden 1999 Stat. Comput. 9 3, which for equal lengths are the
//! classical ones (Quenouille 1956 Biometrika 43 353; Efron 1982).

use thiserror::Error;

use spinledger_numerics::sum::{CompensatedSum, sum_by};

use crate::matrix::Matrix;

/// Sums of quantities over blocks of measurements.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Blocks {
    quantities: usize,
    weights: Vec<f64>,
    /// Block by block, one entry a quantity.
    sums: Vec<f64>,
}

/// Why there is no estimate.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
#[non_exhaustive]
pub enum JackknifeError {
    /// Fewer than two blocks.
    #[error("a jackknife needs two blocks; there are {blocks}")]
    TooFew {
        /// Blocks there are.
        blocks: usize,
    },
    /// The function is not finite, for all blocks or without one of them.
    #[error("the function is not finite")]
    NotFinite,
}

/// Estimates of several functions.
#[derive(Clone, Debug, PartialEq)]
#[non_exhaustive]
pub struct Jackknife {
    /// The functions at the means over all blocks.
    pub estimates: Vec<f64>,
    /// The same with the bias of order 1/blocks removed.
    pub corrected: Vec<f64>,
    /// Covariances of the estimates.
    pub covariance: Matrix,
    /// Replicates: row b holds the functions without block b.
    pub replicates: Matrix,
}

impl Jackknife {
    /// Standard error of one function.
    ///
    /// # Panics
    /// If there is no such function.
    #[must_use]
    pub fn error(&self, function: usize) -> f64 {
        self.covariance[(function, function)].sqrt()
    }
}

impl Blocks {
    /// No blocks yet, of this many quantities.
    #[must_use]
    pub fn new(quantities: usize) -> Self {
        Self { quantities, weights: Vec::new(), sums: Vec::new() }
    }

    /// Adds a block: its weight (number of measurements, or their summed weight) and the sums of the quantities over it.
    ///
    /// # Panics
    /// If there is not one sum for each quantity, or the weight is not positive.
    pub fn push(&mut self, weight: f64, sums: &[f64]) {
        assert_eq!(sums.len(), self.quantities, "sums of a block");
        assert!(weight > 0.0, "a block's weight must be positive");
        self.weights.push(weight);
        self.sums.extend_from_slice(sums);
    }

    /// Cuts columns of one chain into this many blocks whose lengths differ by at most one, and adds them. Fewer
    /// blocks when there are fewer rows.
    ///
    /// # Panics
    /// If there is not one column for each quantity, or their lengths differ.
    pub fn push_chain(&mut self, columns: &[&[f64]], blocks: usize) {
        assert_eq!(columns.len(), self.quantities, "columns of a chain");
        let rows = columns.first().map_or(0, |column| column.len());
        assert!(columns.iter().all(|column| column.len() == rows), "rows of a column");
        let blocks = blocks.min(rows);
        for block in 0..blocks {
            let (start, end) = (block * rows / blocks, (block + 1) * rows / blocks);
            let sum = |column: &&[f64]| sum_by(end - start, |row| column[start + row]);
            let sums: Vec<f64> = columns.iter().map(sum).collect();
            self.push((end - start) as f64, &sums);
        }
    }

    /// Number of blocks.
    #[must_use]
    pub fn len(&self) -> usize {
        self.weights.len()
    }

    /// Whether there are none.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.weights.is_empty()
    }

    /// Values of `function(means, outputs)` with covariances. The function fills one entry for each output.
    ///
    /// Cost: one call a block and one more.
    ///
    /// # Errors
    /// Fewer than two blocks, or an output that is not finite.
    pub fn jackknife(
        &self,
        outputs: usize,
        mut function: impl FnMut(&[f64], &mut [f64]),
    ) -> Result<Jackknife, JackknifeError> {
        let blocks = self.len();
        if blocks < 2 {
            return Err(JackknifeError::TooFew { blocks });
        }
        let weight = spinledger_numerics::sum::sum(&self.weights);
        let total = |quantity: usize| sum_by(blocks, |block| self.sums[block * self.quantities + quantity]);
        let totals: Vec<f64> = (0..self.quantities).map(total).collect();
        let mut means: Vec<f64> = totals.iter().map(|total| total / weight).collect();
        let mut estimates = vec![0.0; outputs];
        function(&means, &mut estimates);
        let mut replicates = Matrix::zeros(blocks, outputs);
        let mut without = vec![0.0; outputs];
        for block in 0..blocks {
            for (quantity, mean) in means.iter_mut().enumerate() {
                let left = totals[quantity] - self.sums[block * self.quantities + quantity];
                *mean = left / (weight - self.weights[block]);
            }
            function(&means, &mut without);
            for (output, value) in without.iter().enumerate() {
                replicates[(block, output)] = *value;
            }
        }
        let finite = |row: usize| replicates.row(row).iter().all(|value| value.is_finite());
        if !estimates.iter().all(|value| value.is_finite()) || !(0..blocks).all(finite) {
            return Err(JackknifeError::NotFinite);
        }
        let corrected: Vec<f64> = (0..outputs)
            .map(|output| {
                let part = |block: usize| {
                    (1.0 - self.weights[block] / weight) * (replicates[(block, output)] - estimates[output])
                };
                // g theta - sum_b (1 - w_b) theta_b, with the weights 1 - w_b adding up to g - 1.
                estimates[output] - sum_by(blocks, part)
            })
            .collect();
        // Deviation of a pseudo-value h theta - (h - 1) theta_b from the corrected estimate, over sqrt(h - 1).
        let deviation = |block: usize, output: usize| {
            let share = weight / self.weights[block];
            let pseudo = estimates[output] - (share - 1.0) * (replicates[(block, output)] - estimates[output]);
            (pseudo - corrected[output]) / (share - 1.0).sqrt()
        };
        let covariance = Matrix::from_fn(outputs, outputs, |a, b| {
            sum_by(blocks, |block| deviation(block, a) * deviation(block, b)) / blocks as f64
        });
        Ok(Jackknife { estimates, corrected, covariance, replicates })
    }
}

/// Number of blocks to cut each of `chains` equal chains of `rows` measurements into.
///
/// Blocks of at least 20 tau measurements, at most 128 in all chains together, and at least two in all: more blocks
/// make the error of the error smaller, blocks shorter than that lose part of the correlation
/// (a fraction of about 1/20 at most).
#[must_use]
pub fn blocks_per_chain(rows: usize, chains: usize, tau: f64) -> usize {
    let chains = chains.max(1);
    let length = (20.0 * tau.max(0.5)).ceil();
    let least = if chains == 1 { 2 } else { 1 };
    ((rows as f64 / length) as usize).clamp(least, (128 / chains).max(least))
}

/// Deviations of equally weighted jackknife replicates, scaled so that their scalar products are covariances:
/// sqrt((n - 1)/n) (theta_b - mean).
#[must_use]
pub fn scaled_deviations(replicates: &[f64]) -> Vec<f64> {
    let count = replicates.len() as f64;
    let Some(mean) = spinledger_numerics::sum::mean(replicates) else { return Vec::new() };
    let scale = ((count - 1.0) / count).sqrt();
    replicates.iter().map(|value| scale * (value - mean)).collect()
}

/// Standard error from equally weighted jackknife replicates; 0 for fewer than two.
#[must_use]
pub fn replicate_error(replicates: &[f64]) -> f64 {
    let mut squares = CompensatedSum::new();
    squares.extend(scaled_deviations(replicates).into_iter().map(|value| value * value));
    squares.value().sqrt()
}
