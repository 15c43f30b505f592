//! The tree of fronts: what each takes from the matrix and from its children, and where its
//! numbers live. All of it is fixed by the connectivity, so the numeric work runs in memory laid out
//! beforehand, and its order of summation is the same for any number of threads.

use std::ops::Range;

use faer::sparse::linalg::cholesky::supernodal::SymbolicSupernodalCholesky;

use crate::{Pattern, SparseError};

/// Columns eliminated at a time within a front.
pub(crate) const BLOCK: usize = 192;
/// A subtree with less than this part of all work is one task …
const TASK_SHARE: f64 = 1.0 / 32.0;
/// … and so is one of less work than this, where waking a thread would cost too much.
const TASK_FLOPS: f64 = 1e6;
/// Fronts of at least this work are cut in tiles that may run in parallel.
const TILED_FLOPS: f64 = 2e7;

/// Consecutive rows of a child's update that land in consecutive rows of its parent's front.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Run {
    pub from: u32,
    pub to: u32,
    pub length: u32,
}

/// One front: a dense matrix of `columns` unknowns to eliminate and `rows` unknowns they touch.
#[derive(Debug, Clone, Default)]
pub(crate) struct Node {
    /// Place of the first column in the elimination order.
    pub begin: usize,
    pub columns: usize,
    pub rows: usize,
    /// Start of the eliminated columns in the factor, stored column by column, `height` each.
    pub panel: usize,
    /// Start of the `height` numbers of this front in a right-hand side.
    pub vector: usize,
    /// First node of the subtree, which is contiguous.
    pub first: usize,
    /// Range in [`Plan::children`].
    pub children: Range<usize>,
    /// Range in [`Plan::entries`].
    pub entries: Range<usize>,
    /// Range in [`Plan::runs`]: the way from this node's update to its parent's front.
    pub runs: Range<usize>,
    /// Working memory of the whole subtree within the arena.
    pub region: Range<usize>,
    /// The update lies at the end of the region, those of the children towards its start;
    /// otherwise the other way round.
    pub update_last: bool,
    /// The node at or below this one whose children are tasks; none if the subtree is one task.
    pub fork: Option<usize>,
    pub tiled: bool,
}

impl Node {
    pub fn height(&self) -> usize {
        self.columns + self.rows
    }

    pub fn panel_range(&self) -> Range<usize> {
        self.panel..self.panel + self.columns * self.height()
    }

    pub fn update_length(&self) -> usize {
        self.rows * self.rows
    }

    pub fn scratch_length(&self) -> usize {
        self.height() * self.columns.min(BLOCK)
    }

    /// Place of the update in the arena.
    pub fn update(&self) -> Range<usize> {
        if self.update_last {
            self.region.end - self.update_length()..self.region.end
        } else {
            self.region.start..self.region.start + self.update_length()
        }
    }

    /// Multiplications and additions of the elimination.
    pub fn flops(&self) -> f64 {
        let (w, m) = (self.columns as f64, self.rows as f64);
        w * w * w / 3.0 + w * w * m + w * m * m
    }
}

/// Where an entry of the matrix goes within its panel.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Entry {
    pub source: u32,
    pub place: u32,
}

/// The fronts, children before parents; the last one is an empty root that joins the trees of a
/// disconnected matrix.
#[derive(Debug)]
pub(crate) struct Plan {
    pub nodes: Vec<Node>,
    pub children: Vec<usize>,
    pub entries: Vec<Entry>,
    pub runs: Vec<Run>,
    /// Entry of the pattern that holds the diagonal of each unknown, in elimination order.
    pub diagonal: Vec<usize>,
    pub factor_length: usize,
    pub vector_length: usize,
    pub arena_length: usize,
    pub flops: f64,
}

impl Plan {
    /// `position` is the place of each unknown in the elimination order.
    pub fn new(
        pattern: &Pattern,
        position: &[usize],
        supernodes: &SymbolicSupernodalCholesky<usize>,
    ) -> Result<Self, SparseError> {
        let too_large = SparseError::TooLarge { unknowns: pattern.n };
        if u32::try_from(pattern.entries()).is_err() {
            return Err(too_large);
        }
        let mut plan = Self {
            nodes: nodes(supernodes),
            children: Vec::new(),
            entries: Vec::with_capacity(pattern.entries()),
            runs: Vec::new(),
            diagonal: vec![0; pattern.n],
            factor_length: 0,
            vector_length: 0,
            arena_length: 0,
            flops: 0.0,
        };
        for node in &mut plan.nodes {
            if u32::try_from(node.panel_range().len()).is_err() {
                return Err(too_large);
            }
            node.panel = plan.factor_length;
            plan.factor_length += node.columns * node.height();
            node.vector = plan.vector_length;
            plan.vector_length += node.height();
            plan.flops += node.flops();
        }
        for (&place, &end) in position.iter().zip(&pattern.col_ptr[1..]) {
            plan.diagonal[place] = end - 1;
        }
        let parents = parents(supernodes, &plan.nodes);
        plan.link(&parents);
        plan.place_entries(pattern, position, supernodes);
        plan.find_runs(&parents, supernodes);
        plan.find_tasks();
        plan.lay_out();
        Ok(plan)
    }

    pub fn children(&self, node: &Node) -> &[usize] {
        &self.children[node.children.clone()]
    }

    /// Lists of children and first descendants.
    fn link(&mut self, parents: &[usize]) {
        let root = self.nodes.len() - 1;
        let mut count = vec![0; self.nodes.len()];
        for &parent in &parents[..root] {
            count[parent] += 1;
        }
        let mut start = 0;
        for (node, count) in self.nodes.iter_mut().zip(&count) {
            node.children = start..start;
            start += count;
        }
        self.children = vec![0; start];
        for (k, &parent) in parents.iter().enumerate() {
            let node = &self.nodes[k];
            self.nodes[k].first = self.children(node).first().map_or(k, |&c| self.nodes[c].first);
            if k < root {
                let parent = &mut self.nodes[parent];
                self.children[parent.children.end] = k;
                parent.children.end += 1;
            }
        }
    }

    /// Sorts the entries of the matrix by front and place.
    fn place_entries(
        &mut self,
        pattern: &Pattern,
        position: &[usize],
        supernodes: &SymbolicSupernodalCholesky<usize>,
    ) {
        // Bucket by eliminated column first.
        let ends = |row: usize, column: usize| {
            let (p, q) = (position[row], position[column]);
            (p.min(q), p.max(q))
        };
        let mut start = vec![0_usize; pattern.n + 1];
        for column in 0..pattern.n {
            for &row in pattern.rows(column) {
                start[ends(row, column).0 + 1] += 1;
            }
        }
        for k in 0..pattern.n {
            start[k + 1] += start[k];
        }
        let mut next = start.clone();
        let mut sorted = vec![(0_u32, 0_usize); pattern.entries()];
        let mut source = 0;
        for column in 0..pattern.n {
            for &row in pattern.rows(column) {
                let (low, high) = ends(row, column);
                sorted[next[low]] = (source, high);
                next[low] += 1;
                source += 1;
            }
        }
        let root = self.nodes.len() - 1;
        let mut local = vec![0_usize; pattern.n];
        for (k, node) in self.nodes[..root].iter_mut().enumerate() {
            let (begin, height) = (node.begin, node.height());
            for j in 0..node.columns {
                local[begin + j] = j;
            }
            for (j, &row) in (node.columns..).zip(supernodes.supernode(k).pattern()) {
                local[row] = j;
            }
            node.entries = start[begin]..start[begin + node.columns];
            for j in 0..node.columns {
                for &(source, high) in &sorted[start[begin + j]..start[begin + j + 1]] {
                    let place = (j * height + local[high]) as u32;
                    self.entries.push(Entry { source, place });
                }
            }
        }
        self.nodes[root].entries = pattern.entries()..pattern.entries();
    }

    fn find_runs(&mut self, parents: &[usize], supernodes: &SymbolicSupernodalCholesky<usize>) {
        let root = self.nodes.len() - 1;
        for (k, &above) in parents[..root].iter().enumerate() {
            let start = self.runs.len();
            if above != root {
                let parent = &self.nodes[above];
                let end = parent.begin + parent.columns;
                let target = supernodes.supernode(above).pattern();
                let mut cursor = 0;
                for (from, &row) in (0_u32..).zip(supernodes.supernode(k).pattern()) {
                    let to = if row < end {
                        row - parent.begin
                    } else {
                        while target[cursor] < row {
                            cursor += 1;
                        }
                        parent.columns + cursor
                    } as u32;
                    // A run stays within the columns or within the rows of the parent.
                    let border = to as usize == parent.columns;
                    match self.runs[start..].last_mut() {
                        Some(run) if run.to + run.length == to && !border => run.length += 1,
                        _ => self.runs.push(Run { from, to, length: 1 }),
                    }
                }
            }
            self.nodes[k].runs = start..self.runs.len();
        }
    }

    fn find_tasks(&mut self) {
        let grain = (self.flops * TASK_SHARE).max(TASK_FLOPS);
        let mut work = vec![0.0; self.nodes.len()];
        for k in 0..self.nodes.len() {
            let node = &self.nodes[k];
            let children = self.children(node);
            work[k] = node.flops() + children.iter().map(|&c| work[c]).sum::<f64>();
            let mut heavy = children.iter().filter(|&&c| work[c] >= grain);
            let fork = match (heavy.next(), heavy.next()) {
                (Some(_), Some(_)) => Some(k),
                (Some(&only), None) => self.nodes[only].fork,
                _ => None,
            };
            let tiled = node.flops() >= TILED_FLOPS;
            self.nodes[k].fork = fork;
            self.nodes[k].tiled = tiled;
        }
    }

    /// Assigns the working memory: a stack within a task, separate regions for tasks that may run
    /// at the same time. Sizes are found from the leaves up, places from the root down.
    fn lay_out(&mut self) {
        let root = self.nodes.len() - 1;
        // Which end a node's update takes alternates along every path, so that it never lies in
        // the way of the updates it is made from.
        self.nodes[root].update_last = true;
        for k in (0..=root).rev() {
            for c in self.nodes[k].children.clone() {
                self.nodes[self.children[c]].update_last = !self.nodes[k].update_last;
            }
        }
        let mut size = vec![0_usize; self.nodes.len()];
        for k in 0..=root {
            let node = &self.nodes[k];
            let (mut stacked, mut peak) = (0, 0);
            for &c in self.children(node) {
                peak = peak.max(stacked + size[c]);
                stacked += if node.fork == Some(k) { size[c] } else { self.nodes[c].update_length() };
            }
            size[k] = peak.max(stacked + node.update_length() + node.scratch_length());
        }
        self.arena_length = size[root];
        self.nodes[root].region = 0..size[root];
        for k in (0..=root).rev() {
            let node = self.nodes[k].clone();
            let forks = node.fork == Some(k);
            let children = self.children(&node).to_vec();
            // Tasks get ascending regions; those of a stack start at the end away from `update`.
            let total: usize = children.iter().map(|&c| size[c]).sum();
            let mut offset = if forks && !node.update_last { size[k] - total } else { 0 };
            for c in children {
                let start = if forks || node.update_last {
                    node.region.start + offset
                } else {
                    node.region.end - offset - size[c]
                };
                self.nodes[c].region = start..start + size[c];
                offset += if forks { size[c] } else { self.nodes[c].update_length() };
            }
        }
    }
}

/// Shapes of the fronts; places are filled in later.
fn nodes(supernodes: &SymbolicSupernodalCholesky<usize>) -> Vec<Node> {
    let begin = supernodes.supernode_begin().iter();
    let mut nodes: Vec<Node> = begin
        .zip(supernodes.supernode_end())
        .enumerate()
        .map(|(k, (&begin, &end))| Node {
            begin,
            columns: end - begin,
            rows: supernodes.supernode(k).pattern().len(),
            ..Node::default()
        })
        .collect();
    nodes.push(Node { begin: supernodes.nrows(), ..Node::default() });
    nodes
}

/// Parent of every front: the one that eliminates its first row. The root is its own parent.
fn parents(supernodes: &SymbolicSupernodalCholesky<usize>, nodes: &[Node]) -> Vec<usize> {
    let root = nodes.len() - 1;
    let mut owner = vec![0; supernodes.nrows()];
    for (k, node) in nodes.iter().enumerate() {
        owner[node.begin..node.begin + node.columns].fill(k);
    }
    (0..root)
        .map(|k| supernodes.supernode(k).pattern().first().map_or(root, |&row| owner[row]))
        .chain([root])
        .collect()
}
