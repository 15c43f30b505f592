//! faer's own sequential supernodal LDLᵀ, with the ordering of an [`Analysis`].

use std::sync::Arc;

use faer::dyn_stack::{MemBuffer, MemStack};
use faer::perm::PermRef;
use faer::sparse::linalg::SupernodalThreshold;
use faer::sparse::linalg::cholesky::{
    CholeskySymbolicParams, LdltRef, SymbolicCholesky, SymmetricOrdering,
    factorize_symbolic_cholesky,
};
use faer::sparse::{SparseColMatRef, SymbolicSparseColMatRef};
use faer::{Conj, MatMut, Par, Side};
use pellicle_sparse::Analysis;

pub struct Reference {
    analysis: Arc<Analysis>,
    symbolic: SymbolicCholesky<usize>,
    values: Vec<f64>,
    memory: MemBuffer,
}

impl Reference {
    pub fn new(analysis: &Arc<Analysis>) -> Self {
        let pattern = analysis.pattern();
        let n = pattern.n;
        let order = analysis.order();
        let mut position = vec![0; n];
        (0..n).for_each(|k| position[order[k]] = k);
        let symbolic = factorize_symbolic_cholesky(
            SymbolicSparseColMatRef::new_checked(n, n, &pattern.col_ptr, None, &pattern.row_idx),
            Side::Upper,
            SymmetricOrdering::Custom(PermRef::new_checked(order, &position, n)),
            CholeskySymbolicParams {
                supernodal_flop_ratio_threshold: SupernodalThreshold::FORCE_SUPERNODAL,
                ..Default::default()
            },
        )
        .expect("the pattern is sound");
        let scratch = symbolic
            .factorize_numeric_ldlt_scratch::<f64>(Par::Seq, Default::default())
            .or(symbolic.solve_in_place_scratch::<f64>(1, Par::Seq));
        Self {
            values: vec![0.0; symbolic.len_val()],
            memory: MemBuffer::new(scratch),
            symbolic,
            analysis: Arc::clone(analysis),
        }
    }

    pub fn factorise(&mut self, values: &[f64]) {
        let pattern = self.analysis.pattern();
        let n = pattern.n;
        let structure =
            SymbolicSparseColMatRef::new_checked(n, n, &pattern.col_ptr, None, &pattern.row_idx);
        self.symbolic
            .factorize_numeric_ldlt(
                &mut self.values,
                SparseColMatRef::new(structure, values),
                Side::Upper,
                Default::default(),
                Par::Seq,
                MemStack::new(&mut self.memory),
                Default::default(),
            )
            .expect("the matrix is quasi-definite");
    }

    pub fn solve(&mut self, rhs: &mut [f64]) {
        let n = rhs.len();
        LdltRef::new(&self.symbolic, &self.values).solve_in_place_with_conj(
            Conj::No,
            MatMut::from_column_major_slice_mut(rhs, n, 1),
            Par::Seq,
            MemStack::new(&mut self.memory),
        );
    }
}
