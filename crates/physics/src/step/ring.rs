//! Symmetric matrices that couple neighbouring vertices only, with the same small number of unknowns at each.

use pellicle_sparse::Pattern;
use pellicle_surface::Topology;

/// Where the entries of such a matrix live: upper triangle by columns, as [`Pattern`] wants them.
#[derive(Debug)]
pub(super) struct RingLayout {
    /// Unknowns per vertex.
    block: usize,
    /// Start of each vertex's columns.
    base: Vec<usize>,
    /// Number of neighbours with a smaller index.
    below: Vec<u32>,
}

impl RingLayout {
    pub fn new(topology: &Topology, block: usize) -> Self {
        let mut base = Vec::with_capacity(topology.n_vertices + 1);
        let mut below = Vec::with_capacity(topology.n_vertices);
        let mut entries = 0;
        for j in 0..topology.n_vertices {
            let count = topology.neighbours.of(j).partition_point(|&i| (i as usize) < j);
            base.push(entries);
            below.push(count as u32);
            entries += block * block * count + block * (block + 1) / 2;
        }
        base.push(entries);
        Self { block, base, below }
    }

    pub fn entries(&self) -> usize {
        self.base.last().copied().unwrap_or(0)
    }

    pub fn pattern(&self, topology: &Topology) -> Pattern {
        let m = self.block;
        let mut col_ptr = vec![0];
        let mut row_idx = Vec::with_capacity(self.entries());
        for j in 0..topology.n_vertices {
            for c in 0..m {
                for &i in &topology.neighbours.of(j)[..self.below[j] as usize] {
                    row_idx.extend((0..m).map(|r| m * i as usize + r));
                }
                row_idx.extend((0..=c).map(|r| m * j + r));
                col_ptr.push(row_idx.len());
            }
        }
        Pattern { n: m * topology.n_vertices, col_ptr, row_idx }
    }

    /// Place of entry (row r of vertex i, column c of vertex j), i a neighbour of j with a smaller index, or j itself
    /// and r ≤ c.
    pub fn place(&self, topology: &Topology, i: usize, j: usize, r: usize, c: usize) -> usize {
        let (m, count) = (self.block, self.below[j] as usize);
        let column = self.base[j] + c * m * count + c * (c + 1) / 2;
        if i == j {
            return column + m * count + r;
        }
        column + m * topology.neighbours.of(j).partition_point(|&k| (k as usize) < i) + r
    }

    /// y = A x for one unknown per vertex.
    pub fn multiply(&self, topology: &Topology, values: &[f64], x: &[f64], y: &mut [f64]) {
        y.fill(0.0);
        for j in 0..topology.n_vertices {
            let column = &values[self.base[j]..self.base[j + 1]];
            let mut sum = column[column.len() - 1] * x[j];
            for (&i, value) in topology.neighbours.of(j).iter().zip(&column[..column.len() - 1]) {
                sum += value * x[i as usize];
                y[i as usize] += value * x[j];
            }
            y[j] += sum;
        }
    }
}
