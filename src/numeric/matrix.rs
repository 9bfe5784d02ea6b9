//! A small dense matrix, row after row.

use super::Lane;
use std::ops::{Index, IndexMut};

/// A dense matrix of rows × columns, stored row after row.
#[derive(Clone, Debug, PartialEq)]
pub struct Matrix<L> {
    rows: usize,
    columns: usize,
    entries: Vec<L>,
}

impl<L: Lane> Matrix<L> {
    /// All zero, `rows` × `columns`.
    pub fn zero(rows: usize, columns: usize) -> Self {
        Matrix {
            rows,
            columns,
            entries: vec![L::zero(); rows * columns],
        }
    }

    /// The identity of the given size.
    pub fn identity(size: usize) -> Self {
        let mut matrix = Matrix::zero(size, size);
        for k in 0..size {
            matrix[(k, k)] = L::one();
        }
        matrix
    }

    /// Number of rows.
    pub fn rows(&self) -> usize {
        self.rows
    }

    /// Number of columns.
    pub fn columns(&self) -> usize {
        self.columns
    }

    /// All entries, row after row.
    pub fn entries(&self) -> &[L] {
        &self.entries
    }

    /// One row.
    #[inline(always)]
    pub fn row(&self, row: usize) -> &[L] {
        &self.entries[row * self.columns..(row + 1) * self.columns]
    }

    /// One row, to be changed.
    #[inline(always)]
    pub fn row_mut(&mut self, row: usize) -> &mut [L] {
        &mut self.entries[row * self.columns..(row + 1) * self.columns]
    }

    /// Two different rows, the first to be read and the second to be changed.
    pub fn row_and_row_mut(&mut self, read: usize, change: usize) -> (&[L], &mut [L]) {
        let width = self.columns;
        if read < change {
            let (low, high) = self.entries.split_at_mut(change * width);
            (&low[read * width..(read + 1) * width], &mut high[..width])
        } else {
            let (low, high) = self.entries.split_at_mut(read * width);
            (
                &high[..width],
                &mut low[change * width..(change + 1) * width],
            )
        }
    }

    /// Exchange two rows.
    pub fn swap_rows(&mut self, a: usize, b: usize) {
        if a != b {
            for k in 0..self.columns {
                self.entries
                    .swap(a * self.columns + k, b * self.columns + k);
            }
        }
    }

    /// Set every entry to zero.
    pub fn clear(&mut self) {
        self.entries.fill(L::zero());
    }

    /// `into[r] += Σ self[r, c]·x[c]`.
    #[inline(always)]
    pub fn multiply_add(&self, x: &[L], into: &mut [L]) {
        for (row, sum) in self.entries.chunks_exact(self.columns.max(1)).zip(into) {
            let mut total = L::zero();
            for (entry, value) in row.iter().zip(x) {
                total += *entry * *value;
            }
            *sum += total;
        }
    }

    /// The product `self` × `other`.
    pub fn product(&self, other: &Matrix<L>) -> Matrix<L> {
        let mut result = Matrix::zero(self.rows, other.columns);
        for r in 0..self.rows {
            for k in 0..self.columns {
                let factor = self[(r, k)];
                for (sum, value) in result.row_mut(r).iter_mut().zip(other.row(k)) {
                    *sum += factor * *value;
                }
            }
        }
        result
    }

    /// The same shape with every entry changed by `f`.
    pub fn map<M: Lane>(&self, f: impl Fn(L) -> M) -> Matrix<M> {
        Matrix {
            rows: self.rows,
            columns: self.columns,
            entries: self.entries.iter().map(|entry| f(*entry)).collect(),
        }
    }
}

impl<L: Lane> Index<(usize, usize)> for Matrix<L> {
    type Output = L;
    #[inline(always)]
    fn index(&self, (row, column): (usize, usize)) -> &L {
        &self.entries[row * self.columns + column]
    }
}

impl<L: Lane> IndexMut<(usize, usize)> for Matrix<L> {
    #[inline(always)]
    fn index_mut(&mut self, (row, column): (usize, usize)) -> &mut L {
        &mut self.entries[row * self.columns + column]
    }
}
