//! Patterns and values that do not come from a mesh.

mod common;

use std::sync::Arc;

use common::{Builder, icosphere, laplacian};
use pellicle_sparse::{Analysis, Factor, Pattern, SparseError, write_matrix_market};
use proptest::prelude::*;

fn diagonal(n: usize) -> Pattern {
    Pattern { n, col_ptr: (0..=n).collect(), row_idx: (0..n).collect() }
}

/// Residual of the refined solution, for points on a line.
fn residual(pattern: &Pattern, values: &[f64], block: usize) -> f64 {
    let points: Vec<_> = (0..pattern.n / block).map(|k| [k as f64, 0.0, 0.0]).collect();
    let analysis = Arc::new(Analysis::new(pattern.clone(), block, &points).unwrap());
    let mut factor = Factor::new(&analysis);
    factor.factorise(values).unwrap();
    let mut x: Vec<f64> = (0..pattern.n).map(|k| 1.0 + (k % 7) as f64).collect();
    factor.solve_refined(values, &mut x)
}

proptest! {
    /// Random couplings, any block size, signs of the diagonal at random; every row is strictly
    /// dominated by its diagonal, which keeps all pivots away from zero in any order. Largest of 2000 residuals: 2.6e-15.
    #[test]
    fn random_patterns_are_solved(
        blocks in 1_usize..60,
        block in 1_usize..5,
        edges in prop::collection::vec((0_usize..10_000, 0_usize..10_000, -1.0..1.0_f64), 0..300),
        negative in prop::collection::vec(any::<bool>(), 300),
    ) {
        let n = blocks * block;
        let mut a = Builder::new(n);
        let mut weight = vec![1.0; n];
        for &(i, j, value) in &edges {
            let (i, j) = (i % n, j % n);
            if i != j {
                a.add(i, j, value);
                weight[i] += value.abs();
                weight[j] += value.abs();
            }
        }
        for i in 0..n {
            a.add(i, i, if negative[i] { -weight[i] } else { weight[i] });
        }
        let (pattern, values) = a.finish();
        prop_assert!(residual(&pattern, &values, block) <= 1e-14);
    }

    /// Anything at all either is analysed or refused.
    #[test]
    fn arbitrary_patterns_never_panic(
        n in 0_usize..6,
        col_ptr in prop::collection::vec(0_usize..8, 0..8),
        row_idx in prop::collection::vec(0_usize..8, 0..10),
        block in 0_usize..4,
        points in 0_usize..6,
    ) {
        let pattern = Pattern { n, col_ptr, row_idx };
        let _ = Analysis::new(pattern, block, &vec![[0.0; 3]; points]);
    }
}

#[test]
fn degenerate_shapes_are_solved() {
    assert_eq!(residual(&diagonal(1), &[-2.0], 1), 0.0);
    assert!(residual(&diagonal(1000), &[3.0; 1000], 4) <= 1e-15);
    // A hub coupled to all, a chain, and a full matrix.
    let n = 600;
    let shapes: [fn(usize, usize) -> bool; 3] =
        [|i, _| i == 0, |i, j| i + 1 == j, |_, _| true];
    for couples in shapes {
        let mut a = Builder::new(n);
        for j in 0..n {
            a.add(j, j, n as f64);
            (0..j).filter(|&i| couples(i, j)).for_each(|i| a.add(i, j, 0.5));
        }
        let (pattern, values) = a.finish();
        assert!(residual(&pattern, &values, 1) <= 1e-14);
    }
}

#[test]
fn coincident_points_are_no_obstacle() {
    let mesh = icosphere(2);
    let (pattern, values) = laplacian(&mesh, 2, 0.5);
    let analysis = Analysis::new(pattern, 2, &vec![[1.0; 3]; mesh.points.len()]).unwrap();
    let mut factor = Factor::new(&Arc::new(analysis));
    factor.factorise(&values).unwrap();
    let mut x = vec![1.0; 2 * mesh.points.len()];
    assert!(factor.solve_refined(&values, &mut x) <= 1e-14);
}

#[test]
fn bad_values_are_refused_and_leave_the_factor_usable() {
    let analysis = Arc::new(Analysis::new(diagonal(3), 1, &[[0.0; 3]; 3]).unwrap());
    let mut factor = Factor::new(&analysis);
    assert_eq!(
        factor.factorise(&[1.0; 2]),
        Err(SparseError::ValueCount { found: 2, expected: 3 })
    );
    assert_eq!(
        factor.factorise(&[1.0, f64::NAN, 1.0]),
        Err(SparseError::NonFinite { row: 1, column: 1 })
    );
    assert_eq!(
        factor.factorise(&[1.0, 1.0, 0.0]),
        Err(SparseError::SingularPivot { unknown: 2 })
    );
    factor.factorise(&[1.0, 2.0, -4.0]).unwrap();
    let mut x = [1.0, 1.0, 1.0];
    factor.solve_in_place(&mut x);
    assert_eq!(x, [1.0, 0.5, -0.25]);
}

#[test]
fn singular_and_overflowing_matrices_are_refused() {
    // [[1, 1], [1, 1]]: the second pivot is zero; [[1e-300, 1e300], …]: it is infinite.
    let pattern = Pattern { n: 2, col_ptr: vec![0, 1, 3], row_idx: vec![0, 0, 1] };
    let analysis = Arc::new(Analysis::new(pattern, 2, &[[0.0; 3]]).unwrap());
    let mut factor = Factor::new(&analysis);
    for values in [[1.0, 1.0, 1.0], [0.1, 0.3, 0.3 * 0.3 / 0.1], [1e-300, 1e300, 1.0]] {
        let outcome = factor.factorise(&values);
        assert!(matches!(outcome, Err(SparseError::SingularPivot { .. })), "{values:?}");
    }
}

#[test]
fn bad_patterns_are_refused() {
    let analyse = |n, col_ptr: &[usize], row_idx: &[usize]| {
        let pattern =
            Pattern { n, col_ptr: col_ptr.to_vec(), row_idx: row_idx.to_vec() };
        Analysis::new(pattern, 1, &vec![[0.0; 3]; n]).map(|_| ())
    };
    assert!(matches!(analyse(2, &[0, 1], &[0]), Err(SparseError::ColumnPointers { .. })));
    assert!(matches!(analyse(2, &[0, 2, 1], &[0]), Err(SparseError::ColumnPointers { .. })));
    assert!(matches!(analyse(2, &[0, 1, 2], &[0, 0]), Err(SparseError::MissingDiagonal { .. })));
    assert!(matches!(analyse(2, &[0, 2, 3], &[0, 1, 1]), Err(SparseError::RowOutOfPlace { .. })));
    assert_eq!(analyse(0, &[0], &[]), Err(SparseError::Empty));
    let refused = Analysis::new(diagonal(2), 1, &[[0.0, f64::NAN, 0.0]; 2]).map(|_| ());
    assert_eq!(refused, Err(SparseError::NonFinitePoint { point: 0 }));
    let refused = Analysis::new(diagonal(3), 2, &[[0.0; 3]; 2]).map(|_| ());
    assert!(matches!(refused, Err(SparseError::BlockSize { .. })));
}

#[test]
fn matrix_market_text_holds_the_lower_triangle() {
    let pattern = Pattern { n: 2, col_ptr: vec![0, 1, 3], row_idx: vec![0, 0, 1] };
    let path = std::env::temp_dir().join(format!("matrix-{}.mtx", std::process::id()));
    write_matrix_market(&path, &pattern, &[1.0, 0.1, -2.5]).unwrap();
    let text = std::fs::read_to_string(&path).unwrap();
    std::fs::remove_file(&path).unwrap();
    assert_eq!(
        text,
        "%%MatrixMarket matrix coordinate real symmetric\n2 2 3\n1 1 1e0\n2 1 1e-1\n2 2 -2.5e0\n"
    );
    assert!(write_matrix_market(&path, &pattern, &[1.0]).is_err());
}
