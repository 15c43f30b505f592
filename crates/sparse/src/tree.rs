//! Elimination tree of a symmetric pattern (Liu, SIAM J. Matrix Anal. Appl. 11 (1990) 134).

use crate::graph::Graph;

/// Marks a root.
pub(crate) const NO_PARENT: u32 = u32::MAX;

/// Rearranges an elimination order so that every subtree of the elimination tree is contiguous
/// and children precede parents. The factor keeps its entries; only their places change.
pub(crate) fn postordered(graph: &Graph, order: &[u32]) -> Vec<u32> {
    let parents = parents(graph, order);
    postorder(&parents).into_iter().map(|k| order[k as usize]).collect()
}

/// Parent of every position of the order, or [`NO_PARENT`].
fn parents(graph: &Graph, order: &[u32]) -> Vec<u32> {
    let nodes = order.len();
    let mut position = vec![0_u32; nodes];
    for (k, &node) in (0..).zip(order) {
        position[node as usize] = k;
    }
    let mut parent = vec![NO_PARENT; nodes];
    let mut ancestor = vec![NO_PARENT; nodes];
    for (k, &node) in (0_u32..).zip(order) {
        for &other in graph.neighbours(node as usize) {
            let mut j = position[other as usize];
            // Climb from every earlier neighbour to its root, shortening the path on the way.
            while j < k {
                let next = ancestor[j as usize];
                ancestor[j as usize] = k;
                if next == NO_PARENT {
                    parent[j as usize] = k;
                    break;
                }
                j = next;
            }
        }
    }
    parent
}

/// Nodes of a forest, children before parents, subtrees contiguous, siblings in their order.
fn postorder(parents: &[u32]) -> Vec<u32> {
    let nodes = parents.len();
    let mut first_child = vec![NO_PARENT; nodes];
    let mut sibling = vec![NO_PARENT; nodes];
    let mut stack = Vec::new();
    for k in (0..nodes).rev() {
        match parents[k] {
            NO_PARENT => stack.push(k as u32),
            parent => {
                sibling[k] = first_child[parent as usize];
                first_child[parent as usize] = k as u32;
            }
        }
    }
    let mut order = Vec::with_capacity(nodes);
    while let Some(&node) = stack.last() {
        let child = first_child[node as usize];
        if child == NO_PARENT {
            order.push(node);
            stack.pop();
        } else {
            first_child[node as usize] = sibling[child as usize];
            stack.push(child);
        }
    }
    order
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::Pattern;

    #[test]
    fn arrow_matrix_has_a_star_for_a_tree() {
        // Every unknown is coupled to the last alone.
        let pattern = Pattern {
            n: 4,
            col_ptr: vec![0, 1, 2, 3, 7],
            row_idx: vec![0, 1, 2, 0, 1, 2, 3],
        };
        let graph = Graph::of_blocks(&pattern, 1);
        assert_eq!(parents(&graph, &[0, 1, 2, 3]), [3, 3, 3, NO_PARENT]);
        // Eliminating the hub first makes a chain.
        assert_eq!(parents(&graph, &[3, 0, 1, 2]), [1, 2, 3, NO_PARENT]);
    }

    #[test]
    fn postorder_puts_subtrees_together() {
        //   4      children of 4: 2, 3; of 2: 0; of 3: 1
        let parents = [2, 3, 4, 4, NO_PARENT];
        assert_eq!(postorder(&parents), [0, 2, 1, 3, 4]);
    }
}
