//! Sparsity pattern of a symmetric matrix and its product with a vector.

use crate::SparseError;

/// Upper triangle of a symmetric sparse matrix, compressed by columns.
///
/// Rows of a column increase strictly and end with the diagonal, which is always stored.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Pattern {
    /// Order of the matrix.
    pub n: usize,
    /// Start of each column in `row_idx`; `n + 1` numbers.
    pub col_ptr: Vec<usize>,
    /// Row of each stored entry.
    pub row_idx: Vec<usize>,
}

impl Pattern {
    /// Number of stored entries.
    pub fn entries(&self) -> usize {
        self.row_idx.len()
    }

    /// Rows stored in `column`.
    ///
    /// # Panics
    /// If `column ≥ n`.
    pub fn rows(&self, column: usize) -> &[usize] {
        &self.row_idx[self.col_ptr[column]..self.col_ptr[column + 1]]
    }

    /// Checks every promise made in the type's description.
    ///
    /// # Errors
    /// `ColumnPointers`, `RowOutOfPlace` or `MissingDiagonal`, with the first offender.
    pub fn check(&self) -> Result<(), SparseError> {
        let pointers = |index: usize, found: usize, expected| {
            Err(SparseError::ColumnPointers {
                index,
                found,
                expected,
            })
        };
        if self.col_ptr.len() != self.n + 1 {
            return pointers(self.n, self.col_ptr.len(), "there must be n + 1 of them");
        }
        if self.col_ptr[0] != 0 {
            return pointers(0, self.col_ptr[0], "the first must be 0");
        }
        for column in 0..self.n {
            if self.col_ptr[column + 1] < self.col_ptr[column] {
                return pointers(
                    column + 1,
                    self.col_ptr[column + 1],
                    "it must not be smaller than the one before",
                );
            }
        }
        if self.col_ptr[self.n] != self.row_idx.len() {
            return pointers(
                self.n,
                self.col_ptr[self.n],
                "the last must be the number of rows stored",
            );
        }
        for column in 0..self.n {
            let rows = self.rows(column);
            for (k, &row) in rows.iter().enumerate() {
                if row > column || (k > 0 && rows[k - 1] >= row) {
                    return Err(SparseError::RowOutOfPlace { column, row });
                }
            }
            if rows.last() != Some(&column) {
                return Err(SparseError::MissingDiagonal { column });
            }
        }
        Ok(())
    }
}

/// `y = A x` from the upper triangle of the symmetric matrix A.
///
/// # Panics
/// If `values` does not match the pattern, or `x` or `y` are not of length n.
pub fn symmetric_multiply(pattern: &Pattern, values: &[f64], x: &[f64], y: &mut [f64]) {
    assert_eq!(values.len(), pattern.entries(), "one value per entry");
    assert_eq!(x.len(), pattern.n, "x must have one number per unknown");
    assert_eq!(y.len(), pattern.n, "y must have one number per unknown");
    y.fill(0.0);
    for column in 0..pattern.n {
        let range = pattern.col_ptr[column]..pattern.col_ptr[column + 1];
        let x_column = x[column];
        let mut sum = 0.0;
        for (&row, &value) in pattern.row_idx[range.clone()].iter().zip(&values[range]) {
            if row == column {
                sum += value * x_column;
            } else {
                sum += value * x[row];
                y[row] += value * x_column;
            }
        }
        y[column] += sum;
    }
}
