//! Least squares with known errors.
//!
//! [`linear`] and [`nonlinear`] minimise chi^2 = (y - f)^T C^-1 (y - f) for data with covariance C. Errors of parameters
//! are those that C implies; they are not scaled by chi^2, which is reported with its probability instead.

mod linear;
mod nonlinear;

pub use linear::{linear, linear_map};
pub use nonlinear::{NonlinearInfo, NonlinearParams, nonlinear};

use spinledger_numerics::special::chi_squared_p;
use thiserror::Error;

use crate::matrix::Matrix;

/// Errors of the data.
#[derive(Clone, Copy, Debug)]
pub enum Errors<'a> {
    /// Independent data with these standard errors.
    Independent(&'a [f64]),
    /// Data with this covariance.
    Covariance(&'a Matrix),
}

/// Parameters that fit best.
#[derive(Clone, Debug, PartialEq)]
#[non_exhaustive]
pub struct Fit {
    /// The parameters.
    pub parameters: Vec<f64>,
    /// Their covariance.
    pub covariance: Matrix,
    /// Least chi^2.
    pub chi_squared: f64,
    /// Data minus parameters.
    pub degrees: usize,
}

impl Fit {
    /// Standard error of a parameter.
    ///
    /// # Panics
    /// If there is no such parameter.
    #[must_use]
    pub fn error(&self, parameter: usize) -> f64 {
        self.covariance[(parameter, parameter)].sqrt()
    }

    /// Probability that chi^2 would be larger if the model were true; 1 for zero degrees.
    #[must_use]
    pub fn p(&self) -> f64 {
        chi_squared_p(self.chi_squared, self.degrees)
    }
}

/// Why there is no fit.
#[derive(Clone, Debug, PartialEq, Error)]
#[non_exhaustive]
pub enum FitError {
    /// Numbers of data, errors and rows of the design differ.
    #[error("{data} data do not fit {other} errors or rows")]
    Shape {
        /// Data there are.
        data: usize,
        /// What there is of the rest.
        other: usize,
    },
    /// More parameters than data.
    #[error("{data} data cannot determine {parameters} parameters")]
    TooFew {
        /// Data there are.
        data: usize,
        /// Parameters asked for.
        parameters: usize,
    },
    /// Data, errors or the model are not finite.
    #[error("data, errors or model values are not finite")]
    NotFinite,
    /// An error is not positive, or the covariance is not positive definite.
    #[error("the covariance of the data is not positive definite")]
    Covariance,
    /// The data do not determine parameter `parameter` beside those before it.
    #[error("the data do not determine parameter {parameter}")]
    Singular {
        /// Parameter, from 0.
        parameter: usize,
    },
    /// No convergence.
    #[error("no convergence after {iterations} iterations; chi^2 {chi_squared}")]
    NotConverged {
        /// Iterations done.
        iterations: usize,
        /// Chi-squared reached.
        chi_squared: f64,
        /// Parameters reached.
        parameters: Vec<f64>,
    },
}

/// Turns data with errors into independent data with error 1.
enum Whitening<'a> {
    Errors(&'a [f64]),
    Factor(Matrix),
}

impl<'a> Whitening<'a> {
    fn new(errors: Errors<'a>, data: usize) -> Result<Self, FitError> {
        let other = match errors {
            Errors::Independent(errors) => errors.len(),
            Errors::Covariance(covariance) => covariance.rows(),
        };
        if other != data {
            return Err(FitError::Shape { data, other });
        }
        match errors {
            Errors::Independent(errors) if errors.iter().all(|error| error.is_finite() && *error > 0.0) => {
                Ok(Self::Errors(errors))
            }
            Errors::Independent(_) => Err(FitError::Covariance),
            Errors::Covariance(covariance) => covariance.cholesky().map(Self::Factor).ok_or(FitError::Covariance),
        }
    }

    fn apply(&self, vector: &[f64]) -> Vec<f64> {
        match self {
            Self::Errors(errors) => vector.iter().zip(*errors).map(|(value, error)| value / error).collect(),
            Self::Factor(lower) => lower.forward(vector),
        }
    }
}
