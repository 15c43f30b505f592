//! Errors of the sparse solver.

/// What can go wrong between a sparsity pattern and a solution.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum SparseError {
    /// The column pointers do not describe `unknowns` columns.
    #[error(
        "column pointer {index} is {found}, but {expected}; pointers must start at 0, never fall, and end at the number of rows stored"
    )]
    ColumnPointers {
        /// Position in `col_ptr`.
        index: usize,
        /// The value found there.
        found: usize,
        /// What would have been right, in words.
        expected: &'static str,
    },
    /// The pattern has no columns.
    #[error("the matrix has no unknowns")]
    Empty,
    /// A column's row indices do not increase strictly, or leave the upper triangle.
    #[error(
        "row {row} in column {column} is out of place: rows of a column must increase strictly and stay in the upper triangle (row ≤ column)"
    )]
    RowOutOfPlace {
        /// Column of the entry.
        column: usize,
        /// Row of the entry.
        row: usize,
    },
    /// A column does not store its diagonal entry.
    #[error("column {column} has no diagonal entry: store it even where its value is zero")]
    MissingDiagonal {
        /// The column.
        column: usize,
    },
    /// The number of unknowns is not `block` times the number of points.
    #[error(
        "{unknowns} unknowns do not equal {block} per point times {points} points: pass one point per block"
    )]
    BlockSize {
        /// Order of the matrix.
        unknowns: usize,
        /// Unknowns per point asked for.
        block: usize,
        /// Number of points given.
        points: usize,
    },
    /// A coordinate is NaN or infinite.
    #[error("point {point} has a coordinate that is not finite")]
    NonFinitePoint {
        /// Index of the point.
        point: usize,
    },
    /// The factor does not fit the index type or the memory.
    #[error("a matrix of {unknowns} unknowns is too large to factorise directly")]
    TooLarge {
        /// Order of the matrix.
        unknowns: usize,
    },
    /// The slice of values does not match the pattern.
    #[error("{found} values were given for a pattern of {expected} entries")]
    ValueCount {
        /// Number of values given.
        found: usize,
        /// Number of entries in the pattern.
        expected: usize,
    },
    /// A value of the matrix is NaN or infinite.
    #[error("the matrix entry in row {row}, column {column} is not finite")]
    NonFinite {
        /// Row of the entry.
        row: usize,
        /// Column of the entry.
        column: usize,
    },
    /// A pivot overflowed, or vanished to rounding (within 4 ε of the entry it came from): the
    /// matrix is singular, hence not quasi-definite.
    #[error(
        "the pivot of unknown {unknown} vanishes: the matrix is singular; tie down its null vectors or check the signs of its diagonal blocks"
    )]
    SingularPivot {
        /// The unknown, numbered as in the pattern.
        unknown: usize,
    },
}
