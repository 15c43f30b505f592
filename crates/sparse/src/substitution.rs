//! Forward and backward substitution over the tree of fronts.
//!
//! The right-hand side is kept front by front: the unknowns a front eliminates, then what it
//! passes to (or takes from) its parent. Every front thus writes to its own numbers only, and
//! subtrees can run at the same time.

use std::ops::Range;

use crate::plan::{Node, Plan};

/// A factor ready to be applied.
#[derive(Clone, Copy)]
pub(crate) struct Substitution<'a> {
    pub plan: &'a Plan,
    pub factor: &'a [f64],
}

impl Substitution<'_> {
    /// Replaces the eliminated part of every front's numbers by the solution.
    pub fn run(self, vectors: &mut [f64]) {
        let root = self.plan.nodes.len() - 1;
        self.subtree(root, vectors, false);
        self.subtree(root, vectors, true);
    }

    fn subtree(self, k: usize, vectors: &mut [f64], backward: bool) {
        let nodes = &self.plan.nodes;
        let node = &nodes[k];
        let base = nodes[node.first].vector;
        let Some(fork) = node.fork else {
            return self.sequence(node.first..k + 1, base, vectors, backward);
        };
        let branching = &nodes[fork];
        let (before, after) = (node.first..branching.first, fork..k + 1);
        let start = nodes[branching.first].vector;
        let (first, last) = if backward { (after, before) } else { (before, after) };
        self.sequence(first, base, vectors, backward);
        let below = &mut vectors[start - base..branching.vector - base];
        self.tasks(self.plan.children(branching), start, below, backward);
        self.sequence(last, base, vectors, backward);
    }

    fn tasks(self, list: &[usize], base: usize, vectors: &mut [f64], backward: bool) {
        let nodes = &self.plan.nodes;
        match list {
            [] => {}
            &[k] => self.subtree(k, vectors, backward),
            _ => {
                let (left, right) = list.split_at(list.len() / 2);
                let split = nodes[nodes[right[0]].first].vector;
                let (vectors_left, vectors_right) = vectors.split_at_mut(split - base);
                rayon::join(
                    || self.tasks(left, base, vectors_left, backward),
                    || self.tasks(right, split, vectors_right, backward),
                );
            }
        }
    }

    fn sequence(self, range: Range<usize>, base: usize, vectors: &mut [f64], backward: bool) {
        let step = |node: &Node| {
            let (below, own) = vectors.split_at_mut(node.vector - base);
            let own = &mut own[..node.height()];
            if backward {
                self.backward(node, base, own, below);
            } else {
                self.forward(node, base, own, below);
            }
        };
        let nodes = &self.plan.nodes[range];
        if backward { nodes.iter().rev().for_each(step) } else { nodes.iter().for_each(step) }
    }

    fn forward(self, node: &Node, base: usize, own: &mut [f64], below: &[f64]) {
        own[node.columns..].fill(0.0);
        for &child in self.plan.children(node) {
            let child = &self.plan.nodes[child];
            let start = child.vector + child.columns - base;
            for run in &self.plan.runs[child.runs.clone()] {
                let (from, to, length) =
                    (start + run.from as usize, run.to as usize, run.length as usize);
                for (t, s) in own[to..to + length].iter_mut().zip(&below[from..from + length]) {
                    *t += s;
                }
            }
        }
        eliminate(&self.factor[node.panel_range()], node.columns, own);
    }

    fn backward(self, node: &Node, base: usize, own: &mut [f64], below: &mut [f64]) {
        let panel = &self.factor[node.panel_range()];
        for (j, x) in own[..node.columns].iter_mut().enumerate() {
            *x /= panel[j * node.height() + j];
        }
        substitute(panel, node.columns, own);
        for &child in self.plan.children(node) {
            let child = &self.plan.nodes[child];
            let start = child.vector + child.columns - base;
            for run in &self.plan.runs[child.runs.clone()] {
                let (to, from, length) =
                    (start + run.from as usize, run.to as usize, run.length as usize);
                below[to..to + length].copy_from_slice(&own[from..from + length]);
            }
        }
    }
}

/// Four neighbouring columns of a panel.
fn four(panel: &[f64], height: usize, first: usize) -> [&[f64]; 4] {
    [0, 1, 2, 3].map(|k| &panel[(first + k) * height..(first + k + 1) * height])
}

/// Solves with the unit lower triangle of a panel and subtracts from the rows below it.
fn eliminate(panel: &[f64], columns: usize, v: &mut [f64]) {
    let height = v.len();
    let whole = columns - columns % 4;
    for j in (0..whole).step_by(4) {
        let c = four(panel, height, j);
        let x0 = v[j];
        let x1 = v[j + 1] - c[0][j + 1] * x0;
        let x2 = v[j + 2] - c[0][j + 2] * x0 - c[1][j + 2] * x1;
        let x3 = v[j + 3] - c[0][j + 3] * x0 - c[1][j + 3] * x1 - c[2][j + 3] * x2;
        [v[j + 1], v[j + 2], v[j + 3]] = [x1, x2, x3];
        let [c0, c1, c2, c3] = c.map(|c| &c[j + 4..]);
        for ((((v, c0), c1), c2), c3) in v[j + 4..].iter_mut().zip(c0).zip(c1).zip(c2).zip(c3) {
            *v -= (c0 * x0 + c1 * x1) + (c2 * x2 + c3 * x3);
        }
    }
    for j in whole..columns {
        let x = v[j];
        let c = &panel[j * height..(j + 1) * height];
        for (v, c) in v[j + 1..].iter_mut().zip(&c[j + 1..]) {
            *v -= c * x;
        }
    }
}

/// Solves with the transpose of what [`eliminate`] applies, given the rows below.
fn substitute(panel: &[f64], columns: usize, v: &mut [f64]) {
    let height = v.len();
    let whole = columns - columns % 4;
    for j in (whole..columns).rev() {
        let c = &panel[j * height..(j + 1) * height];
        let sum: f64 = c[j + 1..].iter().zip(&v[j + 1..]).map(|(c, v)| c * v).sum();
        v[j] -= sum;
    }
    for j in (0..whole).step_by(4).rev() {
        let c = four(panel, height, j);
        let [s0, s1, s2, s3] = dots(c.map(|c| &c[j + 4..]), &v[j + 4..]);
        let x3 = v[j + 3] - s3;
        let x2 = v[j + 2] - s2 - c[2][j + 3] * x3;
        let x1 = v[j + 1] - s1 - c[1][j + 2] * x2 - c[1][j + 3] * x3;
        let x0 = v[j] - s0 - c[0][j + 1] * x1 - c[0][j + 2] * x2 - c[0][j + 3] * x3;
        [v[j], v[j + 1], v[j + 2], v[j + 3]] = [x0, x1, x2, x3];
    }
}

/// Products of four columns with a vector, in two fixed lanes each.
fn dots(columns: [&[f64]; 4], v: &[f64]) -> [f64; 4] {
    let mut lanes = [[0.0; 2]; 4];
    let (v_pairs, v_rest) = v.as_chunks::<2>();
    let chunks = columns.map(|c| c.as_chunks::<2>());
    let [(p0, _), (p1, _), (p2, _), (p3, _)] = chunks;
    for ((((v, p0), p1), p2), p3) in v_pairs.iter().zip(p0).zip(p1).zip(p2).zip(p3) {
        for i in 0..2 {
            lanes[0][i] += p0[i] * v[i];
            lanes[1][i] += p1[i] * v[i];
            lanes[2][i] += p2[i] * v[i];
            lanes[3][i] += p3[i] * v[i];
        }
    }
    let rest = |k: usize| chunks[k].1.iter().zip(v_rest).map(|(c, v)| c * v).sum::<f64>();
    [0, 1, 2, 3].map(|k| lanes[k][0] + lanes[k][1] + rest(k))
}
