//! Numeric factorisation and solution.

use std::sync::Arc;

use faer::dyn_stack::{MemBuffer, MemStack};
use faer::sparse::SparseColMatRef;
use faer::sparse::SymbolicSparseColMatRef;
use faer::linalg::cholesky::ldlt::factor::LdltError;
use faer::sparse::linalg::cholesky::LdltRef;
use faer::{Conj, MatMut, Par, Side};

use crate::krylov::norm;
use crate::{Analysis, SparseError, symmetric_multiply};

/// LDLᵀ factor of a matrix with the analysed pattern, and the memory to compute it.
pub struct Factor {
    analysis: Arc<Analysis>,
    values: Vec<f64>,
    memory: MemBuffer,
    rhs: Vec<f64>,
    residual: Vec<f64>,
    valid: bool,
}

impl Factor {
    /// Storage for a factor, without numbers in it yet.
    pub fn new(analysis: &Arc<Analysis>) -> Self {
        let symbolic = &analysis.symbolic;
        let scratch = symbolic
            .factorize_numeric_ldlt_scratch::<f64>(Par::Seq, Default::default())
            .or(symbolic.solve_in_place_scratch::<f64>(1, Par::Seq));
        Self {
            values: vec![0.0; symbolic.len_val()],
            memory: MemBuffer::new(scratch),
            rhs: vec![0.0; analysis.n()],
            residual: vec![0.0; analysis.n()],
            analysis: Arc::clone(analysis),
            valid: false,
        }
    }

    /// The analysis this factor was made for.
    pub fn analysis(&self) -> &Arc<Analysis> {
        &self.analysis
    }

    /// Factorises the matrix with the given values, one per entry of the pattern.
    ///
    /// # Errors
    /// `ValueCount`, `NonFinite` or `SingularPivot`; the factor then holds nothing.
    pub fn factorise(&mut self, values: &[f64]) -> Result<(), SparseError> {
        self.valid = false;
        let pattern = self.analysis.pattern();
        if values.len() != pattern.entries() {
            return Err(SparseError::ValueCount {
                found: values.len(),
                expected: pattern.entries(),
            });
        }
        if let Some(entry) = values.iter().position(|v| !v.is_finite()) {
            return Err(SparseError::NonFinite {
                row: pattern.row_idx[entry],
                column: pattern.col_ptr.partition_point(|&start| start <= entry) - 1,
            });
        }
        let n = pattern.n;
        let structure =
            SymbolicSparseColMatRef::new_checked(n, n, &pattern.col_ptr, None, &pattern.row_idx);
        self.analysis
            .symbolic
            .factorize_numeric_ldlt(
                &mut self.values,
                SparseColMatRef::new(structure, values),
                Side::Upper,
                Default::default(),
                Par::Seq,
                MemStack::new(&mut self.memory),
                Default::default(),
            )
            .map_err(|LdltError::ZeroPivot { index }| SparseError::SingularPivot {
                unknown: self.analysis.order()[index],
            })?;
        self.valid = true;
        Ok(())
    }

    /// Replaces `rhs` by the solution.
    ///
    /// # Panics
    /// If the last factorisation failed or none was made, or `rhs` is not of length n.
    pub fn solve_in_place(&mut self, rhs: &mut [f64]) {
        assert!(self.valid, "no factorisation to solve with");
        let n = self.analysis.n();
        assert_eq!(rhs.len(), n, "one number per unknown");
        LdltRef::new(&self.analysis.symbolic, &self.values).solve_in_place_with_conj(
            Conj::No,
            MatMut::from_column_major_slice_mut(rhs, n, 1),
            Par::Seq,
            MemStack::new(&mut self.memory),
        );
    }

    /// Replaces `rhs` by the solution after one step of iterative refinement and returns
    /// ‖b − A x‖₂ / ‖b‖₂ (zero for b = 0).
    ///
    /// `values` is the matrix factorised, or one close to it.
    ///
    /// # Panics
    /// As [`Factor::solve_in_place`], and if `values` does not match the pattern.
    pub fn solve_refined(&mut self, values: &[f64], rhs: &mut [f64]) -> f64 {
        let mut b = std::mem::take(&mut self.rhs);
        let mut r = std::mem::take(&mut self.residual);
        b.copy_from_slice(rhs);
        self.solve_in_place(rhs);
        let analysis = Arc::clone(&self.analysis);
        let residual = |x: &[f64], r: &mut [f64]| {
            symmetric_multiply(analysis.pattern(), values, x, r);
            r.iter_mut().zip(&b).for_each(|(r, b)| *r = b - *r);
        };
        residual(rhs, &mut r);
        self.solve_in_place(&mut r);
        rhs.iter_mut().zip(&r).for_each(|(x, r)| *x += r);
        residual(rhs, &mut r);
        let scale = norm(&b);
        let relative = if scale > 0.0 { norm(&r) / scale } else { 0.0 };
        self.rhs = b;
        self.residual = r;
        relative
    }
}
