//! Linear least squares.

use super::{Errors, Fit, FitError, Whitening};
use crate::matrix::{Matrix, dot};

/// Fits y = design times parameters; row i of the design belongs to datum i.
///
/// By orthogonalisation of the whitened columns, not by normal equations, which would square the condition.
///
/// # Errors
/// Shapes that do not fit, fewer data than parameters, values that are not finite, errors that are not
/// positive, or columns that depend on each other (to 1e-12 of their length).
pub fn linear(design: &Matrix, y: &[f64], errors: Errors<'_>) -> Result<Fit, FitError> {
    let map = linear_map(design, errors)?;
    if y.len() != design.rows() {
        return Err(FitError::Shape { data: y.len(), other: design.rows() });
    }
    let parameters = map.times(y);
    let whitening = Whitening::new(errors, y.len())?;
    let left: Vec<f64> = (0..y.len()).map(|row| y[row] - dot(design.row(row), &parameters)).collect();
    let left = whitening.apply(&left);
    let chi_squared = dot(&left, &left);
    if !chi_squared.is_finite() {
        return Err(FitError::NotFinite);
    }
    let (_, upper) = orthogonal(design, &whitening)?;
    let inverse = upper_inverse(&upper);
    let count = parameters.len();
    let covariance = Matrix::from_fn(count, count, |a, b| dot(inverse.row(a), inverse.row(b)));
    Ok(Fit { parameters, covariance, chi_squared, degrees: y.len() - count })
}

/// The matrix that takes data to the parameters of [`linear`]: it depends on the design and the errors only, so that
/// many data sets can be fitted by one product each.
///
/// # Errors
/// As [`linear`].
pub fn linear_map(design: &Matrix, errors: Errors<'_>) -> Result<Matrix, FitError> {
    let (data, parameters) = (design.rows(), design.columns());
    if data < parameters {
        return Err(FitError::TooFew { data, parameters });
    }
    let whitening = Whitening::new(errors, data)?;
    let (columns, upper) = orthogonal(design, &whitening)?;
    let inverse = upper_inverse(&upper);
    let mut map = Matrix::zeros(parameters, data);
    for datum in 0..data {
        let mut unit = vec![0.0; data];
        unit[datum] = 1.0;
        let unit = whitening.apply(&unit);
        let projected: Vec<f64> = columns.iter().map(|column| dot(column, &unit)).collect();
        for (parameter, value) in inverse.times(&projected).into_iter().enumerate() {
            map[(parameter, datum)] = value;
        }
    }
    Ok(map)
}

/// Orthonormal columns Q and upper triangular R with Q R = whitened design (Gram-Schmidt, done twice over, which is
/// as good as reflections: Giraud et al. 2005 Numer. Math. 101 87).
fn orthogonal(design: &Matrix, whitening: &Whitening<'_>) -> Result<(Vec<Vec<f64>>, Matrix), FitError> {
    let (data, parameters) = (design.rows(), design.columns());
    let mut columns: Vec<Vec<f64>> = Vec::with_capacity(parameters);
    let mut upper = Matrix::zeros(parameters, parameters);
    for parameter in 0..parameters {
        let raw: Vec<f64> = (0..data).map(|row| design[(row, parameter)]).collect();
        let mut column = whitening.apply(&raw);
        let length = dot(&column, &column).sqrt();
        if !length.is_finite() {
            return Err(FitError::NotFinite);
        }
        for _ in 0..2 {
            for (before, other) in columns.iter().enumerate() {
                let overlap = dot(other, &column);
                upper[(before, parameter)] += overlap;
                column.iter_mut().zip(other).for_each(|(value, other)| *value -= overlap * other);
            }
        }
        let left = dot(&column, &column).sqrt();
        if left <= 1e-12 * length {
            return Err(FitError::Singular { parameter });
        }
        upper[(parameter, parameter)] = left;
        column.iter_mut().for_each(|value| *value /= left);
        columns.push(column);
    }
    Ok((columns, upper))
}

/// Inverse of an upper triangular matrix without zeros on its diagonal.
fn upper_inverse(upper: &Matrix) -> Matrix {
    let size = upper.rows();
    let mut inverse = Matrix::zeros(size, size);
    for column in 0..size {
        inverse[(column, column)] = 1.0 / upper[(column, column)];
        for row in (0..column).rev() {
            let mut total = 0.0;
            for between in row + 1..=column {
                total += upper[(row, between)] * inverse[(between, column)];
            }
            inverse[(row, column)] = -total / upper[(row, row)];
        }
    }
    inverse
}
