//! Solutions of random quasi-definite systems.

mod common;

use std::sync::Arc;

use common::{icosphere, laplacian, membrane_matrix, random_vector, step_matrix};
use pellicle_sparse::{Analysis, Factor, Pattern};

fn dense(pattern: &Pattern, values: &[f64]) -> nalgebra::DMatrix<f64> {
    let mut a = nalgebra::DMatrix::zeros(pattern.n, pattern.n);
    for column in 0..pattern.n {
        for entry in pattern.col_ptr[column]..pattern.col_ptr[column + 1] {
            a[(pattern.row_idx[entry], column)] = values[entry];
            a[(column, pattern.row_idx[entry])] = values[entry];
        }
    }
    a
}

/// Residual after one refinement: 1e-13 leaves two digits above the 4e-16 … 2e-15 that the
/// method reaches on such matrices (common practice, no source).
#[test]
fn residual_is_small_at_every_compressibility() {
    let mesh = icosphere(3);
    for compressibility in [1e-2, 1e-4, 1e-6, 1e-8, 1e-10, 1e-12] {
        let (pattern, values) = membrane_matrix(&mesh, compressibility, 1);
        let analysis = Arc::new(Analysis::new(pattern, 4, &mesh.points).unwrap());
        let mut factor = Factor::new(&analysis);
        factor.factorise(&values).unwrap();
        let mut x = random_vector(analysis.n(), 2);
        let residual = factor.solve_refined(&values, &mut x);
        assert!(residual <= 1e-13, "{compressibility}: {residual}");
    }
}

/// The range of stiffness and time step of the solver; the tolerance is what a step needs
/// (measured: at most 8e-15).
#[test]
fn residual_is_small_for_every_modulus_and_step() {
    let mesh = icosphere(3);
    let (pattern, _) = step_matrix(&mesh, 1.0, 1.0, 8);
    let analysis = Arc::new(Analysis::new(pattern, 4, &mesh.points).unwrap());
    let mut factor = Factor::new(&analysis);
    for modulus in [1e3, 1e5, 1e7, 1e10] {
        for step in [1e-5, 1e-3, 0.1, 10.0] {
            let (_, values) = step_matrix(&mesh, modulus, step, 8);
            factor.factorise(&values).unwrap();
            let mut x = random_vector(analysis.n(), 9);
            let residual = factor.solve_refined(&values, &mut x);
            assert!(residual <= 1e-12, "{modulus} {step}: {residual}");
        }
    }
}

/// Against dense LU; the tolerance is rounding times the condition number (≈ 1e4 here) times 10.
#[test]
fn agrees_with_a_dense_solution() {
    let mesh = icosphere(1);
    for block in [1, 2, 4] {
        let (pattern, values) = match block {
            4 => membrane_matrix(&mesh, 1e-3, 3),
            _ => laplacian(&mesh, block, 0.3),
        };
        let a = dense(&pattern, &values);
        let b = random_vector(pattern.n, 4);
        let expected = a.lu().solve(&nalgebra::DVector::from_vec(b.clone())).unwrap();
        let analysis = Arc::new(Analysis::new(pattern, block, &mesh.points).unwrap());
        let mut factor = Factor::new(&analysis);
        factor.factorise(&values).unwrap();
        let mut x = b;
        factor.solve_in_place(&mut x);
        let error = (nalgebra::DVector::from_vec(x) - &expected).norm() / expected.norm();
        assert!(error < 2e-11, "{block}: {error}");
    }
}
