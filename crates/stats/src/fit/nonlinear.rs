//! Nonlinear least squares with few parameters.

use super::{Errors, Fit, FitError, Whitening};
use crate::matrix::{Matrix, dot};

/// How [`nonlinear`] works.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct NonlinearParams {
    /// Converged when a step changes chi^2 by less than this part of max(1, chi^2) and no parameter by more than
    /// this part of its error: 1e-8.
    pub tolerance: f64,
    /// Iterations at most: 200.
    pub iterations: usize,
}

impl Default for NonlinearParams {
    fn default() -> Self {
        Self { tolerance: 1e-8, iterations: 200 }
    }
}

/// How the fit was found.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[non_exhaustive]
pub struct NonlinearInfo {
    /// Iterations done.
    pub iterations: usize,
}

/// Fits y = model(parameters) from a start, by the method of Levenberg (1944) and Marquardt (1963) with derivatives by
/// central differences. The model fills one value for each datum.
///
/// Finds a minimum near the start, not the least of several. Cost an iteration: two calls a parameter and a few more.
///
/// # Errors
/// Shapes, fewer data than parameters, a model that is not finite at the start, parameters that the data do not determine,
/// or no convergence (with the parameters reached).
pub fn nonlinear(
    model: impl Fn(&[f64], &mut [f64]),
    start: &[f64],
    y: &[f64],
    errors: Errors<'_>,
    params: &NonlinearParams,
) -> Result<(Fit, NonlinearInfo), FitError> {
    let (data, count) = (y.len(), start.len());
    if data < count {
        return Err(FitError::TooFew { data, parameters: count });
    }
    let whitening = Whitening::new(errors, data)?;
    let residuals = |parameters: &[f64]| {
        let mut values = vec![0.0; data];
        model(parameters, &mut values);
        values.iter_mut().zip(y).for_each(|(value, y)| *value = y - *value);
        whitening.apply(&values)
    };
    let mut parameters = start.to_vec();
    let mut left = residuals(&parameters);
    let mut chi_squared = dot(&left, &left);
    if !chi_squared.is_finite() {
        return Err(FitError::NotFinite);
    }
    let mut damping = 1e-3;
    for iteration in 1..=params.iterations {
        let slopes = slopes(&residuals, &parameters);
        let normal = Matrix::from_fn(count, count, |a, b| dot(&slopes[a], &slopes[b]));
        let downhill: Vec<f64> = slopes.iter().map(|slope| -dot(slope, &left)).collect();
        if !downhill.iter().all(|value| value.is_finite()) {
            return Err(FitError::NotFinite);
        }
        if let Some(parameter) = (0..count).find(|parameter| normal[(*parameter, *parameter)] <= 0.0) {
            return Err(FitError::Singular { parameter });
        }
        let mut moved = false;
        // Damping by 10^17 makes a step that rounding swallows: no descent is left then.
        for _ in 0..20 {
            let damped =
                Matrix::from_fn(
                    count,
                    count,
                    |a, b| {
                        if a == b { normal[(a, b)] * (1.0 + damping) } else { normal[(a, b)] }
                    },
                );
            let Some(lower) = damped.cholesky() else {
                damping *= 10.0;
                continue;
            };
            let step = lower.backward(&lower.forward(&downhill));
            let tried: Vec<f64> = parameters.iter().zip(&step).map(|(value, step)| value + step).collect();
            let tried_left = residuals(&tried);
            let tried_chi = dot(&tried_left, &tried_left);
            // NaN counts as uphill.
            if tried_chi <= chi_squared {
                let gain = chi_squared - tried_chi;
                let small = |(a, step): (usize, &f64)| {
                    step.abs() * normal[(a, a)].sqrt() <= params.tolerance.sqrt() * (1.0 + chi_squared.sqrt())
                };
                let done = gain <= params.tolerance * chi_squared.max(1.0) && step.iter().enumerate().all(small);
                (parameters, left, chi_squared) = (tried, tried_left, tried_chi);
                damping = (damping * 0.1).max(1e-12);
                moved = true;
                if done {
                    return finish(&residuals, parameters, chi_squared, data, iteration);
                }
                break;
            }
            damping *= 10.0;
        }
        if !moved {
            // No step goes down: this is a minimum to rounding.
            return finish(&residuals, parameters, chi_squared, data, iteration);
        }
    }
    Err(FitError::NotConverged { iterations: params.iterations, chi_squared, parameters })
}

fn finish(
    residuals: &impl Fn(&[f64]) -> Vec<f64>,
    parameters: Vec<f64>,
    chi_squared: f64,
    data: usize,
    iterations: usize,
) -> Result<(Fit, NonlinearInfo), FitError> {
    let slopes = slopes(residuals, &parameters);
    let count = parameters.len();
    // Scaled to a unit diagonal, so that parameters of very different size do not look dependent.
    let sizes: Vec<f64> = slopes.iter().map(|slope| dot(slope, slope).sqrt()).collect();
    let scaled = Matrix::from_fn(count, count, |a, b| dot(&slopes[a], &slopes[b]) / (sizes[a] * sizes[b]));
    let inverse = scaled.inverse().ok_or(FitError::Singular { parameter: count.saturating_sub(1) })?;
    let covariance = Matrix::from_fn(count, count, |a, b| inverse[(a, b)] / (sizes[a] * sizes[b]));
    let fit = Fit { parameters, covariance, chi_squared, degrees: data - count };
    Ok((fit, NonlinearInfo { iterations }))
}

/// Derivatives of the residuals by central differences, one vector a parameter.
fn slopes(residuals: &impl Fn(&[f64]) -> Vec<f64>, parameters: &[f64]) -> Vec<Vec<f64>> {
    // The step that balances rounding against the third derivative: the cube root of the precision.
    const STEP: f64 = 6.055_454_452_393_343e-6;
    let mut point = parameters.to_vec();
    let mut slopes = Vec::with_capacity(parameters.len());
    for (parameter, value) in parameters.iter().enumerate() {
        let step = STEP * value.abs().max(1e-3);
        point[parameter] = value + step;
        let (high, above) = (residuals(&point), point[parameter]);
        point[parameter] = value - step;
        let (low, below) = (residuals(&point), point[parameter]);
        point[parameter] = *value;
        slopes.push(high.iter().zip(&low).map(|(high, low)| (high - low) / (above - below)).collect());
    }
    slopes
}
