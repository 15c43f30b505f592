//! Elimination within one front, on faer's dense kernels.
//!
//! Large fronts are cut in tiles by halving; every tile is computed by a sequential kernel, and
//! the cuts do not depend on the number of threads, hence neither do the results.

use faer::dyn_stack::MemStack;
use faer::linalg::cholesky::ldlt::factor::{LdltError, cholesky_in_place};
use faer::linalg::matmul::triangular::{BlockStructure, matmul as triangular_matmul};
use faer::linalg::matmul::matmul;
use faer::linalg::triangular_solve::solve_unit_lower_triangular_in_place;
use faer::prelude::{Reborrow, ReborrowMut};
use faer::{Accum, MatMut, MatRef, Par};
use std::mem::MaybeUninit;

use crate::plan::BLOCK;

/// Tiles have at most this many rows or columns.
const TILE: usize = 384;
/// A pivot this small beside the entry it came from is made of rounding alone.
const ROUNDING: f64 = 4.0 * f64::EPSILON;
/// Bytes for the pivots of one block, with room to align them.
const STACK: usize = 8 * BLOCK + 512;

/// Eliminates the columns of `panel` (height × columns) and subtracts the result from the lower
/// triangle of `update` (rows × rows), or overwrites it if `fresh`.
///
/// `original` gives the diagonal of the matrix for each column, against which a pivot is judged.
/// The error is the column whose pivot vanishes.
pub(crate) fn eliminate(
    mut panel: MatMut<'_, f64>,
    mut update: MatMut<'_, f64>,
    scratch: &mut [f64],
    fresh: bool,
    tiled: bool,
    original: impl Fn(usize) -> f64,
) -> Result<(), usize> {
    let (height, columns) = (panel.nrows(), panel.ncols());
    let rows = height - columns;
    for start in (0..columns).step_by(BLOCK) {
        let width = BLOCK.min(columns - start);
        let (left, right) = panel.rb_mut().split_at_col_mut(start + width);
        let current = left.submatrix_mut(start, start, height - start, width);
        let (mut top, mut below) = current.split_at_row_mut(width);
        pivot_block(top.rb_mut(), |j| original(start + j)).map_err(|j| start + j)?;
        let remaining = below.nrows();
        let mut scaled =
            MatMut::from_column_major_slice_mut(&mut scratch[..remaining * width], remaining, width);
        divide(top.rb(), below.rb_mut(), scaled.rb_mut(), tiled);
        let (below, scaled) = (below.rb(), scaled.rb());
        let trailing = remaining - rows;
        let (l_trailing, l_rows) = below.split_at_row(trailing);
        let (w_trailing, w_rows) = scaled.split_at_row(trailing);
        if trailing > 0 {
            let (_, right) = right.split_at_row_mut(start + width);
            let (square, rectangle) = right.split_at_row_mut(trailing);
            subtract_lower(square, l_trailing, w_trailing, Accum::Add, tiled);
            subtract(rectangle, l_rows, w_trailing, Accum::Add, tiled);
        }
        if rows > 0 {
            let accumulate = if fresh && start == 0 { Accum::Replace } else { Accum::Add };
            subtract_lower(update.rb_mut(), l_rows, w_rows, accumulate, tiled);
        }
    }
    Ok(())
}

/// LDLᵀ of a diagonal block, in its lower triangle. The error is the column of the first pivot
/// that is not finite, or no larger than the rounding of the entry it came from.
fn pivot_block(mut block: MatMut<'_, f64>, original: impl Fn(usize) -> f64) -> Result<(), usize> {
    let width = block.ncols();
    let mut memory = [MaybeUninit::<u8>::uninit(); STACK];
    let outcome = cholesky_in_place(
        block.rb_mut(),
        Default::default(),
        Par::Seq,
        MemStack::new(&mut memory),
        Default::default(),
    );
    let end = match outcome {
        Ok(_) => width,
        Err(LdltError::ZeroPivot { index }) => index,
    };
    let vanishes =
        |&j: &usize| !block[(j, j)].is_finite() || block[(j, j)].abs() <= ROUNDING * original(j).abs();
    match (0..end).find(vanishes) {
        Some(j) => Err(j),
        None if end < width => Err(end),
        None => Ok(()),
    }
}

/// `below` ← L and `scaled` ← L D, where L D = below · (unit lower part of `top`)⁻ᵀ.
fn divide(top: MatRef<'_, f64>, below: MatMut<'_, f64>, scaled: MatMut<'_, f64>, tiled: bool) {
    let rows = below.nrows();
    if tiled && rows > TILE {
        let half = half(rows);
        let (below_first, below_second) = below.split_at_row_mut(half);
        let (scaled_first, scaled_second) = scaled.split_at_row_mut(half);
        rayon::join(
            || divide(top, below_first, scaled_first, true),
            || divide(top, below_second, scaled_second, true),
        );
        return;
    }
    let (mut below, mut scaled) = (below, scaled);
    solve_unit_lower_triangular_in_place(top, below.rb_mut().transpose_mut(), Par::Seq);
    for j in 0..top.ncols() {
        let inverse = top[(j, j)].recip();
        let from = below.rb_mut().col_mut(j).try_as_col_major_mut();
        let to = scaled.rb_mut().col_mut(j).try_as_col_major_mut();
        if let (Some(from), Some(to)) = (from, to) {
            for (l, w) in from.as_slice_mut().iter_mut().zip(to.as_slice_mut()) {
                *w = *l;
                *l *= inverse;
            }
        }
    }
}

/// Lower triangle of `target` −= l wᵀ.
fn subtract_lower(
    target: MatMut<'_, f64>,
    l: MatRef<'_, f64>,
    w: MatRef<'_, f64>,
    accumulate: Accum,
    tiled: bool,
) {
    let n = target.ncols();
    if tiled && n > TILE {
        let half = half(n);
        let (first, _, corner, second) = target.split_at_mut(half, half);
        let (l_first, l_second) = l.split_at_row(half);
        let (w_first, w_second) = w.split_at_row(half);
        rayon::join(
            || subtract(corner, l_second, w_first, accumulate, true),
            || {
                rayon::join(
                    || subtract_lower(first, l_first, w_first, accumulate, true),
                    || subtract_lower(second, l_second, w_second, accumulate, true),
                )
            },
        );
        return;
    }
    triangular_matmul(
        target,
        BlockStructure::TriangularLower,
        accumulate,
        l,
        BlockStructure::Rectangular,
        w.transpose(),
        BlockStructure::Rectangular,
        -1.0,
        Par::Seq,
    );
}

/// `target` −= l wᵀ.
fn subtract(
    target: MatMut<'_, f64>,
    l: MatRef<'_, f64>,
    w: MatRef<'_, f64>,
    accumulate: Accum,
    tiled: bool,
) {
    let (rows, columns) = (target.nrows(), target.ncols());
    if tiled && rows.max(columns) > TILE {
        if rows >= columns {
            let half = half(rows);
            let (first, second) = target.split_at_row_mut(half);
            let (l_first, l_second) = l.split_at_row(half);
            rayon::join(
                || subtract(first, l_first, w, accumulate, true),
                || subtract(second, l_second, w, accumulate, true),
            );
        } else {
            let half = half(columns);
            let (first, second) = target.split_at_col_mut(half);
            let (w_first, w_second) = w.split_at_row(half);
            rayon::join(
                || subtract(first, l, w_first, accumulate, true),
                || subtract(second, l, w_second, accumulate, true),
            );
        }
        return;
    }
    matmul(target, accumulate, l, w.transpose(), -1.0, Par::Seq);
}

/// About half, a multiple of eight so that kernels keep whole vectors.
fn half(n: usize) -> usize {
    (n / 2).next_multiple_of(8)
}

#[cfg(test)]
mod tests {
    use super::*;
    use faer::linalg::cholesky::ldlt::factor::cholesky_in_place_scratch;

    #[test]
    fn pivots_of_a_block_fit_their_memory() {
        let needed = cholesky_in_place_scratch::<f64>(BLOCK, Par::Seq, Default::default());
        assert!(needed.unaligned_bytes_required() <= STACK);
    }
}
