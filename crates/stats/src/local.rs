//! Local polynomials through points with errors.
//!
//! No single polynomial is right for a curve, and which window and degree are chosen by eye changes the answer. All
//! windows around the place of interest and all degrees up to the highest are fitted and averaged with weights
//! exp(-(chi^2 + 2 parameters + 2 points left out)/2) (Jay & Neil 2021 Phys. Rev. D 103 114502; Neil & Sitison 2022),
//! which prefers few parameters and many points as long as chi^2 allows them. The disagreement between the models is
//! reported as an error of its own.
//!
//! Replicates of the data are close to the data, so that their polynomial follows to first order, with one product. That
//! includes how the weights answer to the data: dw/dy = -w (dchi^2/dy - mean of it)/2, and dchi^2/dy_j = 2 r_j/sigma_j^2 for
//! residuals r at the minimum. With weights held fixed errors come out too small by up to a third where several models compete.
//!
//! Where no polynomial fits (few points, far apart and very precise) those through the nearest 3, 4 ... points, which pass any
//! test, join the average: what they disagree about is then the error.

use spinledger_numerics::elementary::exp;
use spinledger_numerics::special::chi_squared_p;
use thiserror::Error;

use crate::fit::{Errors, FitError, linear_map};
use crate::matrix::{Matrix, dot};

/// No polynomial fits where all have less probability than this.
const LEAST_P: f64 = 0.01;

/// How [`local`] works.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct LocalParams {
    /// Highest degree tried: 5.
    pub most_degree: usize,
    /// Nearest points used at most: 24.
    pub most_points: usize,
    /// Whether the points are exactly on a smooth curve up to errors they share (a reweighted curve): then
    /// the cubic through the four nearest points is taken, and nothing is averaged.
    pub smooth: bool,
}

impl Default for LocalParams {
    fn default() -> Self {
        Self { most_degree: 5, most_points: 24, smooth: false }
    }
}

/// A polynomial in u = (x - centre)/scale near the centre, as a linear function of the data.
#[derive(Clone, Debug, PartialEq)]
#[non_exhaustive]
pub struct Local {
    /// Place where it was made.
    pub centre: f64,
    /// Length that makes u of order 1 over the points used.
    pub scale: f64,
    /// Coefficient of each power of u for the data it was made from.
    pub base: Vec<f64>,
    /// Row k takes a change of the data to the change of the coefficient of u^k, to first order.
    pub map: Matrix,
    /// Standard deviation of the value at the centre between the models that were averaged, beyond what the errors of
    /// the data explain.
    pub model_error: f64,
    /// Chi-squared of the model with the largest weight; 0 if smooth.
    pub chi_squared: f64,
    /// Its degrees of freedom.
    pub degrees: usize,
}

/// Why there is no polynomial.
#[derive(Clone, Debug, PartialEq, Error)]
#[non_exhaustive]
pub enum LocalError {
    /// Fewer than two points.
    #[error("a local polynomial needs two points; there are {points}")]
    TooFew {
        /// Points there are.
        points: usize,
    },
    /// Numbers of places, values and errors differ, places do not increase, or something is not finite.
    #[error("points must be finite and in increasing order")]
    Points,
    /// No model could be fitted.
    #[error("no polynomial could be fitted")]
    Fit(#[from] FitError),
}

impl Local {
    /// The coefficients for data that differ from those it was made from by this much.
    ///
    /// # Panics
    /// If there is not one change for each datum.
    #[must_use]
    pub fn coefficients(&self, change: &[f64]) -> Vec<f64> {
        let mut coefficients = self.map.times(change);
        coefficients.iter_mut().zip(&self.base).for_each(|(value, base)| *value += base);
        coefficients
    }

    /// u of a place.
    #[must_use]
    pub fn reduced(&self, x: f64) -> f64 {
        (x - self.centre) / self.scale
    }
}

/// Value and derivative with respect to u of a polynomial with these coefficients.
#[must_use]
pub fn value_and_slope(coefficients: &[f64], u: f64) -> (f64, f64) {
    let (mut value, mut slope) = (0.0, 0.0);
    for coefficient in coefficients.iter().rev() {
        slope = slope * u + value;
        value = value * u + coefficient;
    }
    (value, slope)
}

/// The averaged polynomial near `centre` of points at increasing places.
///
/// An error below a tenth of the median error counts as that: a point that happened not to fluctuate must not force the
/// curve. Cost: about points^2/4 times degrees small fits.
///
/// # Errors
/// Fewer than two points, points not in order or not finite, or no model that can be fitted.
pub fn local(x: &[f64], y: &[f64], errors: &[f64], centre: f64, params: &LocalParams) -> Result<Local, LocalError> {
    let points = x.len();
    if points < 2 {
        return Err(LocalError::TooFew { points });
    }
    let finite = |values: &[f64]| values.len() == points && values.iter().all(|value| value.is_finite());
    if !finite(x) || !finite(y) || !finite(errors) || !centre.is_finite() || x.windows(2).any(|pair| pair[0] >= pair[1])
    {
        return Err(LocalError::Points);
    }
    let nearest = if params.smooth { 4 } else { params.most_points.max(2) };
    let (first, last) = window_around(x, centre, nearest);
    let scale = 0.5 * (x[last - 1] - x[first]);
    let errors = floored(errors, y);
    // The interval that holds the centre, or the end nearest to it, belongs to every window.
    let right = x[first..last].iter().position(|place| *place >= centre).map_or(last - 1, |index| first + index);
    let right = right.clamp(first + 1, last - 1);
    let mut models =
        Models { x, y, errors: &errors, centre, scale, range: (first, last), found: Vec::new(), failure: None };
    if params.smooth || last - first < 4 {
        // Nothing can be tested, or nothing needs to be.
        let least = if params.smooth { last - first - 1 } else { 1 };
        for degree in least..=(last - first - 1).min(params.most_degree.max(1)) {
            models.windows(right, |points| points > degree && (!params.smooth || points == last - first), degree);
        }
    } else {
        // A polynomial through as many points as it has coefficients fits whatever it is: a straight line through two
        // points would weigh as much as a cubic through four.
        for degree in 1..=params.most_degree.max(1) {
            models.windows(right, |points| points > degree + 1, degree);
        }
        let fits = |model: &Model| chi_squared_p(model.chi_squared, model.degrees) >= LEAST_P;
        if !models.found.iter().any(fits) {
            for degree in 2..=params.most_degree.min(last - first - 1) {
                let (start, end) = window_around(x, centre, degree + 1);
                models.add(start, end, degree);
            }
        }
    }
    let Models { found: models, failure, .. } = models;
    let Some(best) = models.iter().min_by(|a, b| a.criterion.total_cmp(&b.criterion)) else {
        return Err(failure.unwrap_or(FitError::TooFew { data: points, parameters: 2 }).into());
    };
    let weights: Vec<f64> = models.iter().map(|model| exp(-0.5 * (model.criterion - best.criterion))).collect();
    let total = spinledger_numerics::sum::sum(&weights);
    let most = models.iter().map(|model| model.map.rows()).max().unwrap_or(0);
    let mut base = vec![0.0; most];
    for (model, weight) in models.iter().zip(&weights) {
        base.iter_mut().zip(&model.coefficients).for_each(|(sum, own)| *sum += weight / total * own);
    }
    // `average` at fixed weights, `map` with what the weights do.
    let (mut average, mut map) = (vec![0.0; points], Matrix::zeros(most, points));
    for (model, weight) in models.iter().zip(&weights) {
        let weight = weight / total;
        for datum in 0..model.map.columns() {
            let at = model.start + datum;
            average[at] += weight * model.map[(0, datum)];
            for k in 0..most {
                let own = model.coefficients.get(k).copied().unwrap_or(0.0);
                let direct = if k < model.map.rows() { model.map[(k, datum)] } else { 0.0 };
                map[(k, at)] += weight * (direct - (own - base[k]) * model.pulls[datum] / errors[at]);
            }
        }
    }
    // Models differ because the data fluctuate, too. That part is in the errors of the data already and is taken off.
    let mut square = 0.0;
    for (model, weight) in models.iter().zip(&weights) {
        let difference = model.coefficients[0] - base[0];
        let mut expected = 0.0;
        for datum in 0..points {
            let used = datum.checked_sub(model.start).filter(|index| *index < model.map.columns());
            let pull = (used.map_or(0.0, |index| model.map[(0, index)]) - average[datum]) * errors[datum];
            expected += pull * pull;
        }
        square += weight / total * (difference * difference - expected);
    }
    Ok(Local {
        centre,
        scale,
        base,
        map,
        model_error: square.max(0.0).sqrt(),
        chi_squared: if params.smooth { 0.0 } else { best.chi_squared },
        degrees: if params.smooth { 0 } else { best.degrees },
    })
}

struct Model {
    start: usize,
    map: Matrix,
    coefficients: Vec<f64>,
    /// Residuals over errors.
    pulls: Vec<f64>,
    chi_squared: f64,
    degrees: usize,
    criterion: f64,
}

/// Models in the making.
struct Models<'a> {
    x: &'a [f64],
    y: &'a [f64],
    errors: &'a [f64],
    centre: f64,
    scale: f64,
    /// Points that may be used.
    range: (usize, usize),
    found: Vec<Model>,
    failure: Option<FitError>,
}

impl Models<'_> {
    /// Fits all windows of allowed lengths that hold the points before and at `right`.
    fn windows(&mut self, right: usize, allowed: impl Fn(usize) -> bool, degree: usize) {
        let (first, last) = self.range;
        for start in first..right {
            for end in right + 1..=last {
                if allowed(end - start) {
                    self.add(start, end, degree);
                }
            }
        }
    }

    fn add(&mut self, start: usize, end: usize, degree: usize) {
        let u = |row: usize| (self.x[start + row] - self.centre) / self.scale;
        let design = Matrix::from_fn(end - start, degree + 1, |row, k| power(u(row), k));
        let (y, errors) = (&self.y[start..end], &self.errors[start..end]);
        let map = match linear_map(&design, Errors::Independent(errors)) {
            Ok(map) => map,
            Err(error) => {
                self.failure = Some(error);
                return;
            }
        };
        let coefficients = map.times(y);
        let pull = |row: usize| (y[row] - dot(design.row(row), &coefficients)) / errors[row];
        let pulls: Vec<f64> = (0..y.len()).map(pull).collect();
        let chi_squared = dot(&pulls, &pulls);
        let (used, parameters, points) = (design.rows(), design.columns(), self.range.1 - self.range.0);
        let criterion = chi_squared + 2.0 * (parameters + points - used) as f64;
        let degrees = used - parameters;
        self.found.push(Model { start, map, coefficients, pulls, chi_squared, degrees, criterion });
    }
}

/// The `count` consecutive places nearest to the centre, as a range.
fn window_around(x: &[f64], centre: f64, count: usize) -> (usize, usize) {
    let (mut first, mut last) = (0, x.len());
    while last - first > count {
        if centre - x[first] > x[last - 1] - centre { first += 1 } else { last -= 1 }
    }
    (first, last)
}

/// Errors with a floor of a tenth of their median, and of 1e-12 of the values.
fn floored(errors: &[f64], y: &[f64]) -> Vec<f64> {
    let mut sorted: Vec<f64> = errors.iter().map(|error| error.abs()).collect();
    sorted.sort_unstable_by(f64::total_cmp);
    let largest = y.iter().fold(f64::MIN_POSITIVE, |most, value| most.max(value.abs()));
    let floor = (0.1 * sorted[sorted.len() / 2]).max(1e-12 * largest);
    errors.iter().map(|error| error.abs().max(floor)).collect()
}

fn power(u: f64, exponent: usize) -> f64 {
    (0..exponent).fold(1.0, |value, _| value * u)
}
