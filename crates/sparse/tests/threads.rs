//! The number of threads must not change a single bit.

mod common;

use std::sync::Arc;

use common::{icosphere, random_vector, step_matrix, tube};
use pellicle_sparse::{Analysis, Factor};

fn solution_bits(threads: usize, mesh: &common::Mesh, repeat: usize) -> Vec<u64> {
    let (pattern, values) = step_matrix(mesh, 1e5, 1e-3, 7);
    let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
    pool.install(|| {
        let analysis = Arc::new(Analysis::new(pattern, 4, &mesh.points).unwrap());
        let mut factor = Factor::new(&analysis);
        let mut bits = Vec::new();
        for k in 0..repeat {
            factor.factorise(&values).unwrap();
            let mut x = random_vector(analysis.n(), 5);
            if k % 2 == 0 {
                factor.solve_in_place(&mut x);
            } else {
                factor.solve_refined(&values, &mut x);
            }
            bits.extend(x.iter().map(|x| x.to_bits()));
        }
        bits
    })
}

/// Large enough (2,562 vertices) for tasks, for tiles in the top fronts and for several blocks.
#[test]
fn solutions_are_the_same_to_the_last_bit() {
    for mesh in [icosphere(4), tube(40, 30, true)] {
        let single = solution_bits(1, &mesh, 2);
        for threads in [2, 3] {
            assert!(single == solution_bits(threads, &mesh, 2), "{threads} threads");
        }
    }
}

#[test]
fn the_first_bad_pivot_is_named_whatever_the_threads() {
    let mesh = icosphere(3);
    let (pattern, mut values) = step_matrix(&mesh, 1e5, 1e-3, 7);
    // Rows and columns of zeros at many places.
    let dead: Vec<bool> = (0..pattern.n).map(|k| k % 97 == 5).collect();
    for column in 0..pattern.n {
        for entry in pattern.col_ptr[column]..pattern.col_ptr[column + 1] {
            if dead[column] || dead[pattern.row_idx[entry]] {
                values[entry] = 0.0;
            }
        }
    }
    let analysis = Arc::new(Analysis::new(pattern, 4, &mesh.points).unwrap());
    let first = *analysis.order().iter().find(|&&unknown| dead[unknown]).unwrap();
    for threads in [1, 2] {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
        let outcome = pool.install(|| Factor::new(&analysis).factorise(&values));
        assert_eq!(
            outcome,
            Err(pellicle_sparse::SparseError::SingularPivot { unknown: first })
        );
    }
}
