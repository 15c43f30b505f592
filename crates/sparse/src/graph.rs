//! Graph of the blocks of a matrix: one node per mesh vertex, an edge wherever two share an entry.

use crate::Pattern;

/// Adjacency lists, without loops, each sorted.
#[derive(Debug, Clone, Default)]
pub(crate) struct Graph {
    pub start: Vec<u32>,
    pub neighbours: Vec<u32>,
}

impl Graph {
    pub fn nodes(&self) -> usize {
        self.start.len() - 1
    }

    pub fn neighbours(&self, node: usize) -> &[u32] {
        &self.neighbours[self.start[node] as usize..self.start[node + 1] as usize]
    }

    /// Quotient graph of a checked pattern, `block` consecutive unknowns to a node.
    pub fn of_blocks(pattern: &Pattern, block: usize) -> Self {
        let nodes = pattern.n / block;
        // Upper neighbours of every node, each once.
        let mut seen = vec![u32::MAX; nodes];
        let mut upper_start = vec![0_u32; nodes + 1];
        let mut upper = Vec::new();
        for node in 0..nodes {
            for column in node * block..(node + 1) * block {
                for &row in pattern.rows(column) {
                    let other = row / block;
                    if other != node && seen[other] != node as u32 {
                        seen[other] = node as u32;
                        upper.push(other as u32);
                    }
                }
            }
            upper_start[node + 1] = upper.len() as u32;
        }
        let mut start = vec![0_u32; nodes + 1];
        for node in 0..nodes {
            let range = upper_start[node] as usize..upper_start[node + 1] as usize;
            start[node + 1] += range.len() as u32;
            for &other in &upper[range] {
                start[other as usize + 1] += 1;
            }
        }
        for node in 0..nodes {
            start[node + 1] += start[node];
        }
        let mut next = start.clone();
        let mut neighbours = vec![0; 2 * upper.len()];
        for node in 0..nodes {
            for &other in &upper[upper_start[node] as usize..upper_start[node + 1] as usize] {
                for (from, to) in [(node, other), (other as usize, node as u32)] {
                    neighbours[next[from] as usize] = to;
                    next[from] += 1;
                }
            }
        }
        for node in 0..nodes {
            neighbours[start[node] as usize..start[node + 1] as usize].sort_unstable();
        }
        Self { start, neighbours }
    }
}
