//! Functions of means, with errors that know about autocorrelation.
//!
//! Projected series (Wolff 2004 Comput. Phys. Commun. 156 143, sect. 3.2): for a function F of the means of a_1, a_2 ... the series
//! y = sum_k (dF/da_k) a_k has, to first order, the fluctuations of F; its error of the mean, autocorrelation time
//! and effective number are those of F. The bias of F, of relative order 1/effective, is left in: it is
//! smaller than the error by the square root of that.

use thiserror::Error;

use spinledger_numerics::sum::{CompensatedSum, sum_by};

use crate::autocorrelation::{
    Autocorrelation, AutocorrelationError, AutocorrelationParams, autocorrelation, common_mean,
};

/// A function of means.
#[derive(Clone, Debug, PartialEq)]
#[non_exhaustive]
pub struct Derived {
    /// The function at the means.
    pub value: f64,
    /// Standard error of `value`.
    pub error: f64,
    /// Its derivative with respect to each mean.
    pub gradient: Vec<f64>,
    /// The autocorrelation of the projected series.
    pub projected: Autocorrelation,
}

/// Why there is no estimate.
#[derive(Clone, Debug, PartialEq, Error)]
#[non_exhaustive]
pub enum DerivedError {
    /// A column has fewer rows than another of its chain, or a chain another number of columns.
    #[error("chain {chain} has columns of another number or length")]
    Shape {
        /// Chain, from 0.
        chain: usize,
    },
    /// The function is not finite at the means or beside them.
    #[error("the function is not finite at the means")]
    NotFinite,
    /// The series allow no estimate.
    #[error("the series allow no estimate")]
    Series(#[from] AutocorrelationError),
}

/// Value and error of `function(means of the columns)`; `chains[c][k]` is column k of chain c.
///
/// Cost: that of [`autocorrelation`], and a copy of one series.
///
/// # Errors
/// Columns that do not fit together, a function that is not finite, or what [`autocorrelation`] refuses.
pub fn derived(
    chains: &[&[&[f64]]],
    function: impl Fn(&[f64]) -> f64,
    params: &AutocorrelationParams,
) -> Result<Derived, DerivedError> {
    let (means, steps) = means_and_steps(chains)?;
    let value = function(&means);
    let gradient = gradient(&function, &means, &steps);
    if !value.is_finite() || gradient.iter().any(|slope| !slope.is_finite()) {
        return Err(DerivedError::NotFinite);
    }
    let series: Vec<Vec<f64>> = chains
        .iter()
        .map(|columns| {
            let mut series = Vec::new();
            project(columns, &means, &gradient, &mut series);
            series
        })
        .collect();
    let series: Vec<&[f64]> = series.iter().map(Vec::as_slice).collect();
    let projected = autocorrelation(&series, params)?;
    Ok(Derived { value, error: projected.error, gradient, projected })
}

/// The means of all columns over all chains, and steps for [`gradient`]: their errors as if measurements were
/// uncorrelated.
///
/// # Errors
/// As [`derived`].
pub fn means_and_steps(chains: &[&[&[f64]]]) -> Result<(Vec<f64>, Vec<f64>), DerivedError> {
    let width = chains.first().map_or(0, |columns| columns.len());
    for (chain, columns) in chains.iter().enumerate() {
        let rows = columns.first().map_or(0, |column| column.len());
        if columns.len() != width || columns.iter().any(|column| column.len() != rows) {
            return Err(DerivedError::Shape { chain });
        }
    }
    let (mut means, mut steps) = (Vec::new(), Vec::new());
    for column in 0..width {
        let parts: Vec<&[f64]> = chains.iter().map(|columns| columns[column]).collect();
        let mean = common_mean(&parts)?;
        let count: usize = parts.iter().map(|part| part.len()).sum();
        let mut squares = CompensatedSum::new();
        for part in parts {
            squares.add(sum_by(part.len(), |row| (part[row] - mean) * (part[row] - mean)));
        }
        means.push(mean);
        steps.push((squares.value() / count as f64 / count as f64).sqrt());
    }
    Ok((means, steps))
}

/// Central differences of a function; 0 where the step is 0 (a constant column contributes no error).
#[must_use]
pub fn gradient(function: impl Fn(&[f64]) -> f64, at: &[f64], steps: &[f64]) -> Vec<f64> {
    let mut point = at.to_vec();
    let slope = |(k, step): (usize, &f64)| {
        // A step that vanishes beside the value would difference rounding errors.
        if *step <= 4.0 * f64::EPSILON * at[k].abs() {
            return 0.0;
        }
        point[k] = at[k] + step;
        let (high, above) = (function(&point), point[k]);
        point[k] = at[k] - step;
        let (low, below) = (function(&point), point[k]);
        point[k] = at[k];
        (high - low) / (above - below)
    };
    steps.iter().enumerate().map(slope).collect()
}

/// Appends the projected series of one chain, sum_k gradient_k (column_k - mean_k).
///
/// # Panics
/// If columns, means and gradient do not fit together.
pub fn project(columns: &[&[f64]], means: &[f64], gradient: &[f64], series: &mut Vec<f64>) {
    let rows = columns.first().map_or(0, |column| column.len());
    let start = series.len();
    series.resize(start + rows, 0.0);
    for ((column, mean), slope) in columns.iter().zip(means).zip(gradient) {
        assert_eq!(column.len(), rows, "rows of a column");
        if *slope != 0.0 {
            for (value, entry) in series[start..].iter_mut().zip(*column) {
                *value += slope * (entry - mean);
            }
        }
    }
}
