//! Numeric factorisation and solution.

use std::sync::Arc;

use crate::krylov::norm;
use crate::numeric::Numeric;
use crate::substitution::Substitution;
use crate::{Analysis, SparseError, symmetric_multiply};

/// LDLᵀ factor of a matrix with the analysed pattern, and the memory to compute it.
///
/// Both the factorisation and the solution use the threads of the rayon pool they are called in.
/// Their results are the same to the last bit for any number of threads.
pub struct Factor {
    analysis: Arc<Analysis>,
    values: Vec<f64>,
    arena: Vec<f64>,
    vectors: Vec<f64>,
    rhs: Vec<f64>,
    residual: Vec<f64>,
    valid: bool,
}

impl Factor {
    /// Storage for a factor, without numbers in it yet; all later calls work in it.
    pub fn new(analysis: &Arc<Analysis>) -> Self {
        let plan = &analysis.plan;
        Self {
            values: vec![0.0; plan.factor_length],
            arena: vec![0.0; plan.arena_length],
            vectors: vec![0.0; plan.vector_length],
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

    /// Gives the memory back until the next factorisation.
    pub fn release(&mut self) {
        self.valid = false;
        self.values = Vec::new();
        self.arena = Vec::new();
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
        let plan = &self.analysis.plan;
        self.values.resize(plan.factor_length, 0.0);
        self.arena.resize(plan.arena_length, 0.0);
        Numeric { plan, values }
            .run(&mut self.values, &mut self.arena)
            .map_err(|place| SparseError::SingularPivot { unknown: self.analysis.order()[place] })?;
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
        let plan = &self.analysis.plan;
        let order = self.analysis.order();
        for node in &plan.nodes {
            let unknowns = &order[node.begin..node.begin + node.columns];
            for (v, &unknown) in self.vectors[node.vector..].iter_mut().zip(unknowns) {
                *v = rhs[unknown];
            }
        }
        Substitution { plan, factor: &self.values }.run(&mut self.vectors);
        for node in &plan.nodes {
            let unknowns = &order[node.begin..node.begin + node.columns];
            for (v, &unknown) in self.vectors[node.vector..].iter().zip(unknowns) {
                rhs[unknown] = *v;
            }
        }
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
