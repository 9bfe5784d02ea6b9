//! Triangular factors with row exchange (Golub & Van Loan, *Matrix Computations*, section 3.4).

use super::{Lane, Matrix};

/// A matrix that cannot be factored: no usable pivot in the given column.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct SingularMatrix {
    /// Column without a pivot.
    pub column: usize,
}

/// The factors of a square matrix, kept with the storage so that a hot loop allocates once.
#[derive(Clone, Debug)]
pub struct Factored<L> {
    factors: Matrix<L>,
    exchanges: Vec<usize>,
    reciprocals: Vec<L>,
}

impl<L: Lane> Factored<L> {
    /// Storage for matrices of the given size, to be filled by [`Factored::factor`].
    pub fn with_size(size: usize) -> Self {
        Factored {
            factors: Matrix::zero(size, size),
            exchanges: vec![0; size],
            reciprocals: vec![L::zero(); size],
        }
    }

    /// The factors of `matrix`.
    ///
    /// # Errors
    /// Where a column has no pivot that is non-zero and finite in every lane.
    pub fn of(matrix: &Matrix<L>) -> Result<Self, SingularMatrix> {
        let mut factored = Factored::with_size(matrix.rows());
        factored.matrix_mut().clone_from(matrix);
        factored.factor()?;
        Ok(factored)
    }

    /// The storage to write the matrix into before [`Factored::factor`].
    pub fn matrix_mut(&mut self) -> &mut Matrix<L> {
        &mut self.factors
    }

    /// Factor the stored matrix in place, choosing each pivot by its weakest lane.
    ///
    /// # Errors
    /// As for [`Factored::of`].
    pub fn factor(&mut self) -> Result<(), SingularMatrix> {
        let size = self.factors.rows();
        for column in 0..size {
            let pivot = self.best_pivot(column)?;
            self.exchanges[column] = pivot;
            self.factors.swap_rows(column, pivot);
            let reciprocal = L::one() / self.factors[(column, column)];
            self.reciprocals[column] = reciprocal;
            for row in column + 1..size {
                let factor = self.factors[(row, column)] * reciprocal;
                self.factors[(row, column)] = factor;
                let (above, below) = self.factors.row_and_row_mut(column, row);
                for (value, subtrahend) in below[column + 1..].iter_mut().zip(&above[column + 1..])
                {
                    *value -= factor * *subtrahend;
                }
            }
        }
        Ok(())
    }

    fn best_pivot(&self, column: usize) -> Result<usize, SingularMatrix> {
        let mut best = (column, 0.0);
        for row in column..self.factors.rows() {
            let weight = self.factors[(row, column)].abs().smallest();
            if weight > best.1 {
                best = (row, weight);
            }
        }
        if best.1 > 0.0 && best.1.is_finite() {
            Ok(best.0)
        } else {
            Err(SingularMatrix { column })
        }
    }

    /// Replace `x` by the solution of A·x = `x`.
    #[inline(always)]
    pub fn solve(&self, x: &mut [L]) {
        let size = self.factors.rows();
        for (k, &exchange) in self.exchanges.iter().enumerate() {
            x.swap(k, exchange);
        }
        for row in 1..size {
            let mut value = x[row];
            for (entry, known) in self.factors.row(row)[..row].iter().zip(&x[..row]) {
                value -= *entry * *known;
            }
            x[row] = value;
        }
        for row in (0..size).rev() {
            let mut value = x[row];
            for (entry, known) in self.factors.row(row)[row + 1..].iter().zip(&x[row + 1..]) {
                value -= *entry * *known;
            }
            x[row] = value * self.reciprocals[row];
        }
    }

    /// The solution X of A·X = `right`, column by column.
    pub fn solve_matrix(&self, right: &Matrix<L>) -> Matrix<L> {
        let mut solution = Matrix::zero(right.rows(), right.columns());
        let mut column = vec![L::zero(); right.rows()];
        for c in 0..right.columns() {
            for (r, value) in column.iter_mut().enumerate() {
                *value = right[(r, c)];
            }
            self.solve(&mut column);
            for (r, value) in column.iter().enumerate() {
                solution[(r, c)] = *value;
            }
        }
        solution
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn hilbert_like(size: usize) -> Matrix<f64> {
        let mut matrix = Matrix::zero(size, size);
        for r in 0..size {
            for c in 0..size {
                matrix[(r, c)] = 1.0 / (1.0 + r as f64 + 2.0 * c as f64)
                    + if r == (c + 1) % size { 1.0 } else { 0.0 };
            }
        }
        matrix
    }

    #[test]
    fn a_solution_satisfies_its_equations() {
        for size in 1..9 {
            let matrix = hilbert_like(size);
            let wanted: Vec<f64> = (0..size).map(|k| 1.0 - 0.3 * k as f64).collect();
            let mut x = vec![0.0; size];
            matrix.multiply_add(&wanted, &mut x);
            Factored::of(&matrix).unwrap().solve(&mut x);
            for (found, wanted) in x.iter().zip(&wanted) {
                // rounding times the condition number of these matrices, which stays below 1e4
                assert!(
                    (found - wanted).abs() < 1e-11,
                    "{size}: {found} against {wanted}"
                );
            }
        }
    }

    #[test]
    fn a_singular_matrix_is_refused() {
        let mut matrix = Matrix::<f64>::zero(2, 2);
        matrix[(0, 0)] = 1.0;
        matrix[(1, 0)] = 2.0;
        assert_eq!(
            Factored::of(&matrix).unwrap_err(),
            SingularMatrix { column: 1 }
        );
    }
}
