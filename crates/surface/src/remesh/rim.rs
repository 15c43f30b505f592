//! Wanted lengths near a rim, whose edges are what they are.

use super::edit::EditMesh;
use std::collections::VecDeque;

/// Largest change of the wanted length per length away from a rim.
const SLOPE: f64 = 0.5;

impl EditMesh {
    /// Give rim vertices the mean length of their rim edges as wanted length, and let the wanted length
    /// change from there by no more than [`SLOPE`] per length. Otherwise edges that end on the rim would be
    /// split or collapsed until thin triangles stand on the rim's edges, which never change.
    pub(super) fn match_targets_to_rim(&mut self) {
        let rim_vertices: Vec<u32> = (0..self.n_names())
            .filter(|&v| self.links.rim[v as usize])
            .collect();
        if rim_vertices.is_empty() {
            return;
        }
        let mut ring = Vec::new();
        let mut least = vec![0.0; self.target.len()];
        let mut most = vec![f64::INFINITY; self.target.len()];
        for &v in &rim_vertices {
            self.links.ring(v, &mut ring);
            let ends = [ring.first(), ring.last()];
            let sum: f64 = ends
                .iter()
                .flatten()
                .map(|&&w| self.edge(v, w).norm())
                .sum();
            least[v as usize] = 0.5 * sum;
            most[v as usize] = 0.5 * sum;
        }
        let largest = self.target.iter().copied().fold(0.0, f64::max);
        let mut waiting: VecDeque<u32> = rim_vertices.into();
        while let Some(v) = waiting.pop_front() {
            self.links.ring(v, &mut ring);
            for &w in &ring {
                if self.links.rim[w as usize] {
                    continue;
                }
                let change = SLOPE * self.edge(v, w).norm();
                let (low, high) = (least[v as usize] - change, most[v as usize] + change);
                let (at, mut news) = (w as usize, false);
                if low > least[at] {
                    least[at] = low;
                    news = true;
                }
                if high < most[at] && high < largest {
                    most[at] = high;
                    news = true;
                }
                if news {
                    waiting.push_back(w);
                }
            }
        }
        for ((target, low), high) in self.target.iter_mut().zip(&least).zip(&most) {
            // Rims of very different edges close to each other may contradict; then the finer one wins.
            *target = target.max(*low).min(*high);
        }
    }
}
