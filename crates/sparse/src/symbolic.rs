//! Symbolic analysis: everything that depends on the connectivity alone.

use faer::sparse::SymbolicSparseColMatRef;
use faer::sparse::linalg::SupernodalThreshold;
use faer::sparse::linalg::cholesky::{
    CholeskySymbolicParams, SymbolicCholeskyRaw, SymmetricOrdering, factorize_symbolic_cholesky,
};
use faer::{Side, perm::PermRef};

use crate::graph::Graph;
use crate::ordering::nested_dissection;
use crate::plan::Plan;
use crate::tree::postordered;
use crate::{Pattern, SparseError};

/// Ordering, elimination tree and supernodes of a pattern; immutable, shared by its factors.
#[derive(Debug)]
pub struct Analysis {
    pattern: Pattern,
    order: Vec<usize>,
    pub(crate) plan: Plan,
}

impl Analysis {
    /// Analyses a pattern whose unknowns come in blocks of `block` consecutive numbers, one block
    /// per entry of `coordinates` (any unit; only proportions count).
    ///
    /// # Errors
    /// A pattern that breaks its promises or is empty, a block size that does not divide it, coordinates that
    /// are not finite, or `TooLarge`.
    pub fn new(
        pattern: Pattern,
        block: usize,
        coordinates: &[[f64; 3]],
    ) -> Result<Self, SparseError> {
        pattern.check()?;
        let n = pattern.n;
        if n == 0 {
            return Err(SparseError::Empty);
        }
        let points = coordinates.len();
        if block.checked_mul(points) != Some(n) || block == 0 {
            return Err(SparseError::BlockSize {
                unknowns: n,
                block,
                points,
            });
        }
        if let Some(point) = coordinates.iter().position(|x| x.iter().any(|x| !x.is_finite())) {
            return Err(SparseError::NonFinitePoint { point });
        }
        let graph = Graph::of_blocks(&pattern, block);
        let order: Vec<u32> = nested_dissection(&graph, coordinates)
            .into_iter()
            .flat_map(|node| (0..block as u32).map(move |k| node * block as u32 + k))
            .collect();
        // By unknowns, not by blocks: those of one block need not be coupled.
        let unknowns = Graph::of_blocks(&pattern, 1);
        let order: Vec<usize> =
            postordered(&unknowns, &order).into_iter().map(|k| k as usize).collect();
        let mut position = vec![0; n];
        for (k, &unknown) in order.iter().enumerate() {
            position[unknown] = k;
        }
        let symbolic = factorize_symbolic_cholesky(
            SymbolicSparseColMatRef::new_checked(n, n, &pattern.col_ptr, None, &pattern.row_idx),
            Side::Upper,
            SymmetricOrdering::Custom(PermRef::new_checked(&order, &position, n)),
            CholeskySymbolicParams {
                supernodal_flop_ratio_threshold: SupernodalThreshold::FORCE_SUPERNODAL,
                ..Default::default()
            },
        )
        .map_err(|_| SparseError::TooLarge { unknowns: n })?;
        let SymbolicCholeskyRaw::Supernodal(supernodes) = symbolic.raw() else {
            return Err(SparseError::TooLarge { unknowns: n });
        };
        let plan = Plan::new(&pattern, &position, supernodes)?;
        Ok(Self { pattern, order, plan })
    }

    /// Order of the matrix.
    pub fn n(&self) -> usize {
        self.pattern.n
    }

    /// Numbers stored for the factor.
    pub fn factor_entries(&self) -> usize {
        self.plan.factor_length
    }

    /// Multiplications and additions of one numeric factorisation.
    pub fn flops(&self) -> f64 {
        self.plan.flops
    }

    /// The pattern analysed.
    pub fn pattern(&self) -> &Pattern {
        &self.pattern
    }

    /// Elimination order: entry k is the unknown eliminated k-th.
    pub fn order(&self) -> &[usize] {
        &self.order
    }
}
