//! Direct solution of sparse symmetric quasi-definite systems on surface meshes.
//!
//! A matrix [[K, Bᵀ], [B, −C]] with K and C positive definite has a factorisation L D Lᵀ in every
//! order of elimination, without pivoting (Vanderbei, SIAM J. Optim. 5 (1995) 100). That makes
//! the symbolic work a matter of connectivity alone: [`Analysis`] is made once per mesh topology,
//! [`Factor`] is refilled every step.
#![deny(missing_docs)]

mod cover;
mod dense;
mod error;
mod factor;
mod graph;
mod krylov;
mod market;
mod numeric;
mod ordering;
mod pattern;
mod plan;
mod substitution;
mod symbolic;
mod tree;

pub use error::SparseError;
pub use factor::Factor;
pub use krylov::{GmresOutcome, GmresWorkspace, gmres, gmres_while};
pub use market::write_matrix_market;
pub use pattern::{Pattern, symmetric_multiply};
pub use symbolic::Analysis;
