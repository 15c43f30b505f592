//! Where every entry of the coupled matrix lives, found once per connectivity.
//!
//! Four unknowns per vertex, [v_x, v_y, v_z, λ], in one block: the tension follows its own velocity, which keeps the
//! factorisation accurate when the lipids are nearly incompressible. Velocities couple over two rings (JᵀJ), the
//! tension over one. Values are stored as the upper triangle by columns, so the columns of one vertex are one
//! contiguous piece: assembly gathers piece by piece, in parallel, without atomics and in a fixed order.

use pellicle_sparse::Pattern;
use pellicle_surface::Topology;
use pellicle_surface::geometry::Stencils;
use rayon::prelude::*;

/// No such entry.
pub const ABSENT: u32 = u32::MAX;

/// Vertices whose columns are multiplied by one task, at least.
const SMALLEST_PART: usize = 512;
/// Tasks of a product; fixed, so that sums have one order for any number of threads.
const PARTS: usize = 4;

/// Scatter indices of the coupled matrix.
#[derive(Debug)]
pub struct BlockPattern {
    /// Where the values of each vertex's four columns start; one more entry than vertices.
    pub piece_start: Vec<usize>,
    /// For each block (row vertex ≤ column vertex): index of its first entry in each of the four columns,
    /// counted from the start of the column vertex's piece.
    pub block_start: Vec<[u32; 4]>,
    /// Row vertex of each block.
    pub block_row: Vec<u32>,
    /// Where the blocks of each column vertex start; one more entry than vertices. The diagonal comes last.
    pub column_blocks: Vec<u32>,
    /// Block of corners (row, column) of each triangle, [`ABSENT`] below the diagonal.
    pub triangle_blocks: Vec<[[u32; 3]; 3]>,
    /// Where the products J_aᵀJ_j of each column vertex j start in `gram`.
    pub gram_start: Vec<u32>,
    /// (stencil place of a, stencil place of j, block) of each product.
    pub gram: Vec<[u32; 3]>,
}

impl BlockPattern {
    /// Lay out the matrix of a connectivity.
    pub fn new(topology: &Topology, stencils: &Stencils) -> Self {
        let n = topology.n_vertices;
        let mut block_row: Vec<u32> = Vec::new();
        let mut one_ring: Vec<bool> = Vec::new();
        let mut column_blocks = vec![0u32];
        let mut rows: Vec<u32> = Vec::new();
        for j in 0..n {
            rows.clear();
            rows.push(j as u32);
            let around = topology.neighbours.of(j);
            rows.extend(around.iter().filter(|&&i| (i as usize) < j));
            for &i in around {
                rows.extend(topology.neighbours.of(i as usize).iter().filter(|&&k| (k as usize) < j));
            }
            rows.sort_unstable();
            rows.dedup();
            for &i in &rows {
                block_row.push(i);
                one_ring.push(i as usize == j || around.binary_search(&i).is_ok());
            }
            column_blocks.push(block_row.len() as u32);
        }
        let mut block_start = vec![[ABSENT; 4]; block_row.len()];
        let mut piece_start = Vec::with_capacity(n + 1);
        piece_start.push(0);
        let mut entries = 0;
        for j in 0..n {
            let mut place = 0;
            for c in 0..4 {
                for b in column_blocks[j] as usize..column_blocks[j + 1] as usize {
                    let height = match (block_row[b] as usize == j, one_ring[b]) {
                        (true, _) => c as u32 + 1,
                        (false, true) => 4,
                        (false, false) if c < 3 => 3,
                        _ => continue,
                    };
                    block_start[b][c] = place;
                    place += height;
                }
            }
            entries += place as usize;
            piece_start.push(entries);
        }
        let block_of = |i: u32, j: u32| -> u32 {
            let range = column_blocks[j as usize] as usize..column_blocks[j as usize + 1] as usize;
            match block_row[range.clone()].binary_search(&i) {
                Ok(offset) if i <= j => (range.start + offset) as u32,
                _ => ABSENT,
            }
        };
        let triangle_blocks = topology
            .triangles
            .iter()
            .map(|corners| corners.map(|i| corners.map(|j| if i <= j { block_of(i, j) } else { ABSENT })))
            .collect();
        let mut gram_start = vec![0u32];
        let mut gram = Vec::new();
        for j in 0..n as u32 {
            for &owner in &stencils.members[stencils.range(j as usize)] {
                let range = stencils.range(owner as usize);
                let Some(place_j) = range.clone().find(|&p| stencils.members[p] == j) else {
                    continue;
                };
                for place_a in range {
                    let a = stencils.members[place_a];
                    if a <= j {
                        gram.push([place_a as u32, place_j as u32, block_of(a, j)]);
                    }
                }
            }
            gram_start.push(gram.len() as u32);
        }
        Self {
            piece_start,
            block_start,
            block_row,
            column_blocks,
            triangle_blocks,
            gram_start,
            gram,
        }
    }

    /// Number of vertices.
    pub fn n_vertices(&self) -> usize {
        self.piece_start.len() - 1
    }

    /// Number of stored values.
    pub fn entries(&self) -> usize {
        self.piece_start.last().copied().unwrap_or(0)
    }

    /// Range of the values of a vertex's columns.
    pub fn piece(&self, vertex: usize) -> std::ops::Range<usize> {
        self.piece_start[vertex]..self.piece_start[vertex + 1]
    }

    /// Sparsity of the upper triangle, unknown by unknown.
    pub fn pattern(&self) -> Pattern {
        let n = self.n_vertices();
        let mut col_ptr = Vec::with_capacity(4 * n + 1);
        let mut row_idx = Vec::with_capacity(self.entries());
        col_ptr.push(0);
        for j in 0..n {
            for c in 0..4 {
                for b in self.column_blocks[j] as usize..self.column_blocks[j + 1] as usize {
                    let i = self.block_row[b] as usize;
                    let height = match (i == j, self.couples_tension(b)) {
                        (true, _) => c + 1,
                        (false, true) => 4,
                        (false, false) if c < 3 => 3,
                        _ => continue,
                    };
                    row_idx.extend((0..height).map(|r| 4 * i + r));
                }
                col_ptr.push(row_idx.len());
            }
        }
        Pattern { n: 4 * n, col_ptr, row_idx }
    }

    /// Whether a block has rows and columns for the tension: its vertices are neighbours, or one.
    fn couples_tension(&self, block: usize) -> bool {
        self.block_start[block][3] != ABSENT
    }

    /// Diagonal of the matrix.
    pub fn diagonal(&self, values: &[f64], out: &mut Vec<f64>) {
        out.clear();
        for j in 0..self.n_vertices() {
            let start = &self.block_start[self.column_blocks[j + 1] as usize - 1];
            let piece = &values[self.piece(j)];
            out.extend((0..4).map(|c| piece[start[c] as usize + c]));
        }
    }

    /// y = A x. The order of summation does not depend on the number of threads.
    ///
    /// # Shapes
    /// `x`, `y`: four numbers per vertex; `scratch` grows to what is needed.
    pub fn multiply(&self, values: &[f64], x: &[f64], y: &mut [f64], scratch: &mut Vec<f64>) {
        let n = self.n_vertices();
        let parts = (n / SMALLEST_PART).clamp(1, PARTS);
        let border = |k: usize| n * k / parts;
        // Rows of a part's columns end where its columns do; the last part writes to y itself.
        let sizes: Vec<usize> = (1..parts).map(|k| 4 * border(k)).collect();
        scratch.resize(sizes.iter().sum(), 0.0);
        let mut jobs = Vec::with_capacity(parts);
        let mut rest = scratch.as_mut_slice();
        for (k, size) in sizes.iter().enumerate() {
            let (own, tail) = rest.split_at_mut(*size);
            jobs.push((border(k)..border(k + 1), own));
            rest = tail;
        }
        jobs.push((border(parts - 1)..n, &mut *y));
        jobs.into_par_iter().for_each(|(vertices, out)| {
            out.fill(0.0);
            for j in vertices {
                self.multiply_columns(j, &values[self.piece(j)], x, out);
            }
        });
        let mut rest = scratch.as_slice();
        for size in sizes {
            let (own, tail) = rest.split_at(size);
            for (y, part) in y.iter_mut().zip(own) {
                *y += part;
            }
            rest = tail;
        }
    }

    fn multiply_columns(&self, j: usize, piece: &[f64], x: &[f64], y: &mut [f64]) {
        let blocks = self.column_blocks[j] as usize..self.column_blocks[j + 1] as usize;
        let own = [x[4 * j], x[4 * j + 1], x[4 * j + 2], x[4 * j + 3]];
        let mut sums = [0.0; 4];
        for b in blocks.start..blocks.end - 1 {
            let i = 4 * self.block_row[b] as usize;
            let start = &self.block_start[b];
            if self.couples_tension(b) {
                add_block::<4>(piece, start, &x[i..i + 4], &own, &mut sums, &mut y[i..i + 4]);
            } else {
                add_block::<3>(piece, start, &x[i..i + 3], &own, &mut sums, &mut y[i..i + 3]);
            }
        }
        let start = &self.block_start[blocks.end - 1];
        for c in 0..4 {
            for r in 0..=c {
                let value = piece[start[c] as usize + r];
                sums[c] += value * own[r];
                if r < c {
                    sums[r] += value * own[c];
                }
            }
        }
        for (y, sum) in y[4 * j..4 * j + 4].iter_mut().zip(sums) {
            *y += sum;
        }
    }
}

/// Product of a block above the diagonal, N × N, and of its transpose.
#[inline]
fn add_block<const N: usize>(
    piece: &[f64],
    start: &[u32; 4],
    x: &[f64],
    own: &[f64; 4],
    sums: &mut [f64; 4],
    y: &mut [f64],
) {
    let mut out = [0.0; N];
    for c in 0..N {
        let column = &piece[start[c] as usize..start[c] as usize + N];
        for r in 0..N {
            sums[c] += column[r] * x[r];
            out[r] += column[r] * own[c];
        }
    }
    for (y, o) in y.iter_mut().zip(out) {
        *y += o;
    }
}
