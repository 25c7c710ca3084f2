//! Small dense matrices.

/// A matrix of doubles, rows one after another. Made for tens of rows: nothing is blocked or parallel.
#[derive(Clone, Debug, PartialEq)]
pub struct Matrix {
    rows: usize,
    columns: usize,
    values: Vec<f64>,
}

impl Matrix {
    /// A matrix of zeros.
    #[must_use]
    pub fn zeros(rows: usize, columns: usize) -> Self {
        Self { rows, columns, values: vec![0.0; rows * columns] }
    }

    /// The matrix with these entries.
    #[must_use]
    pub fn from_fn(rows: usize, columns: usize, mut entry: impl FnMut(usize, usize) -> f64) -> Self {
        let mut matrix = Self::zeros(rows, columns);
        for row in 0..rows {
            for column in 0..columns {
                matrix[(row, column)] = entry(row, column);
            }
        }
        matrix
    }

    /// A square matrix with this diagonal and zeros elsewhere.
    #[must_use]
    pub fn diagonal(entries: &[f64]) -> Self {
        Self::from_fn(entries.len(), entries.len(), |row, column| if row == column { entries[row] } else { 0.0 })
    }

    /// Number of rows.
    #[must_use]
    pub fn rows(&self) -> usize {
        self.rows
    }

    /// Number of columns.
    #[must_use]
    pub fn columns(&self) -> usize {
        self.columns
    }

    /// One row.
    ///
    /// # Panics
    /// If there is no such row.
    #[must_use]
    pub fn row(&self, row: usize) -> &[f64] {
        &self.values[row * self.columns..(row + 1) * self.columns]
    }

    /// The product with a vector.
    ///
    /// # Panics
    /// If the vector has not one entry a column.
    #[must_use]
    pub fn times(&self, vector: &[f64]) -> Vec<f64> {
        assert_eq!(vector.len(), self.columns, "entries of the vector");
        (0..self.rows).map(|row| dot(self.row(row), vector)).collect()
    }

    /// The lower triangular L with L L^T = this (Cholesky); only the lower triangle is read.
    ///
    /// `None` if the matrix is not square, not positive definite in double precision, or not finite: a pivot must
    /// exceed 1e-14 times the diagonal entry it came from.
    #[must_use]
    pub fn cholesky(&self) -> Option<Self> {
        if self.rows != self.columns {
            return None;
        }
        let mut lower = Self::zeros(self.rows, self.rows);
        for row in 0..self.rows {
            for column in 0..=row {
                let left = self[(row, column)] - dot(&lower.row(row)[..column], &lower.row(column)[..column]);
                if row != column {
                    lower[(row, column)] = left / lower[(column, column)];
                } else if left > 1e-14 * self[(row, row)] && left.is_finite() {
                    lower[(row, row)] = left.sqrt();
                } else {
                    return None;
                }
            }
        }
        Some(lower)
    }

    /// Solves L x = b for this lower triangular L.
    ///
    /// # Panics
    /// If the vector has not one entry a row.
    #[must_use]
    pub fn forward(&self, vector: &[f64]) -> Vec<f64> {
        assert_eq!(vector.len(), self.rows, "entries of the vector");
        let mut solution = vec![0.0; self.rows];
        for row in 0..self.rows {
            solution[row] = (vector[row] - dot(&self.row(row)[..row], &solution[..row])) / self[(row, row)];
        }
        solution
    }

    /// Solves L^T x = b for this lower triangular L.
    ///
    /// # Panics
    /// If the vector has not one entry a row.
    #[must_use]
    pub fn backward(&self, vector: &[f64]) -> Vec<f64> {
        assert_eq!(vector.len(), self.rows, "entries of the vector");
        let mut solution = vec![0.0; self.rows];
        for row in (0..self.rows).rev() {
            let mut left = vector[row];
            for below in row + 1..self.rows {
                left -= self[(below, row)] * solution[below];
            }
            solution[row] = left / self[(row, row)];
        }
        solution
    }

    /// The inverse of a symmetric positive definite matrix; `None` as for [`Matrix::cholesky`].
    #[must_use]
    pub fn inverse(&self) -> Option<Self> {
        let lower = self.cholesky()?;
        let mut inverse = Self::zeros(self.rows, self.rows);
        for column in 0..self.rows {
            let mut unit = vec![0.0; self.rows];
            unit[column] = 1.0;
            for (row, value) in lower.backward(&lower.forward(&unit)).into_iter().enumerate() {
                inverse[(row, column)] = value;
            }
        }
        // Exactly symmetric, whatever the rounding.
        Some(Self::from_fn(self.rows, self.rows, |row, column| inverse[(row.max(column), row.min(column))]))
    }
}

impl std::ops::Index<(usize, usize)> for Matrix {
    type Output = f64;

    fn index(&self, (row, column): (usize, usize)) -> &f64 {
        &self.values[row * self.columns + column]
    }
}

impl std::ops::IndexMut<(usize, usize)> for Matrix {
    fn index_mut(&mut self, (row, column): (usize, usize)) -> &mut f64 {
        &mut self.values[row * self.columns + column]
    }
}

/// Scalar product in order.
pub(crate) fn dot(a: &[f64], b: &[f64]) -> f64 {
    let mut total = 0.0;
    for (x, y) in a.iter().zip(b) {
        total += x * y;
    }
    total
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn factor_and_inverse_of_a_known_matrix() {
        let entries = [[4.0, 12.0, -16.0], [12.0, 37.0, -43.0], [-16.0, -43.0, 98.0]];
        let matrix = Matrix::from_fn(3, 3, |row, column| entries[row][column]);
        let lower = matrix.cholesky().expect("positive definite");
        let expected = [[2.0, 0.0, 0.0], [6.0, 1.0, 0.0], [-8.0, 5.0, 3.0]];
        assert_eq!(lower, Matrix::from_fn(3, 3, |row, column| expected[row][column]));
        let inverse = matrix.inverse().expect("positive definite");
        for row in 0..3 {
            let product = matrix.times(inverse.row(row));
            for (column, value) in product.iter().enumerate() {
                assert!((value - f64::from(u8::from(row == column))).abs() < 1e-12);
            }
        }
    }

    #[test]
    fn what_is_not_positive_definite_has_no_factor() {
        let singular = Matrix::from_fn(2, 2, |_, _| 1.0);
        assert_eq!(singular.cholesky(), None);
        assert_eq!(Matrix::diagonal(&[1.0, -1.0]).inverse(), None);
        assert_eq!(Matrix::diagonal(&[1.0, f64::NAN]).inverse(), None);
        assert_eq!(Matrix::diagonal(&[f64::INFINITY]).inverse(), None);
        assert_eq!(Matrix::zeros(2, 3).cholesky(), None);
    }
}
