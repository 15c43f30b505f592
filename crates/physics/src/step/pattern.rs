//! Where every entry of the coupled matrix lives, found once per connectivity.
//!
//! Four unknowns per vertex, [v_x, v_y, v_z, λ], in one block: the tension follows its own velocity, which keeps the
//! factorisation accurate when the lipids are nearly incompressible. Velocities couple over two rings (JᵀJ), the
//! tension over one. Values are stored as the upper triangle by columns, so the columns of one vertex are one
//! contiguous piece: assembly gathers piece by piece, in parallel, without atomics and in a fixed order.

use pellicle_sparse::Pattern;
use pellicle_surface::Topology;
use pellicle_surface::geometry::Stencils;

/// No such entry.
pub const ABSENT: u32 = u32::MAX;

/// Scatter indices of the coupled matrix.
#[derive(Debug)]
pub struct BlockPattern {
    /// Sparsity of the upper triangle.
    pub pattern: Pattern,
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
        let mut col_ptr = Vec::with_capacity(4 * n + 1);
        let mut row_idx = Vec::new();
        col_ptr.push(0);
        for j in 0..n {
            let blocks = column_blocks[j] as usize..column_blocks[j + 1] as usize;
            let base = row_idx.len();
            for c in 0..4 {
                for b in blocks.clone() {
                    let i = block_row[b] as usize;
                    let height = if i == j {
                        c + 1
                    } else if one_ring[b] {
                        4
                    } else if c < 3 {
                        3
                    } else {
                        continue;
                    };
                    block_start[b][c] = (row_idx.len() - base) as u32;
                    row_idx.extend((0..height).map(|r| 4 * i + r));
                }
                col_ptr.push(row_idx.len());
            }
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
            pattern: Pattern {
                n: 4 * n,
                col_ptr,
                row_idx,
            },
            block_start,
            block_row,
            column_blocks,
            triangle_blocks,
            gram_start,
            gram,
        }
    }

    /// Range of the values of a vertex's columns.
    pub fn piece(&self, vertex: usize) -> std::ops::Range<usize> {
        self.pattern.col_ptr[4 * vertex]..self.pattern.col_ptr[4 * vertex + 4]
    }
}
