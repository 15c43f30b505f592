//! Multifrontal factorisation over the tree of fronts (Duff & Reid, ACM Trans. Math. Softw. 9
//! (1983) 302): each front gathers its entries of the matrix and the updates of its children,
//! eliminates its columns, and leaves an update for its parent.

use std::ops::Range;

use faer::MatMut;

use crate::dense::eliminate;
use crate::plan::{Node, Plan};

/// Columns assembled together in a tiled front.
const ASSEMBLY: usize = 64;

/// One factorisation: the plan and the values of the matrix.
#[derive(Clone, Copy)]
pub(crate) struct Numeric<'a> {
    pub plan: &'a Plan,
    pub values: &'a [f64],
}

impl Numeric<'_> {
    /// Fills `factor`; the error is the place of the first pivot that vanishes.
    pub fn run(self, factor: &mut [f64], arena: &mut [f64]) -> Result<(), usize> {
        self.subtree(self.plan.nodes.len() - 1, factor, arena)
    }

    /// Factorises a subtree, given its part of the factor and its region of the arena.
    fn subtree(self, k: usize, factor: &mut [f64], arena: &mut [f64]) -> Result<(), usize> {
        let nodes = &self.plan.nodes;
        let node = &nodes[k];
        let base = (nodes[node.first].panel, node.region.start);
        let Some(fork) = node.fork else {
            return self.sequence(node.first..k + 1, base, factor, arena);
        };
        let branching = &nodes[fork];
        self.sequence(node.first..branching.first, base, factor, arena)?;
        let region = &branching.region;
        self.tasks(
            self.plan.children(branching),
            &mut factor[nodes[branching.first].panel - base.0..branching.panel - base.0],
            (nodes[branching.first].panel, region.start),
            &mut arena[region.start - base.1..region.end - base.1],
        )?;
        self.sequence(fork..k + 1, base, factor, arena)
    }

    /// Factorises the subtrees below the nodes of a list, which may run at the same time. Both
    /// halves always run to their end, so the error reported is always the first in the order.
    fn tasks(
        self,
        list: &[usize],
        factor: &mut [f64],
        base: (usize, usize),
        arena: &mut [f64],
    ) -> Result<(), usize> {
        let nodes = &self.plan.nodes;
        match list {
            [] => Ok(()),
            &[k] => {
                let region = &nodes[k].region;
                self.subtree(k, factor, &mut arena[region.start - base.1..region.end - base.1])
            }
            _ => {
                let (left, right) = list.split_at(list.len() / 2);
                let middle = &nodes[right[0]];
                let split = (nodes[middle.first].panel, middle.region.start);
                let (factor_left, factor_right) = factor.split_at_mut(split.0 - base.0);
                let (arena_left, arena_right) = arena.split_at_mut(split.1 - base.1);
                let (first, second) = rayon::join(
                    || self.tasks(left, factor_left, base, arena_left),
                    || self.tasks(right, factor_right, split, arena_right),
                );
                first.and(second)
            }
        }
    }

    fn sequence(
        self,
        range: Range<usize>,
        base: (usize, usize),
        factor: &mut [f64],
        arena: &mut [f64],
    ) -> Result<(), usize> {
        for node in &self.plan.nodes[range] {
            let panel = node.panel_range();
            let region = node.region.start - base.1..node.region.end - base.1;
            self.front(node, &mut factor[panel.start - base.0..panel.end - base.0], &mut arena[region])?;
        }
        Ok(())
    }

    fn front(self, node: &Node, panel: &mut [f64], region: &mut [f64]) -> Result<(), usize> {
        if node.columns == 0 {
            return Ok(());
        }
        let own = node.update_length() + node.scratch_length();
        let origin = node.region.start;
        let (update, scratch, below, below_start) = if node.update_last {
            let (below, own) = region.split_at_mut(region.len() - own);
            let (scratch, update) = own.split_at_mut(node.scratch_length());
            (update, scratch, &*below, origin)
        } else {
            let (own, below) = region.split_at_mut(own);
            let start = origin + own.len();
            let (update, scratch) = own.split_at_mut(node.update_length());
            (update, scratch, &*below, start)
        };
        let child_update = |k: usize| {
            let place = self.plan.nodes[k].update();
            &below[place.start - below_start..place.end - below_start]
        };
        self.assemble(node, panel, update, child_update);
        let (height, columns, rows) = (node.height(), node.columns, node.rows);
        eliminate(
            MatMut::from_column_major_slice_mut(panel, height, columns),
            MatMut::from_column_major_slice_mut(update, rows, rows),
            scratch,
            node.children.is_empty(),
            node.tiled,
            |column| self.values[self.plan.diagonal[node.begin + column]],
        )
        .map_err(|column| node.begin + column)
    }

    /// Sets the front to its entries of the matrix plus the updates of its children, column by
    /// column. Without children the update is left alone: the elimination overwrites it.
    fn assemble<'u>(
        self,
        node: &Node,
        panel: &mut [f64],
        update: &mut [f64],
        child_update: impl Fn(usize) -> &'u [f64] + Sync,
    ) {
        let (height, columns, rows) = (node.height(), node.columns, node.rows);
        let fill_panel = |first: usize, part: &mut [f64]| {
            part.fill(0.0);
            let offset = first * height;
            let entries = &self.plan.entries[node.entries.clone()];
            let start = entries.partition_point(|e| (e.place as usize / height) < first);
            for entry in &entries[start..] {
                let Some(target) = part.get_mut(entry.place as usize - offset) else { break };
                *target = self.values[entry.source as usize];
            }
            let range = first..first + part.len() / height;
            for &child in self.plan.children(node) {
                self.add_columns(child, child_update(child), range.clone(), 0, height, part);
            }
        };
        let fill_update = |first: usize, part: &mut [f64]| {
            let count = part.len() / rows;
            for (j, column) in part.chunks_exact_mut(rows).enumerate() {
                column[first + j..].fill(0.0);
            }
            let range = columns + first..columns + first + count;
            for &child in self.plan.children(node) {
                self.add_columns(child, child_update(child), range.clone(), columns, rows, part);
            }
        };
        let with_update = rows > 0 && !node.children.is_empty();
        if node.tiled {
            use rayon::prelude::*;
            let parts = panel.par_chunks_mut(ASSEMBLY * height).enumerate();
            parts.for_each(|(k, part)| fill_panel(k * ASSEMBLY, part));
            if with_update {
                let parts = update.par_chunks_mut(ASSEMBLY * rows).enumerate();
                parts.for_each(|(k, part)| fill_update(k * ASSEMBLY, part));
            }
        } else {
            fill_panel(0, panel);
            if with_update {
                fill_update(0, update);
            }
        }
    }

    /// Adds the columns of a child's update that fall in the given columns of the front. `part`
    /// holds those, from row `top` of the front on, `stride` numbers each.
    fn add_columns(
        self,
        child: usize,
        update: &[f64],
        columns: Range<usize>,
        top: usize,
        stride: usize,
        part: &mut [f64],
    ) {
        let child = &self.plan.nodes[child];
        let runs = &self.plan.runs[child.runs.clone()];
        let start = runs.partition_point(|r| (r.to + r.length) as usize <= columns.start);
        for (k, run) in runs.iter().enumerate().skip(start) {
            let (from, to, length) = (run.from as usize, run.to as usize, run.length as usize);
            if to >= columns.end {
                break;
            }
            for j in columns.start.saturating_sub(to)..length.min(columns.end - to) {
                let source = &update[(from + j) * child.rows..(from + j + 1) * child.rows];
                let column = to + j - columns.start;
                let target = &mut part[column * stride..(column + 1) * stride];
                let (diagonal, to) = (from + j, to + j - top);
                add(&mut target[to..to + length - j], &source[diagonal..from + length]);
                for run in &runs[k + 1..] {
                    let (from, to, length) =
                        (run.from as usize, run.to as usize - top, run.length as usize);
                    add(&mut target[to..to + length], &source[from..from + length]);
                }
            }
        }
    }
}

fn add(target: &mut [f64], source: &[f64]) {
    for (t, s) in target.iter_mut().zip(source) {
        *t += s;
    }
}
