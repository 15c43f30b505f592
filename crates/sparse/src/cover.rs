//! Smallest separator within the edges that cross a cut.
//!
//! The nodes whose removal leaves no crossing edge are a vertex cover of the bipartite graph of
//! those edges; by König's theorem the smallest cover is as large as the largest matching and
//! read off from it (Pothen & Fan, ACM Trans. Math. Softw. 16 (1990) 303).

use crate::graph::Graph;
use crate::ordering::Side;

const FREE: u32 = u32::MAX;

/// Sides of all nodes when ranks below `threshold` are cut from the others.
///
/// Of the two extreme smallest covers the one leaving the better balance is taken.
pub(crate) fn smallest_cover(graph: &Graph, ranks: &[u32], threshold: usize) -> Vec<Side> {
    let nodes = ranks.len();
    let is_below = |k: usize| (ranks[k] as usize) < threshold;
    let mut matching = Matching {
        graph,
        ranks,
        threshold,
        partner: vec![FREE; nodes],
        visited: vec![FREE; nodes],
    };
    let crossing = |k: &usize| {
        graph.neighbours(*k).iter().any(|&other| is_below(other as usize) != is_below(*k))
    };
    let lower: Vec<usize> = (0..nodes).filter(|k| is_below(*k)).filter(crossing).collect();
    let upper: Vec<usize> = (0..nodes).filter(|k| !is_below(*k)).filter(crossing).collect();
    for (round, &node) in lower.iter().enumerate() {
        matching.augment(node as u32, round as u32);
    }
    // Nodes reached from the unmatched ones of one side by alternating paths: the cover is the
    // reached part of the other side and the unreached part of this one.
    let covers = [(&lower, &upper), (&upper, &lower)].map(|(from, to)| {
        let reached = matching.reached(from);
        let mut sides: Vec<Side> = (0..nodes)
            .map(|k| if is_below(k) { Side::Below } else { Side::Above })
            .collect();
        for &k in from.iter().filter(|&&k| !reached[k]) {
            sides[k] = Side::Separator;
        }
        for &k in to.iter().filter(|&&k| reached[k]) {
            sides[k] = Side::Separator;
        }
        sides
    });
    let imbalance = |sides: &[Side]| {
        let count = |side| sides.iter().filter(|&&s| s == side).count();
        count(Side::Below).abs_diff(count(Side::Above))
    };
    let [first, second] = covers;
    if imbalance(&second) < imbalance(&first) { second } else { first }
}

struct Matching<'a> {
    graph: &'a Graph,
    ranks: &'a [u32],
    threshold: usize,
    partner: Vec<u32>,
    visited: Vec<u32>,
}

impl Matching<'_> {
    fn is_below(&self, node: usize) -> bool {
        (self.ranks[node] as usize) < self.threshold
    }

    fn crosses(&self, a: usize, b: usize) -> bool {
        self.is_below(a) != self.is_below(b)
    }

    /// Depth-first search for an augmenting path from a node below; an explicit stack of
    /// (node, position in its neighbour list) keeps long paths off the call stack.
    fn augment(&mut self, root: u32, round: u32) {
        let mut path: Vec<(u32, usize)> = vec![(root, 0)];
        while let Some((node, position)) = path.last_mut() {
            let node = *node;
            let list = self.graph.neighbours(node as usize);
            let Some(&other) = list.get(*position) else {
                path.pop();
                continue;
            };
            *position += 1;
            let other = other as usize;
            if !self.crosses(node as usize, other) || self.visited[other] == round {
                continue;
            }
            self.visited[other] = round;
            let next = self.partner[other];
            if next != FREE {
                path.push((next, 0));
                continue;
            }
            // Every node of the path takes the neighbour it last looked at.
            for &(node, position) in &path {
                let mate = self.graph.neighbours(node as usize)[position - 1];
                self.partner[node as usize] = mate;
                self.partner[mate as usize] = node;
            }
            return;
        }
    }

    fn reached(&self, from: &[usize]) -> Vec<bool> {
        let mut reached = vec![false; self.ranks.len()];
        let mut stack: Vec<usize> = from.iter().copied().filter(|&k| self.partner[k] == FREE).collect();
        stack.iter().for_each(|&k| reached[k] = true);
        while let Some(node) = stack.pop() {
            for &other in self.graph.neighbours(node) {
                let other = other as usize;
                if self.crosses(node, other) && !reached[other] {
                    reached[other] = true;
                    let next = self.partner[other] as usize;
                    if self.partner[other] != FREE && !reached[next] {
                        reached[next] = true;
                        stack.push(next);
                    }
                }
            }
        }
        reached
    }
}
