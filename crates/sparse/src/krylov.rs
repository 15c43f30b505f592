//! Generalised minimal residuals with a preconditioner on the right.
//!
//! Meant for matrices close to one that has been factorised: the old factor as preconditioner
//! needs a handful of iterations after a change of a per cent. The preconditioned basis is kept
//! (the flexible variant), which costs one more vector per iteration and saves the last
//! application of the preconditioner. No restarts: iterations are few or the factor is too old.
//!
//! Sources: Saad & Schultz, SIAM J. Sci. Stat. Comput. 7 (1986) 856; Saad, SIAM J. Sci. Comput.
//! 14 (1993) 461.

/// Why [`gmres`] stopped, and where.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct GmresOutcome {
    /// Number of applications of the preconditioner.
    pub iterations: usize,
    /// ‖b − A x‖₂ / ‖b‖₂ of the returned x, computed afresh, not from the recurrence.
    pub relative_residual: f64,
    /// Whether `relative_residual` is at most the tolerance asked for (twice, to allow for
    /// rounding between the recurrence and the true residual).
    pub converged: bool,
}

/// Vectors of [`gmres`], kept between calls so that repeated solves do not allocate.
#[derive(Debug, Clone, Default)]
pub struct GmresWorkspace {
    basis: Vec<Vec<f64>>,
    directions: Vec<Vec<f64>>,
    hessenberg: Vec<Vec<f64>>,
    rotations: Vec<(f64, f64)>,
    reduced_rhs: Vec<f64>,
}

impl GmresWorkspace {
    /// An empty workspace; it grows with the first solve.
    pub fn new() -> Self {
        Self::default()
    }

    fn vector(list: &mut Vec<Vec<f64>>, index: usize, length: usize) -> &mut Vec<f64> {
        if list.len() <= index {
            list.resize_with(index + 1, Vec::new);
        }
        list[index].resize(length, 0.0);
        &mut list[index]
    }
}

/// Solves A x = b from the start value in `x`.
///
/// `apply(v, w)` sets w = A v, `precondition(v)` replaces v by M⁻¹ v. Stops when the residual is
/// at most `tolerance` ‖b‖₂, after `max_iterations`, or when the Krylov space is exhausted.
/// If a vector stops being finite the last finite iterate is returned, not converged.
///
/// # Panics
/// If `rhs` and `x` differ in length.
pub fn gmres(
    apply: impl FnMut(&[f64], &mut [f64]),
    precondition: impl FnMut(&mut [f64]),
    rhs: &[f64],
    x: &mut [f64],
    tolerance: f64,
    max_iterations: usize,
    workspace: &mut GmresWorkspace,
) -> GmresOutcome {
    let promising = |iterations, _| iterations < max_iterations;
    gmres_while(apply, precondition, rhs, x, tolerance, promising, workspace)
}

/// As [`gmres`], as long as `promising` of the number of iterations done and the part of the
/// first residual that is left.
///
/// # Panics
/// If `rhs` and `x` differ in length.
pub fn gmres_while(
    mut apply: impl FnMut(&[f64], &mut [f64]),
    mut precondition: impl FnMut(&mut [f64]),
    rhs: &[f64],
    x: &mut [f64],
    tolerance: f64,
    promising: impl Fn(usize, f64) -> bool,
    workspace: &mut GmresWorkspace,
) -> GmresOutcome {
    let n = rhs.len();
    assert_eq!(x.len(), n, "x must have one number per unknown");
    let scale = norm(rhs);
    if scale == 0.0 {
        x.fill(0.0);
        return GmresOutcome {
            iterations: 0,
            relative_residual: 0.0,
            converged: true,
        };
    }
    let mut beta = residual(&mut apply, rhs, x, GmresWorkspace::vector(&mut workspace.basis, 0, n));
    let target = tolerance * scale;
    let mut iterations = 0;
    if beta > target && beta.is_finite() {
        scale_by(&mut workspace.basis[0], 1.0 / beta);
        workspace.rotations.clear();
        workspace.reduced_rhs.clear();
        workspace.reduced_rhs.push(beta);
        let mut left = 1.0;
        while promising(iterations, left) {
            let k = iterations;
            let norm_before = extend_basis(&mut apply, &mut precondition, k, n, workspace);
            if !norm_before.is_finite() {
                break;
            }
            iterations += 1;
            let next = rotate(k, workspace);
            left = next.abs() / beta;
            // The new direction vanished: the Krylov space holds the solution.
            let exhausted = workspace.hessenberg[k][k + 1] <= f64::EPSILON * norm_before;
            if next.abs() <= target || exhausted {
                break;
            }
        }
        add_solution(x, iterations, workspace);
        beta = residual(&mut apply, rhs, x, GmresWorkspace::vector(&mut workspace.basis, 0, n));
    }
    GmresOutcome {
        iterations,
        relative_residual: beta / scale,
        converged: beta <= 2.0 * target,
    }
}

/// r = b − A x; returns ‖r‖₂.
fn residual(apply: &mut impl FnMut(&[f64], &mut [f64]), rhs: &[f64], x: &[f64], r: &mut [f64]) -> f64 {
    apply(x, r);
    for (r, b) in r.iter_mut().zip(rhs) {
        *r = b - *r;
    }
    norm(r)
}

/// One Arnoldi step: z = M⁻¹ v_k, w = A z made orthogonal to v_0 … v_k (Gram–Schmidt twice, which
/// is enough for orthogonality to rounding: Giraud et al., Comput. Math. Appl. 50 (2005) 1069).
/// Returns ‖w‖₂ before; the length of the remainder is the last entry of column k.
fn extend_basis(
    apply: &mut impl FnMut(&[f64], &mut [f64]),
    precondition: &mut impl FnMut(&mut [f64]),
    k: usize,
    n: usize,
    workspace: &mut GmresWorkspace,
) -> f64 {
    GmresWorkspace::vector(&mut workspace.basis, k + 1, n);
    GmresWorkspace::vector(&mut workspace.hessenberg, k, k + 2).fill(0.0);
    let direction = GmresWorkspace::vector(&mut workspace.directions, k, n);
    direction.copy_from_slice(&workspace.basis[k]);
    precondition(direction);
    let (old, new) = workspace.basis.split_at_mut(k + 1);
    let w = &mut new[0];
    apply(direction, w);
    let before = norm(w);
    let column = &mut workspace.hessenberg[k];
    for _ in 0..2 {
        for (v, h) in old.iter().zip(column.iter_mut()) {
            let projection = dot(v, w);
            *h += projection;
            for (w, v) in w.iter_mut().zip(v) {
                *w -= projection * v;
            }
        }
    }
    let length = norm(w);
    column[k + 1] = length;
    if length > 0.0 {
        scale_by(w, 1.0 / length);
    }
    before
}

/// Applies the earlier Givens rotations to column k and adds the one that clears its last entry;
/// the last entry itself is kept for the caller. Returns the new residual, signed.
fn rotate(k: usize, workspace: &mut GmresWorkspace) -> f64 {
    let column = &mut workspace.hessenberg[k];
    for (j, &(c, s)) in workspace.rotations.iter().enumerate() {
        let (a, b) = (column[j], column[j + 1]);
        column[j] = c * a + s * b;
        column[j + 1] = c * b - s * a;
    }
    let (a, b) = (column[k], column[k + 1]);
    let length = a.hypot(b);
    let (c, s) = if length > 0.0 { (a / length, b / length) } else { (1.0, 0.0) };
    column[k] = length;
    workspace.rotations.push((c, s));
    let g = workspace.reduced_rhs[k];
    workspace.reduced_rhs[k] = c * g;
    workspace.reduced_rhs.push(-s * g);
    -s * g
}

/// x += Z y with R y = g, R the triangle made by the rotations.
fn add_solution(x: &mut [f64], iterations: usize, workspace: &mut GmresWorkspace) {
    let y = &mut workspace.reduced_rhs;
    for i in (0..iterations).rev() {
        let mut sum = y[i];
        for (j, column) in workspace.hessenberg[..iterations].iter().enumerate().skip(i + 1) {
            sum -= column[i] * y[j];
        }
        let diagonal = workspace.hessenberg[i][i];
        y[i] = if diagonal > 0.0 { sum / diagonal } else { 0.0 };
    }
    for (direction, &factor) in workspace.directions.iter().zip(y[..iterations].iter()) {
        for (x, z) in x.iter_mut().zip(direction) {
            *x += factor * z;
        }
    }
}

fn scale_by(v: &mut [f64], factor: f64) {
    v.iter_mut().for_each(|v| *v *= factor);
}

/// Sum of products in four fixed lanes, for speed; the order does not depend on the data.
fn dot(a: &[f64], b: &[f64]) -> f64 {
    let mut lanes = [0.0; 4];
    let (a4, a_rest) = a.as_chunks::<4>();
    let (b4, b_rest) = b.as_chunks::<4>();
    for (a, b) in a4.iter().zip(b4) {
        for i in 0..4 {
            lanes[i] += a[i] * b[i];
        }
    }
    let rest: f64 = a_rest.iter().zip(b_rest).map(|(a, b)| a * b).sum();
    (lanes[0] + lanes[1]) + (lanes[2] + lanes[3]) + rest
}

pub(crate) fn norm(v: &[f64]) -> f64 {
    dot(v, v).sqrt()
}
